"""Scanned edges → distinct edges of each tile, by position in their stripes.

A tile gets all edges from one group of source stripes into one destination stripe.  Its task looks
the ids up in the stripes' sorted ids, merges duplicates, and leaves the tile's part of the degrees
beside the edges.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import narrow, read_arrays, write_arrays
from sparkrank.errors import InputRefused, SparkrankError
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.kernels.edges import Edges, destinations, merge_duplicates, out_totals, pack_keys, sources
from sparkrank.kernels.edges import split_by_stripe as split_keys
from sparkrank.kernels.lookup import find_ids

MAX_LINKS = 2.0**62
"""Page links that one tile, and one host, may have: their sums must stay exact in 64 bits."""


def too_many_links() -> InputRefused:
    return InputRefused(
        f"input.edges, column links: expected page links that add up to less than {MAX_LINKS:.2g}, "
        "found more; mend the counts or set graph.weighting to uniform"
    )


@dataclass(frozen=True)
class TileTask:
    """Writes the edges and degrees of one tile; returns how many edges it has."""

    folder: GraphFolder
    plan: GridPlan
    pieces: list[int]
    """The pieces that have edges."""
    weighted: bool

    def __call__(self, tile: int) -> int:
        stripe, group = divmod(tile, self.plan.build_groups)
        parts: dict[str, list[NDArray[np.int64]]] = {"src": [], "dst": [], "links": []}
        for piece in self.pieces:
            found = read_arrays(self.folder.scanned_edges(piece))
            first, end = found["bounds"][tile : tile + 2].tolist()
            for name in parts:
                if name in found:
                    parts[name].append(found[name][first:end])
        source_ids, destination_ids = np.concatenate(parts["src"]), np.concatenate(parts["dst"])
        weights = np.concatenate(parts["links"]) if self.weighted else None
        if weights is not None and weights.sum(dtype=np.float64) >= MAX_LINKS:
            raise too_many_links()
        edges = self._merge(stripe, group, source_ids, destination_ids, weights)
        if len(edges.keys):
            self._write(stripe, group, edges)
        return len(edges.keys)

    def _merge(
        self,
        stripe: int,
        group: int,
        source_ids: NDArray[np.int64],
        destination_ids: NDArray[np.int64],
        weights: NDArray[np.int64] | None,
    ) -> Edges:
        """Ids to positions, then one sort."""
        stripes = self.plan.stripes_of_build_group(group)
        stripe_ids = [read_arrays(self.folder.ids(s))["ids"] for s in stripes]
        firsts = np.concatenate(([0], np.cumsum([len(ids) for ids in stripe_ids])))
        destination = _positions(read_arrays(self.folder.ids(stripe))["ids"], destination_ids)
        # Stripes are ranges of ids, so the ids of neighbouring stripes are sorted as they stand.
        source = _positions(np.concatenate(stripe_ids), source_ids)
        of_group = np.searchsorted(firsts, source, side="right") - 1
        source -= firsts[of_group]
        return merge_duplicates(pack_keys(of_group, destination, source), weights)

    def _write(self, stripe: int, group: int, edges: Edges) -> None:
        stripes = self.plan.stripes_of_build_group(group)
        bounds = split_keys(edges.keys, len(stripes))
        arrays: dict[str, NDArray[Any]] = {"keys": edges.keys, "bounds": bounds}
        if edges.weights is not None:
            arrays["weights"] = edges.weights
        write_arrays(self.folder.tile(stripe, group), arrays)
        n_destinations = len(read_arrays(self.folder.ids(stripe))["ids"])
        degrees = {"in": narrow(np.bincount(destinations(edges.keys), minlength=n_destinations))}
        for at, source_stripe in enumerate(stripes):
            part = slice(bounds[at], bounds[at + 1])
            n_hosts = len(read_arrays(self.folder.ids(source_stripe))["ids"])
            source = sources(edges.keys[part])
            degrees[f"out-{source_stripe}"] = narrow(out_totals(source, None, n_hosts))
            if edges.weights is not None:
                totals = out_totals(source, edges.weights[part], n_hosts)
                degrees[f"weight-{source_stripe}"] = narrow(totals)
        write_arrays(self.folder.tile_degrees(stripe, group), degrees)


def _positions(sorted_ids: NDArray[np.int64], ids: NDArray[np.int64]) -> NDArray[np.int64]:
    found = find_ids(sorted_ids, ids)
    if len(found) and found.min() < 0:
        raise SparkrankError("an edge names a host that the graph does not have; remove the work folder")
    return found
