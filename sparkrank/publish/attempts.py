"""An attempt at a run: its id, and where each thing it writes goes."""

import re
import secrets
from dataclasses import dataclass
from datetime import UTC, datetime

from sparkrank.errors import ConfigError
from sparkrank.places import Place
from sparkrank.publish.lock import RunLock

_RUN_ID = re.compile(r"[a-z0-9][a-z0-9._-]{0,63}")


def new_attempt_id() -> str:
    """A name for one try at a run, as `20261103t091500z-5f0c2a9be1d4`.

    The time lets a person order attempts; the 48 random bits make it unique without listing what
    is there, which an object store may answer late.
    """
    return f"{datetime.now(UTC):%Y%m%dt%H%M%Sz}-{secrets.token_hex(6)}"


def utc_now() -> str:
    """The time now as records keep it: UTC, ISO 8601, to the second."""
    return datetime.now(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


@dataclass(frozen=True, kw_only=True)
class RunFolder:
    """The places of one attempt at one run below `output`, and the lock it holds on the run."""

    output: Place
    run_id: str
    attempt_id: str
    lock: RunLock

    def __post_init__(self) -> None:
        if not _RUN_ID.fullmatch(self.run_id):
            raise ConfigError(f"run.id: expected [a-z0-9][a-z0-9._-]{{0,63}}; found {self.run_id!r}")

    def table_name(self, table: str) -> str:
        """The attempt's folder of a table, relative to `output`."""
        return f"{table}/run_id={self.run_id}/attempt={self.attempt_id}"

    @property
    def steps(self) -> Place:
        """The folder of the run's step records."""
        return self.output.child("steps", self.run_id)

    @property
    def manifest(self) -> Place:
        """The run's manifest, the only truth about a finished run."""
        return manifest_place(self.output, self.run_id)

    def commit(self, place: Place, data: bytes) -> None:
        """Write the small file that makes earlier writes count; RunConflict if the lock is lost."""
        self.lock.confirm()
        place.write_bytes(data)


def manifest_place(output: Place, run_id: str) -> Place:
    """Where the manifest of a run is."""
    return output.child("runs", f"{run_id}.json")


def outcome_place(output: Place, run_id: str, attempt_id: str) -> Place:
    """Where the outcome of an attempt is."""
    return output.child("outcomes", f"{run_id}-{attempt_id}.json")
