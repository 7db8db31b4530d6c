"""Edge rows as they come → edges by tile as ranks of a piece's hosts, hosts by stripe, rejected values.

A task reads a piece of the table once.  Its values are numbered and decided once a distinct value; a row
is from then on two numbers of four bytes.  At the end the piece's hosts are sorted by id, and the numbers
become ranks in that order, which the next stages turn into positions in the graph's stripes.  No row goes
through the JVM, and no Python runs for a row.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from sparkrank.arrays import write_arrays
from sparkrank.graph.batch_columns import link_counts, not_followed
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.piece_names import PieceNames
from sparkrank.graph.pieces import Piece
from sparkrank.graph.plan import GridPlan
from sparkrank.graph.rejected import RejectedValues, write_rejected
from sparkrank.kernels.stripes import stripe_of
from sparkrank.names.octets import octets_of
from sparkrank.names.suffixes import SuffixRules

# Distinct values a row for which there is room from the start; crawls have fewer.
_VALUES_A_ROW = 0.25


@dataclass(frozen=True)
class ScanTask:
    """Scans one piece; writes its edges, hosts and rejected values."""

    folder: GraphFolder
    plan: GridPlan
    pieces: list[Piece]
    salt: int
    weighted: bool
    follow_only: bool
    domain_rules: SuffixRules | None
    """The suffix rules where nodes are registrable domains, None where they are hosts."""

    def __call__(self, number: int) -> dict[str, Any]:
        piece = self.pieces[number]
        names = PieceNames(self.salt, self.domain_rules, int(_VALUES_A_ROW * piece.rows))
        found = _Found(names)
        for batch in piece.batches():
            if "host" in piece.columns:
                found.add_hosts(batch)
            else:
                found.add_edges(batch, weighted=self.weighted, follow_only=self.follow_only)
        return found.write(self.folder, self.plan, number)


@dataclass
class _Found:
    """What a task has gathered so far; rows are numbers of ``names``."""

    names: PieceNames
    rows: int = 0
    not_followed: int = 0
    sources: list[NDArray[np.int32]] = field(default_factory=list)
    destinations: list[NDArray[np.int32]] = field(default_factory=list)
    links: list[NDArray[np.int64]] = field(default_factory=list)
    accepted: list[NDArray[np.int32]] = field(default_factory=list)
    """Rows whose hosts count although they are no edges."""
    rejected: RejectedValues = field(default_factory=RejectedValues)

    def add_hosts(self, batch: pa.RecordBatch) -> None:
        """Rows of the hosts list."""
        rows = self.names.number(batch.column("host"))
        fits = self.names.usable[rows]
        self.rejected.add_values("hosts.host", self.names, rows[~fits])
        self.accepted.append(rows[fits])

    def add_edges(self, batch: pa.RecordBatch, *, weighted: bool, follow_only: bool) -> None:
        """Rows of the edge table, each counted once: rejected, not followed, or an edge."""
        names = self.names
        source, destination = names.number(batch.column("src")), names.number(batch.column("dst"))
        self.rows += batch.num_rows
        links = link_counts(batch)
        source_fits, destination_fits = names.usable[source], names.usable[destination]
        links_fit = np.ones(batch.num_rows, np.bool_) if links is None else links > 0
        kept = source_fits & destination_fits & links_fit
        if not kept.all():
            self.rejected.add_values("edges.src", names, source[~source_fits])
            self.rejected.add_values("edges.dst", names, destination[source_fits & ~destination_fits])
            self.rejected.add_links(batch, source_fits & destination_fits & ~links_fit)
        if follow_only and (unfollowed := not_followed(batch)) is not None:
            unfollowed &= kept
            self.not_followed += int(np.count_nonzero(unfollowed))
            self.accepted += [source[unfollowed], destination[unfollowed]]
            kept &= ~unfollowed
        self.sources.append(source[kept])
        self.destinations.append(destination[kept])
        if weighted:
            weights = np.ones(batch.num_rows, np.int64) if links is None else links
            self.links.append(weights[kept])

    def write(self, folder: GraphFolder, plan: GridPlan, number: int) -> dict[str, Any]:
        """Writes the piece's files; the report counts its rows."""
        hosts = self._hosts()
        stripes = stripe_of(hosts.ids, plan.stripes)
        bounds = np.searchsorted(stripes, np.arange(plan.stripes + 1))
        octets, offsets = octets_of(hosts.names)
        # A host has at most 253 bytes.
        arrays: dict[str, NDArray[Any]] = {"bounds": bounds, "ids": hosts.ids}
        arrays |= {"lengths": np.diff(offsets).astype(np.uint8), "bytes": octets}
        write_arrays(folder.scanned_hosts(number), arrays)
        if self.rejected.counts:
            write_rejected(folder.rejected(number), self.rejected)
        edge_rows, self_links = self._write_edges(folder, plan, number, hosts.ranks, bounds)
        return {
            "rows": self.rows,
            "edge_rows": edge_rows,
            "not_followed": self.not_followed,
            "self_links": self_links,
            "rejected": self.rejected.by_reason("edges."),
            "rejected_hosts": self.rejected.by_reason("hosts."),
            "clashes": hosts.clashes,
        }

    def _hosts(self) -> _Hosts:
        """The distinct hosts of accepted rows; several values may name the same."""
        used = np.zeros(len(self.names), np.bool_)
        for rows in (*self.sources, *self.destinations, *self.accepted):
            used[rows] = True
        chosen = np.flatnonzero(used)
        ids = np.concatenate([np.zeros(0, np.int64), *self.names.ids])[chosen]
        order = np.argsort(ids)
        ids, chosen = ids[order], chosen[order]
        is_first = np.ones(len(ids), np.bool_)
        np.not_equal(ids[1:], ids[:-1], out=is_first[1:])
        rank = np.cumsum(is_first, dtype=np.int32)
        rank -= 1
        ranks = np.zeros(len(self.names), np.int32)
        ranks[chosen] = rank
        all_names = pa.chunked_array(self.names.hosts, pa.string()).cast(pa.large_string())
        names = _one_array(all_names.take(pa.array(chosen[is_first])))
        again = np.flatnonzero(~is_first)
        names_again = _one_array(all_names.take(pa.array(chosen[again])))
        same = pc.equal(names_again, names.take(pa.array(rank[again])))
        return _Hosts(ids[is_first], names, ranks, len(again) - (pc.sum(same).as_py() or 0))

    def _write_edges(
        self,
        folder: GraphFolder,
        plan: GridPlan,
        number: int,
        ranks: NDArray[np.int32],
        host_bounds: NDArray[np.int64],
    ) -> tuple[int, int]:
        """Writes the edges, tile by tile; how many rows are edges, and how many link a host to itself."""
        if not self.sources:
            return 0, 0
        source = ranks[np.concatenate(self.sources)]
        destination = ranks[np.concatenate(self.destinations)]
        self.sources.clear()
        self.destinations.clear()
        links = np.concatenate(self.links) if self.links else None
        linking = np.flatnonzero(source != destination)
        self_links = len(source) - len(linking)
        if self_links:
            source, destination = source[linking], destination[linking]
            links = None if links is None else links[linking]
        tile = _tiles(plan, host_bounds, source, destination)
        n_tiles = plan.stripes * plan.build_groups
        # A stable sort of small integers is a radix sort.
        order = np.argsort(tile, kind="stable")
        bounds = np.zeros(n_tiles + 1, np.int64)
        np.cumsum(np.bincount(tile, minlength=n_tiles), out=bounds[1:])
        arrays: dict[str, NDArray[Any]] = {"bounds": bounds, "host_bounds": host_bounds}
        arrays |= {"src": source[order], "dst": destination[order]}
        if links is not None:
            arrays["links"] = links[order]
        write_arrays(folder.scanned_edges(number), arrays)
        return len(source), self_links


