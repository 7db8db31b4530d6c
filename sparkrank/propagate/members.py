"""The reviewed lists → the hosts of the graph they name."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.graph.build import Graph
from sparkrank.kernels.lookup import find_ids
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.lists import HostList, HostLists
from sparkrank.names.octets import octets_of
from sparkrank.names.rejections import Rejection
from sparkrank.propagate.folder import SolveFolder
from sparkrank.shown import shown_value
from sparkrank.tasks import TaskRunner

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
    tables = [_entries(lists.core, lambda row: row)]
    if lists.known_spam is not None:
        tables.append(_entries(lists.known_spam, lambda row: -1 - row))
    _write_list(folder, pa.concat_tables(tables), graph.salt)
    n_stripes = graph.plan.stripes
    with TaskRunner(spark, n_stripes, even=True) as stripes:
        stripes.run(_MemberTask(graph, folder), "hosts of the lists")
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
    return read_arrays(folder.members(stripe))["entry"]


def _unmatched(host_list: HostList, rows: np.ndarray[Any, np.dtype[np.int64]]) -> list[Rejection]:
    missing = np.ones(host_list.hosts.num_rows, dtype=np.bool_)
    missing[rows] = False
    names = host_list.hosts["host"].filter(pa.array(missing)).to_pylist()
    source = f"{host_list.kind}.host"
    return [Rejection(source=source, row_value=shown_value(n), reason=NOT_IN_GRAPH, rows=1) for n in names]


def _write_list(folder: SolveFolder, entries: pa.Table, salt: int) -> None:
    """All entries in one file that every stripe's task reads: lists are small."""
    octets, offsets = octets_of(pa.concat_arrays(entries["host"].chunks))
    ids = xxh64(octets, offsets, salt)
    arrays = {"ids": ids, "entry": entries["entry"].to_numpy(), "offsets": offsets, "bytes": octets}
    write_arrays(folder.list_entries(), arrays)


@dataclass(frozen=True)
class _MemberTask:
    """Writes which entries are hosts of one stripe."""

    graph: Graph
    folder: SolveFolder

    def __call__(self, stripe: int) -> None:
        files = self.graph.folder
        listed = read_arrays(self.folder.list_entries())
        place = find_ids(read_arrays(files.ids(stripe))["ids"], listed["ids"])
        found = np.flatnonzero(place >= 0)
        # An id is a hash: only the name itself says that the host is the same.
        names = pq.read_table(files.names(stripe).path, filesystem=files.names(stripe).filesystem)["host"]
        there = names.take(pa.array(place[found])).to_pylist()
        octets, offsets = listed["bytes"], listed["offsets"]
        asked = [octets[offsets[i] : offsets[i + 1]].tobytes().decode() for i in found.tolist()]
        same = np.array([a == b for a, b in zip(there, asked, strict=True)], dtype=np.bool_)
        found = found[same]
        position = read_arrays(files.order(stripe))["position"][place[found]].astype(np.int64)
        order = np.argsort(position, kind="stable")
        arrays = {"entry": listed["entry"][found][order], "position": position[order]}
        write_arrays(self.folder.members(stripe), arrays)
