"""Edge rows as they come → ids of accepted edges by tile, hosts by stripe, rejected values.

A task reads a piece of the table once.  Parquet keeps repeated strings as dictionaries, and so does
the task: names are decided and hashed once a distinct value of a batch, and a row is from then on two
indices.  No row goes through the JVM, and no Python runs for a row.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from sparkrank.arrays import write_arrays
from sparkrank.graph.batch_columns import encoded, link_counts, not_followed
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.pieces import Piece
from sparkrank.graph.plan import GridPlan
from sparkrank.graph.rejected import RejectedValues, write_rejected
from sparkrank.kernels.stripes import stripe_of
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.native import decide_names
from sparkrank.names.octets import octets_of
from sparkrank.names.suffixes import SuffixRules, split_hosts

# Tells two names of one id apart: any other seed will do.
_CHECK_SEED = 0x5EED


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
        found = _Found(salt=self.salt)
        for batch in piece.batches():
            if "host" in piece.columns:
                self._add_hosts(batch, found)
            else:
                self._add_edges(batch, found)
        return found.write(self.folder, self.plan, number)

    def _add_hosts(self, batch: pa.RecordBatch, found: _Found) -> None:
        """Rows of the hosts list."""
        names = self._names(batch.column("host"))
        accepted = names.usable[names.index]
        found.rejected.add_values("hosts.host", names.values, names.reasons, names.index[~accepted])
        found.hosts.add(names, names.index[accepted])

    def _add_edges(self, batch: pa.RecordBatch, found: _Found) -> None:
        """Rows of the edge table, each counted once: rejected, not followed, self-link, or an edge."""
        source, destination = self._names(batch.column("src")), self._names(batch.column("dst"))
        source_fits, destination_fits = source.usable[source.index], destination.usable[destination.index]
        links = link_counts(batch)
        links_fit = np.ones(batch.num_rows, np.bool_) if links is None else links > 0
        accepted = source_fits & destination_fits & links_fit
        found.rows += batch.num_rows
        if not accepted.all():
            only_destination = source_fits & ~destination_fits
            for name, names, rows in (
                ("edges.src", source, ~source_fits),
                ("edges.dst", destination, only_destination),
            ):
                found.rejected.add_values(name, names.values, names.reasons, names.index[rows])
            found.rejected.add_links(batch, source_fits & destination_fits & ~links_fit)
        found.hosts.add(source, source.index[accepted])
        found.hosts.add(destination, destination.index[accepted])
        kept = accepted
        if self.follow_only and (unfollowed := not_followed(batch)) is not None:
            found.not_followed += int(np.count_nonzero(accepted & unfollowed))
            kept = accepted & ~unfollowed
        source_ids, destination_ids = source.ids[source.index[kept]], destination.ids[destination.index[kept]]
        linking = source_ids != destination_ids
        found.self_links += len(linking) - int(np.count_nonzero(linking))
        found.sources.append(source_ids[linking])
        found.destinations.append(destination_ids[linking])
        if self.weighted:
            weights = np.ones(batch.num_rows, np.int64) if links is None else links
            found.links.append(weights[kept][linking])

    def _names(self, column: pa.Array) -> _Names:
        """The distinct values of a column and what they name."""
        values, index = encoded(column)
        decided = decide_names(values)
        hosts = decided.hosts
        if self.domain_rules is not None:
            # A host without a registrable domain is a node of its own.
            hosts = pc.coalesce(split_hosts(hosts, self.domain_rules).domains, hosts)
        usable = np.append(hosts.is_valid().to_numpy(zero_copy_only=False), False)
        ids = np.append(_hash(hosts, self.salt), 0)
        return _Names(values, hosts, decided.reasons, usable, ids, index)


@dataclass(frozen=True)
class _Names:
    """Distinct values with their hosts, and the rows as indices into them.

    Null rows have the index behind the last value; ``usable`` and ``ids`` have a place for it.
    """

    values: pa.Array
    hosts: pa.StringArray
    reasons: pa.StringArray
    usable: NDArray[np.bool_]
    ids: NDArray[np.int64]
    index: NDArray[np.int32]


@dataclass
class _Hosts:
    """Hosts of accepted rows; a host may come more than once until it is written."""

    salt: int
    ids: list[NDArray[np.int64]] = field(default_factory=list)
    names: list[pa.StringArray] = field(default_factory=list)

    def add(self, names: _Names, index: NDArray[np.int32]) -> None:
        used = np.zeros(len(names.ids), np.bool_)
        used[index] = True
        chosen = np.flatnonzero(used)
        self.ids.append(names.ids[chosen])
        self.names.append(names.hosts.take(pa.array(chosen)))

    def distinct(self) -> tuple[NDArray[np.int64], pa.LargeStringArray, int]:
        """Sorted distinct ids, their names, and how many ids had two names."""
        if not self.ids:
            return np.zeros(0, np.int64), pa.array([], pa.large_string()), 0
        ids = np.concatenate(self.ids)
        names = pa.chunked_array(self.names, pa.string()).cast(pa.large_string()).combine_chunks()
        if isinstance(names, pa.ChunkedArray):
            names = pa.concat_arrays(names.chunks)
        order = np.argsort(ids, kind="stable")
        ids = ids[order]
        is_first = np.ones(len(ids), np.bool_)
        np.not_equal(ids[1:], ids[:-1], out=is_first[1:])
        checks = _hash(names, _CHECK_SEED)[order]
        clashes = int(np.count_nonzero(~is_first[1:] & (checks[1:] != checks[:-1])))
        return ids[is_first], names.take(pa.array(order[is_first])), clashes


@dataclass
class _Found:
    """What a task has gathered so far."""

    salt: int
    rows: int = 0
    not_followed: int = 0
    self_links: int = 0
    sources: list[NDArray[np.int64]] = field(default_factory=list)
    destinations: list[NDArray[np.int64]] = field(default_factory=list)
    links: list[NDArray[np.int64]] = field(default_factory=list)
    rejected: RejectedValues = field(default_factory=RejectedValues)
    hosts: _Hosts = field(init=False)

    def __post_init__(self) -> None:
        self.hosts = _Hosts(self.salt)

    def write(self, folder: GraphFolder, plan: GridPlan, number: int) -> dict[str, Any]:
        """Writes the piece's files; the report counts its rows."""
        n_edges = self._write_edges(folder, plan, number)
        ids, names, clashes = self.hosts.distinct()
        octets, offsets = octets_of(names)
        bounds = np.searchsorted(stripe_of(ids, plan.stripes), np.arange(plan.stripes + 1))
        arrays: dict[str, NDArray[Any]] = {"ids": ids, "bounds": bounds, "offsets": offsets, "bytes": octets}
        arrays["checks"] = _hash(names, _CHECK_SEED)
        write_arrays(folder.scanned_hosts(number), arrays)
        if self.rejected.counts:
            write_rejected(folder.rejected(number), self.rejected)
        return {
            "rows": self.rows,
            "edge_rows": n_edges,
            "not_followed": self.not_followed,
            "self_links": self.self_links,
            "rejected": self.rejected.by_reason("edges."),
            "rejected_hosts": self.rejected.by_reason("hosts."),
            "clashes": clashes,
        }

    def _write_edges(self, folder: GraphFolder, plan: GridPlan, number: int) -> int:
        if not self.sources:
            return 0
        source, destination = np.concatenate(self.sources), np.concatenate(self.destinations)
        self.sources.clear()
        self.destinations.clear()
        group = stripe_of(source, plan.stripes) * plan.build_groups // plan.stripes
        tile = stripe_of(destination, plan.stripes) * plan.build_groups + group
        n_tiles = plan.stripes * plan.build_groups
        # A stable sort of small integers is a radix sort.
        order = np.argsort(tile.astype(np.min_scalar_type(n_tiles)), kind="stable")
        bounds = np.zeros(n_tiles + 1, np.int64)
        np.cumsum(np.bincount(tile, minlength=n_tiles), out=bounds[1:])
        arrays: dict[str, NDArray[Any]] = {"bounds": bounds, "src": source[order], "dst": destination[order]}
        if self.links:
            arrays["links"] = np.concatenate(self.links)[order]
        write_arrays(folder.scanned_edges(number), arrays)
        return len(source)


def _hash(names: pa.Array, seed: int) -> NDArray[np.int64]:
    """xxh64 of each name's bytes; a null's means nothing."""
    return xxh64(*octets_of(names), seed)
