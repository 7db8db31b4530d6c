"""Names of a solve's work files and its small records."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any

from sparkrank.places import Place


@dataclass(frozen=True, kw_only=True)
class SolveFolder:
    """The folder of one solve, named by the fingerprints of its graph and of its teleport."""

    place: Place

    def list_entries(self) -> Place:
        """The entries of the reviewed lists with their ids."""
        return self.place.child("members", "list.arrays")

    def members(self, stripe: int) -> Place:
        """Which list entries are hosts of the stripe, and where."""
        return self.place.child("members", f"{stripe:03d}.arrays")

    def layer(self, phase: int, stripe: int) -> Place:
        """Columns of a peeled phase of the stripe."""
        return self.place.child("layers", f"{phase:02d}-{stripe:03d}.arrays")

    def base(self, stripe: int) -> Place:
        """The constant term of the stripe's core hosts."""
        return self.place.child("base", f"{stripe:03d}.arrays")

    def state(self, step: int, stripe: int) -> Place:
        """Flow of the stripe's core hosts after a step."""
        return self.place.child("states", f"{step:05d}", f"{stripe:03d}.arrays")

    def mixed(self, step: int, stripe: int) -> Place:
        """Flow extrapolated after a step, from which the next step starts."""
        return self.place.child("states", f"{step:05d}", f"{stripe:03d}-mixed.arrays")

    def partial(self, step: int, stripe: int, group: int) -> Place:
        """What one source group adds to the stripe's core hosts in a step; only with several groups."""
        return self.place.child("partials", f"{step:05d}", f"{stripe:03d}-{group:03d}.arrays")

    def reached(self, sweep: int, stripe: int) -> Place:
        """Core hosts of the stripe known to be reached after a sweep."""
        return self.place.child("reached", f"{sweep:05d}", f"{stripe:03d}.arrays")

    def reached_layer(self, phase: int, stripe: int) -> Place:
        """Which hosts of a peeled phase are reached."""
        return self.place.child("reached", f"layer-{phase:02d}", f"{stripe:03d}.arrays")

    def scores(self, stripe: int) -> Place:
        """Rows of ``host_scores`` for the stripe's hosts, a record batch a part of the table."""
        return self.place.child("scores", f"{stripe:03d}.arrow")

    def record(self, name: str) -> dict[str, Any] | None:
        """A committed record, or None."""
        try:
            record: dict[str, Any] = json.loads(self._record_place(name).read_bytes())
        except FileNotFoundError:
            return None
        return record

    def commit(self, name: str, record: dict[str, Any]) -> dict[str, Any]:
        """Makes what the record describes count; everything it names is written by now."""
        self._record_place(name).write_bytes(json.dumps(record, indent=1, sort_keys=True).encode())
        return record

    def drop_step(self, step: int) -> None:
        """Removes the files of a step that a later committed one replaces."""
        for kind in ("states", "partials"):
            self.place.child(kind, f"{step:05d}").delete_tree()

    def _record_place(self, name: str) -> Place:
        return self.place.child("records", f"{name}.json")
