"""Step records: a small file that says a step is done, so that the next attempt need not do it again.

A record is committed after its data. It is adopted only if it was made from the same inputs (its
fingerprint) and the files it names are still there with their sizes.
"""

import json
import logging
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import pyarrow.fs as pafs

from sparkrank.places import Place
from sparkrank.publish.attempts import RunFolder, utc_now
from sparkrank.publish.entries import TableEntry, tables_as_dict, tables_from_dict, to_json

_log = logging.getLogger(__name__)

_FORMAT = 1


@dataclass(frozen=True, kw_only=True)
class StepRecord:
    """A finished step: what it was made from, the tables it wrote, and JSON-ready facts for later steps."""

    step: str
    fingerprint: str
    tables: Mapping[str, TableEntry] = field(default_factory=dict)
    facts: Mapping[str, Any] = field(default_factory=dict)


def commit_step(run: RunFolder, record: StepRecord) -> None:
    """Make the step count. Its files are complete by now; RunConflict if the run is no longer held."""
    data = {
        "format": _FORMAT,
        "step": record.step,
        "run_id": run.run_id,
        "attempt": run.attempt_id,
        "committed_at": utc_now(),
        "fingerprint": record.fingerprint,
        "tables": tables_as_dict(record.tables),
        "facts": dict(record.facts),
    }
    run.commit(_place(run, record.step), to_json(data))


def read_steps(output: Place, run_id: str) -> list[StepRecord]:
    """All readable records of a run, by step name."""
    folder = output.child("steps", run_id)
    names = [file.name for file in folder.list_files() if file.name.endswith(".json")]
    records = (_read(folder.below(name)) for name in names)
    return [record for record in records if record is not None]


def adopt(run: RunFolder, step: str, fingerprint: str) -> StepRecord | None:
    """The record of the step if it holds for these inputs and its files are there, else None."""
    record = _read(_place(run, step))
    if record is None or record.fingerprint != fingerprint:
        return None
    if missing := missing_file(run.output, record.tables):
        _log.warning("step %s: %s is missing or has another size; doing the step again", step, missing)
        return None
    return record


def missing_file(output: Place, tables: Mapping[str, TableEntry]) -> str | None:
    """The first file named that is not there with its size; None if all are."""
    files = [file for entry in tables.values() for file in entry.files]
    paths = [output.below(file.path).path for file in files]
    infos = output.filesystem.get_file_info(paths)
    for file, info in zip(files, infos, strict=True):
        if info.type != pafs.FileType.File or info.size != file.bytes:
            return file.path
    return None


def _place(run: RunFolder, step: str) -> Place:
    return run.steps.child(f"{step}.json")


def _read(place: Place) -> StepRecord | None:
    """The record at a place; None where there is none or it cannot be read, which is said."""
    try:
        data = json.loads(place.read_bytes())
        if data["format"] != _FORMAT:
            raise ValueError(f"format {data['format']}")
        return StepRecord(
            step=data["step"],
            fingerprint=data["fingerprint"],
            tables=tables_from_dict(data["tables"]),
            facts=data["facts"],
        )
    except FileNotFoundError:
        return None
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        _log.warning("%s: not a step record of this version (%s); doing the step again", place, error)
        return None
