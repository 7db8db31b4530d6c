"""Accepted edge rows → distinct edges of each tile, by one shuffle of fixed-width ids.

A tile gets all rows from one group of source stripes into one destination stripe.  Its task looks the
ids up in the stripes' sorted ids, merges duplicates, and leaves the tile's part of the degrees beside
the edges.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.errors import SparkrankError
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.hosts import id_of, stripe_of
from sparkrank.graph.plan import GridPlan
from sparkrank.graph.sinks import write_partitions
from sparkrank.kernels.edges import Edges, destinations, merge_duplicates, out_totals, pack_keys, sources
from sparkrank.kernels.edges import split_by_stripe as split_keys
from sparkrank.kernels.lookup import find_ids

if TYPE_CHECKING:
    from pyspark.sql import DataFrame


def write_tiles(
    edges: DataFrame, folder: GraphFolder, plan: GridPlan, salt: int, *, weighted: bool
) -> dict[str, Any]:
    """Writes the edges and degrees of every tile.

    Parameters
    ----------
    edges : columns ``src``, ``dst`` (canonical hosts of the graph) and, if weighted, ``links`` (long).

    Returns
    -------
    The stage's record: ``tiles`` ([stripe, group] of those with edges), ``edges`` (distinct, without
    self-links), ``self_links`` and ``duplicates`` (rows).
    """
    from pyspark.sql import functions as sf

    columns = [id_of(sf.col("src"), salt).alias("src"), id_of(sf.col("dst"), salt).alias("dst")]
    if weighted:
        columns.append(sf.col("links"))
    rows = edges.select(*columns)
    tile = (
        stripe_of(sf.col("dst"), plan.stripes) * plan.build_groups
        + sf.floor(stripe_of(sf.col("src"), plan.stripes) * plan.build_groups / plan.stripes)
    ).cast("int")
    n_tiles = plan.stripes * plan.build_groups
    reports = write_partitions(rows, n_tiles, tile, _TileWriter(folder, plan, weighted), "edges into tiles")
    totals = {key: sum(report[key] for report in reports.values()) for key in ("rows", "edges", "self_links")}
    return {
        "tiles": [divmod(tile, plan.build_groups) for tile, report in reports.items() if report["edges"]],
        "edges": totals["edges"],
        "self_links": totals["self_links"],
        "duplicates": totals["rows"] - totals["self_links"] - totals["edges"],
    }


@dataclass(frozen=True)
class _TileWriter:
    folder: GraphFolder
    plan: GridPlan
    weighted: bool

    def __call__(self, tile: int, columns: list[pa.ChunkedArray]) -> dict[str, Any]:
        stripe, group = divmod(tile, self.plan.build_groups)
        source_ids, destination_ids = columns[0].to_numpy(), columns[1].to_numpy()
        n_rows = len(source_ids)
        linking = source_ids != destination_ids
        n_self = n_rows - int(np.count_nonzero(linking))
        weights = columns[2].to_numpy() if self.weighted else None
        columns.clear()
        if n_self:
            source_ids, destination_ids = source_ids[linking], destination_ids[linking]
            weights = None if weights is None else weights[linking]
        edges = self._merge(stripe, group, source_ids, destination_ids, weights)
        if len(edges.keys):
            self._write(stripe, group, edges)
        return {"rows": n_rows, "self_links": n_self, "edges": len(edges.keys)}

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
        degrees = {"in": _narrow(np.bincount(destinations(edges.keys), minlength=n_destinations))}
        for at, source_stripe in enumerate(stripes):
            part = slice(bounds[at], bounds[at + 1])
            n_hosts = len(read_arrays(self.folder.ids(source_stripe))["ids"])
            source = sources(edges.keys[part])
            degrees[f"out-{source_stripe}"] = _narrow(out_totals(source, None, n_hosts))
            if edges.weights is not None:
                totals = out_totals(source, edges.weights[part], n_hosts)
                degrees[f"weight-{source_stripe}"] = _narrow(totals)
        write_arrays(self.folder.tile_degrees(stripe, group), degrees)


def _positions(sorted_ids: NDArray[np.int64], ids: NDArray[np.int64]) -> NDArray[np.int64]:
    found = find_ids(sorted_ids, ids)
    if len(found) and found.min() < 0:
        raise SparkrankError("an edge names a host that the graph does not have; remove the work folder")
    return found


def _narrow(counts: NDArray[np.int64]) -> NDArray[Any]:
    """The same counts in the fewest bytes; most hosts of a tile have none or a few."""
    return counts.astype(np.min_scalar_type(int(counts.max(initial=0))))
