"""The manifest of a run: written last, replaced as a whole, the only truth about what a run holds."""

import dataclasses
import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from sparkrank.errors import RunConflict, SparkrankError
from sparkrank.places import Place
from sparkrank.publish.attempts import RunFolder, manifest_place, utc_now
from sparkrank.publish.entries import TableEntry, tables_as_dict, tables_from_dict, to_json

_FORMAT = 1
_OWN_KEYS = ("format", "run_id", "attempt", "status", "fingerprint", "written_at", "tables")


@dataclass(frozen=True, kw_only=True)
class Manifest:
    """What a run holds.

    `fingerprint` covers everything the results depend on (inputs, configuration, version). `details`
    are JSON-ready and stand beside the other keys: config, inputs, graph, columns and so on.
    """

    run_id: str
    attempt: str
    status: Literal["complete", "held"]
    fingerprint: str
    tables: Mapping[str, TableEntry]
    details: Mapping[str, Any] = field(default_factory=dict)
    written_at: str = ""


def write_manifest(run: RunFolder, manifest: Manifest) -> Manifest:
    """Replace the run's manifest; the manifest as written, with attempt and time.

    Everything it names is complete by now. RunConflict if the run is no longer held.
    """
    if clash := sorted(set(manifest.details) & set(_OWN_KEYS)):
        raise ValueError(f"manifest details: expected names of their own; found {clash}")
    written = dataclasses.replace(manifest, attempt=run.attempt_id, written_at=utc_now())
    data = {
        "format": _FORMAT,
        "run_id": written.run_id,
        "attempt": written.attempt,
        "status": written.status,
        "fingerprint": written.fingerprint,
        "written_at": written.written_at,
        **written.details,
        "tables": tables_as_dict(written.tables),
    }
    run.commit(run.manifest, to_json(data))
    return written


def read_manifest(output: Place, run_id: str) -> Manifest | None:
    """The run's manifest; None where there is none; SparkrankError where it cannot be read."""
    return _read(manifest_place(output, run_id))


def check_run(output: Place, run_id: str, fingerprint: str, *, replace: bool) -> Manifest | None:
    """The manifest if the run is there and made from the same, None if there is none.

    RunConflict if it was made from something else and is not to be replaced.
    """
    found = read_manifest(output, run_id)
    if found is not None and found.fingerprint != fingerprint and not replace:
        raise RunConflict(
            f"run {run_id}: expected a new run or the same inputs, configuration and version; "
            f"found {manifest_place(output, run_id)} made from others; "
            "choose another run.id or add --replace"
        )
    return found


def latest_complete(output: Place) -> Manifest | None:
    """The complete run whose manifest was written last, by time and then run id; None without one."""
    names = [file.name for file in output.child("runs").list_files() if _is_manifest(file.name)]
    found = [_read(output.child("runs", name)) for name in names]
    complete = [manifest for manifest in found if manifest is not None and manifest.status == "complete"]
    return max(complete, key=lambda manifest: (manifest.written_at, manifest.run_id), default=None)


def _is_manifest(name: str) -> bool:
    return name.endswith(".json") and not name.startswith(".") and "/" not in name


def _read(place: Place) -> Manifest | None:
    try:
        data = json.loads(place.read_bytes())
        if data["format"] != _FORMAT:
            raise ValueError(f"format {data['format']}")
        return Manifest(
            run_id=data["run_id"],
            attempt=data["attempt"],
            status=data["status"],
            fingerprint=data["fingerprint"],
            tables=tables_from_dict(data["tables"]),
            details={key: value for key, value in data.items() if key not in _OWN_KEYS},
            written_at=data["written_at"],
        )
    except FileNotFoundError:
        return None
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        raise SparkrankError(
            f"{place}: expected a manifest of format {_FORMAT}; found {type(error).__name__}: {error}; "
            "restore the file or remove it and run again"
        ) from error
