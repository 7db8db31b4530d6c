"""The reviewed lists → the hosts of the graph they name."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.graph.build import Graph
from sparkrank.graph.hosts import id_of, stripe_of
from sparkrank.graph.sinks import write_partitions
from sparkrank.kernels.lookup import find_ids
from sparkrank.names.lists import HostList, HostLists
from sparkrank.names.rejections import Rejection
from sparkrank.propagate.folder import SolveFolder
from sparkrank.shown import shown_value

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

NOT_IN_GRAPH = "not_in_graph"
"""The reason of a list entry whose host is no node of the graph."""


@dataclass(frozen=True, kw_only=True)
class Members:
    """What of the lists the graph has.

    ``weight_of`` are the matched weights by slice of the core; ``unmatched`` the entries that name no
    node.  The places of the members are in the stripes' member files: ``entry`` (row of the core list,
    or -1 - row of the known-spam list) and ``position`` (in the solve's order).
    """

    core_hosts: int
    known_spam_hosts: int
    weight_of: dict[str, float]
    unmatched: tuple[Rejection, ...]


def match_lists(spark: SparkSession, graph: Graph, folder: SolveFolder, lists: HostLists) -> Members:
    """Finds the lists' hosts in the graph and writes the stripes' member files."""
    from pyspark.sql import functions as sf

    tables = [_entries(lists.core, lambda row: row)]
    if lists.known_spam is not None:
        tables.append(_entries(lists.known_spam, lambda row: -1 - row))
    rows = spark.createDataFrame(pa.concat_tables(tables)).select(
        id_of(sf.col("host"), graph.salt).alias("id"), "entry", "host"
    )
    n_stripes = graph.plan.stripes
    write_partitions(
        rows, n_stripes, stripe_of(sf.col("id"), n_stripes), _MemberWriter(graph, folder), "list entries"
    )
    found = [_read_entries(folder, stripe) for stripe in range(n_stripes)]
    matched = np.sort(np.concatenate(found)) if found else np.zeros(0, np.int64)
    core_rows, spam_rows = matched[matched >= 0], -1 - matched[matched < 0]
    weights: dict[str, float] = {}
    slices, weight = lists.core.hosts["slice"].to_pylist(), lists.core.hosts["weight"].to_pylist()
    for row in core_rows.tolist():
        weights[slices[row]] = weights.get(slices[row], 0.0) + weight[row]
    unmatched = _unmatched(lists.core, core_rows)
    if lists.known_spam is not None:
        unmatched += _unmatched(lists.known_spam, spam_rows)
    return Members(
        core_hosts=len(core_rows),
        known_spam_hosts=len(spam_rows),
        weight_of=dict(sorted(weights.items())),
        unmatched=tuple(unmatched),
    )


def _entries(host_list: HostList, entry_of: Any) -> pa.Table:
    rows = np.arange(host_list.hosts.num_rows, dtype=np.int64)
    hosts = host_list.hosts["host"].cast(pa.string())
    return pa.table({"host": hosts, "entry": pa.array(entry_of(rows), pa.int64())})


def _read_entries(folder: SolveFolder, stripe: int) -> np.ndarray[Any, np.dtype[np.int64]]:
    if not folder.members(stripe).exists():
        return np.zeros(0, np.int64)
    return read_arrays(folder.members(stripe))["entry"]


def _unmatched(host_list: HostList, rows: np.ndarray[Any, np.dtype[np.int64]]) -> list[Rejection]:
    missing = np.ones(host_list.hosts.num_rows, dtype=np.bool_)
    missing[rows] = False
    names = host_list.hosts["host"].filter(pa.array(missing)).to_pylist()
    source = f"{host_list.kind}.host"
    return [Rejection(source=source, row_value=shown_value(n), reason=NOT_IN_GRAPH, rows=1) for n in names]


@dataclass(frozen=True)
class _MemberWriter:
    graph: Graph
    folder: SolveFolder

    def __call__(self, stripe: int, columns: list[pa.ChunkedArray]) -> dict[str, Any]:
        files = self.graph.folder
        ids, entry = columns[0].to_numpy(), columns[1].to_numpy()
        place = find_ids(read_arrays(files.ids(stripe))["ids"], ids)
        found = np.flatnonzero(place >= 0)
        # An id is a hash: only the name itself says that the host is the same.
        names = pq.read_table(files.names(stripe).path, filesystem=files.names(stripe).filesystem)["host"]
        there = names.take(pa.array(place[found])).to_pylist()
        asked = columns[2].take(pa.array(found)).to_pylist()
        same = np.array([a == b for a, b in zip(there, asked, strict=True)], dtype=np.bool_)
        found = found[same]
        position = read_arrays(files.order(stripe))["position"][place[found]]
        order = np.argsort(position, kind="stable")
        arrays = {"entry": entry[found][order], "position": position[order]}
        write_arrays(self.folder.members(stripe), arrays)
        return {"matched": len(found)}
