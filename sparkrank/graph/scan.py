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
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import write_arrays
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.pieces import Piece
from sparkrank.graph.plan import GridPlan
from sparkrank.kernels.stripes import stripe_of
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.native import decide_names
from sparkrank.names.octets import octets_of
from sparkrank.names.suffixes import SuffixRules
from sparkrank.shown import shown_value

BAD_LINKS = "bad_links"
"""The reason of a row whose ``links`` is null or not positive."""

# A token of rel between white space or commas, after ASCII lower-casing.
_NOT_FOLLOWED = r"(?:^|[\t\n\v\f\r ,])(?:nofollow|ugc|sponsored)(?:$|[\t\n\v\f\r ,])"
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
        found.rejected.add_values("hosts.host", names, names.index[~accepted])
        found.hosts.add(names, names.index[accepted])

    def _add_edges(self, batch: pa.RecordBatch, found: _Found) -> None:
        """Rows of the edge table, each counted once: rejected, not followed, self-link, or an edge."""
        source, destination = self._names(batch.column("src")), self._names(batch.column("dst"))
        source_fits, destination_fits = source.usable[source.index], destination.usable[destination.index]
        links = _links(batch)
        links_fit = np.ones(batch.num_rows, np.bool_) if links is None else links > 0
        accepted = source_fits & destination_fits & links_fit
        found.rows += batch.num_rows
        if not accepted.all():
            found.rejected.add_values("edges.src", source, source.index[~source_fits])
            only_destination = source_fits & ~destination_fits
            found.rejected.add_values("edges.dst", destination, destination.index[only_destination])
            only_links = source_fits & destination_fits & ~links_fit
            found.rejected.add_links(batch, only_links)
        found.hosts.add(source, source.index[accepted])
        found.hosts.add(destination, destination.index[accepted])
        kept = accepted
        if self.follow_only and (not_followed := _not_followed(batch)) is not None:
            found.not_followed += int(np.count_nonzero(accepted & not_followed))
            kept = accepted & ~not_followed
        source_ids, destination_ids = source.ids[source.index[kept]], destination.ids[destination.index[kept]]
        linking = source_ids != destination_ids
        found.self_links += len(linking) - int(np.count_nonzero(linking))
        found.sources.append(source_ids[linking])
        found.destinations.append(destination_ids[linking])
        if self.weighted:
            weights = np.ones(batch.num_rows, np.int64) if links is None else links
            found.links.append(weights[kept][linking])

    def _names(self, column: pa.DictionaryArray) -> _Names:
        """The distinct values of a column and what they name."""
        values = column.dictionary
        decided = decide_names(values)
        hosts = decided.hosts
        if self.domain_rules is not None:
            # A host without a registrable domain is a node of its own.
            hosts = pc.coalesce(
                __import__("sparkrank.names.suffixes", fromlist=["x"]).domains_of(hosts, self.domain_rules),
                hosts,
            )
        usable = np.append(hosts.is_valid().to_numpy(zero_copy_only=False), False)
        # A null row gets an index of its own behind the values.
        index = column.indices.fill_null(len(values)).to_numpy()
        ids = np.append(_hash(hosts, self.salt), 0)
        return _Names(values, hosts, decided.reasons, usable, ids, index)


@dataclass(frozen=True)
class _Names:
    """Distinct values with their hosts, and the rows as indices into them."""

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
class _Rejected:
    """Rejected values with their reasons and the number of rows."""

    counts: dict[tuple[str, str | None, str], int] = field(default_factory=dict)

    def add_values(self, source: str, names: _Names, index: NDArray[np.int32]) -> None:
        rows = np.bincount(index, minlength=len(names.ids))
        for at in np.flatnonzero(rows).tolist():
            if at == len(names.values):
                value, reason = None, "null"
            else:
                value, reason = _text(names.values[at]), names.reasons[at].as_py()
            self._add(source, value, reason, int(rows[at]))

    def add_links(self, batch: pa.RecordBatch, rows: NDArray[np.bool_]) -> None:
        if rows.any():
            values = batch.column("links").filter(pa.array(rows)).value_counts().to_pylist()
            for one in values:
                value = None if one["values"] is None else str(one["values"])
                self._add("edges.links", value, BAD_LINKS, one["counts"])

    def _add(self, source: str, value: str | None, reason: str, rows: int) -> None:
        key = (source, None if value is None else shown_value(value), reason)
        self.counts[key] = self.counts.get(key, 0) + rows

    def by_reason(self, table: str) -> dict[str, int]:
        found: dict[str, int] = {}
        for (source, _, reason), rows in self.counts.items():
            if source.startswith(table):
                found[reason] = found.get(reason, 0) + rows
        return found


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
    rejected: _Rejected = field(default_factory=_Rejected)
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
            _write_rejected(folder, number, self.rejected)
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


def _write_rejected(folder: GraphFolder, number: int, rejected: _Rejected) -> None:
    rows = [(*key, count) for key, count in sorted(rejected.counts.items(), key=repr)]
    columns = list(zip(*rows, strict=True))
    table = pa.table(
        {
            "source": pa.array(columns[0], pa.string()),
            "row_value": pa.array(columns[1], pa.string()),
            "reason": pa.array(columns[2], pa.string()),
            "rows": pa.array(columns[3], pa.int64()),
        }
    )
    sink = pa.BufferOutputStream()
    pq.write_table(table, sink)
    folder.rejected(number).write_bytes(sink.getvalue())


def _hash(names: pa.Array, seed: int) -> NDArray[np.int64]:
    """xxh64 of each name's bytes; a null's means nothing."""
    return xxh64(*octets_of(names), seed)


def _links(batch: pa.RecordBatch) -> NDArray[np.int64] | None:
    """Links of each row, 0 for null; None where the table does not count links."""
    if "links" not in batch.schema.names:
        return None
    links: NDArray[np.int64] = batch.column("links").cast(pa.int64()).fill_null(0).to_numpy()
    return links


def _not_followed(batch: pa.RecordBatch) -> NDArray[np.bool_] | None:
    """Rows whose rel says so, in any case of ASCII letters; None without such a column."""
    if "rel" not in batch.schema.names:
        return None
    column = batch.column("rel")
    text = pc.ascii_lower(column.dictionary.cast(pa.string()))
    says_so = pc.match_substring_regex(text, _NOT_FOLLOWED).to_numpy(zero_copy_only=False)
    index = column.indices.fill_null(len(text)).to_numpy()
    not_followed: NDArray[np.bool_] = np.append(says_so.astype(np.bool_), False)[index]
    return not_followed


def _text(value: pa.Scalar) -> str:
    octets = value.as_buffer()
    # 200 characters are shown; the rest of a value of megabytes is not worth decoding.
    return str(octets.to_pybytes()[:4000].decode("utf-8", "replace"))
