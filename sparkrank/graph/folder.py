"""Names of a graph's work files, and the small records that commit each stage of the build.

A stage writes its files first and its record last, so a stage with a record is whole.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any

from sparkrank.places import Place


@dataclass(frozen=True, kw_only=True)
class GraphFolder:
    """The folder of one graph, named by the graph's fingerprint."""

    place: Place

    def scanned_edges(self, piece: int) -> Place:
        """A piece's edges by tile, as ranks of the piece's hosts; removed after the build."""
        return self.place.child("scan", f"{piece:05d}.edges")

    def scanned_hosts(self, piece: int) -> Place:
        """Ids and names of a piece's hosts, by stripe; removed after the build."""
        return self.place.child("scan", f"{piece:05d}.hosts")

    def scanned_rows(self, stripe: int) -> Place:
        """Where the hosts of every piece are in the stripe; removed after the build."""
        return self.place.child("scan", f"{stripe:03d}.rows")

    def rejected(self, piece: int) -> Place:
        """Rejected values of a piece, as Parquet."""
        return self.place.child("rejected", f"{piece:05d}.parquet")

    def ids(self, stripe: int) -> Place:
        """Sorted ids of the stripe's hosts."""
        return self.place.child("hosts", f"{stripe:03d}.ids")

    def names(self, stripe: int) -> Place:
        """Host names of the stripe, in the order of the ids, as Parquet."""
        return self.place.child("hosts", f"{stripe:03d}.parquet")

    def tile(self, stripe: int, group: int) -> Place:
        """Distinct edges into the stripe from a build group, by id order; removed after the build."""
        return self.place.child("tiles", f"{stripe:03d}-{group:03d}.edges")

    def tile_degrees(self, stripe: int, group: int) -> Place:
        """A tile's part of the degrees; removed after the build."""
        return self.place.child("tiles", f"{stripe:03d}-{group:03d}.degrees")

    def degrees(self, stripe: int) -> Place:
        """Degrees and total out-weight of the stripe's hosts, in the order of the ids."""
        return self.place.child("degrees", f"{stripe:03d}.arrays")

    def peel_marks(self, peel_round: str, stripe: int, group: int) -> Place:
        """Hosts that a tile keeps from being peeled in a round; removed after the build."""
        return self.place.child("peel", f"{peel_round}-{stripe:03d}-{group:03d}.marks")

    def peeled(self, peel_round: str, stripe: int) -> Place:
        """The stripe's peel codes after a round; removed after the build."""
        return self.place.child("peel", f"{peel_round}-{stripe:03d}.codes")

    def order(self, stripe: int) -> Place:
        """Position of each host in the solve's order, and what the solve needs in that order."""
        return self.place.child("order", f"{stripe:03d}.arrays")

    def cell(self, stripe: int, group: int) -> Place:
        """Packed sections of edges into the stripe from a build group."""
        return self.place.child("cells", f"{stripe:03d}-{group:03d}.cell")

    def record(self, stage: str) -> dict[str, Any] | None:
        """What a finished stage recorded, or None."""
        try:
            record: dict[str, Any] = json.loads(self._record_place(stage).read_bytes())
        except FileNotFoundError:
            return None
        return record

    def commit(self, stage: str, record: dict[str, Any]) -> dict[str, Any]:
        """Marks a stage as done."""
        self._record_place(stage).write_bytes(json.dumps(record, indent=1, sort_keys=True).encode())
        return record

    def _record_place(self, stage: str) -> Place:
        return self.place.child(f"{stage}.json")
