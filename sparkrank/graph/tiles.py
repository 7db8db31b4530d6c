"""Scanned edges → distinct edges of each tile, by position in their stripes.

A tile gets all edges from one group of source stripes into one destination stripe.  Its task turns the
ranks of every piece into positions in the stripes, merges duplicates, and leaves the tile's part of the
degrees beside the edges.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import narrow, read_arrays, write_arrays
from sparkrank.errors import InputRefused
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.kernels.edges import Edges, destinations, merge_duplicates, out_totals, pack_keys, sources
from sparkrank.kernels.edges import split_by_stripe as split_keys

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
        of_group = self.plan.stripes_of_build_group(group)
        rows = {s: _PieceRows(self.folder, s) for s in {stripe, *of_group}}
        keys, links = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
        for piece in self.pieces:
            found = read_arrays(self.folder.scanned_edges(piece))
            part = slice(*found["bounds"][tile : tile + 2].tolist())
            if part.start == part.stop:
                continue
            # A look-up of small tables an end: ranks of the piece's hosts to fields of keys.
            source = [pack_keys(at, 0, rows[s].of(piece)) for at, s in enumerate(of_group)]
            destination = pack_keys(0, rows[stripe].of(piece), 0)
            first_rank = found["host_bounds"]
            here = np.concatenate(source).take(found["src"][part] - first_rank[of_group[0]])
            here += destination.take(found["dst"][part] - first_rank[stripe])
            keys.append(here)
            if self.weighted:
                links.append(found["links"][part])
        weights = np.concatenate(links) if self.weighted else None
        if weights is not None and weights.sum(dtype=np.float64) >= MAX_LINKS:
            raise too_many_links()
        edges = merge_duplicates(np.concatenate(keys), weights)
        if len(edges.keys):
            self._write(stripe, group, edges)
        return len(edges.keys)

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


class _PieceRows:
    """Positions in a stripe of the hosts of each piece."""

    def __init__(self, folder: GraphFolder, stripe: int) -> None:
        self._found = read_arrays(folder.scanned_rows(stripe))

    def of(self, piece: int) -> NDArray[np.int64]:
        """Those of one piece in the order of their ranks."""
        first, end = self._found["bounds"][piece : piece + 2].tolist()
        return self._found["rows"][first:end].astype(np.int64)