@dataclass(frozen=True)
class _Hosts:
    ids: NDArray[np.int64]
    """Sorted and distinct: shape (hosts,)."""
    names: pa.LargeStringArray
    ranks: NDArray[np.int32]
    """Rank in ``ids`` of what each number names: shape (numbers,); of unused ones it means nothing."""
    clashes: int
    """Values that name another host than the first one of the same id."""


def _tiles(
    plan: GridPlan, host_bounds: NDArray[np.int64], source: NDArray[np.int32], destination: NDArray[np.int32]
) -> NDArray[np.unsignedinteger]:
    """The tile of each edge: shape (edges,)."""
    kind = np.min_scalar_type(plan.stripes * plan.build_groups)
    hosts = np.diff(host_bounds)
    groups = [plan.build_group_of(stripe) for stripe in range(plan.stripes)]
    group_of = np.repeat(np.array(groups, kind), hosts)
    row_of = np.repeat(np.arange(plan.stripes, dtype=kind) * kind.type(plan.build_groups), hosts)
    tile: NDArray[np.unsignedinteger] = row_of[destination]
    tile += group_of[source]
    return tile


def _one_array(chunks: pa.ChunkedArray) -> pa.LargeStringArray:
    combined = chunks.combine_chunks()
    return pa.concat_arrays(combined.chunks) if isinstance(combined, pa.ChunkedArray) else combined
