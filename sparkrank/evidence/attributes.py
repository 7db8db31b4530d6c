"""What the hosts input says of some hosts beside their names: for people to read, never for a score.

1. the hosts that are wanted → their ids, sorted
2. rows of the input whose canonical host is among them, a task a piece
3. one text a host, a task a part of the hosts
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.evidence.json_values import ATTRIBUTES_SCHEMA, as_octets, json_values, one_object_a_host
from sparkrank.graph.pieces import Piece, plan_pieces
from sparkrank.inputs import InputFacts
from sparkrank.kernels.lookup import find_ids
from sparkrank.kernels.stripes import stripe_of
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.native import decide_names
from sparkrank.names.octets import octets_of
from sparkrank.names.suffixes import SuffixRules, split_hosts
from sparkrank.places import Place
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import DataFrame, SparkSession

# Two hosts of one id only bring a row along that nobody asks for: any seed will do.
_SEED = 0xA77
# A part's rows are sorted in memory: some dozens of short values a host.
_PART_HOSTS = 1 << 17
_NAME_COLUMNS = ("host", "source")


@dataclass(frozen=True, kw_only=True)
class AttributeFiles:
    """Rows (host, attributes) of the wanted hosts of which the input says anything, each host once."""

    places: tuple[Place, ...]

    def table(self) -> pa.Table:
        """All rows."""
        tables = [pq.read_table(place.path, filesystem=place.filesystem) for place in self.places]
        return pa.concat_tables([ATTRIBUTES_SCHEMA.empty_table(), *tables])

    def added(self, rows: pa.Table, host: str, attributes: str) -> pa.Table:
        """The rows with a last column of that name: the attributes of the host in the column ``host``."""
        known = self.table()
        at = pc.index_in(rows[host], value_set=known["host"])
        return rows.append_column(attributes, known["attributes"].take(at))

    def joined(self, rows: DataFrame, host: str, attributes: str) -> DataFrame:
        """The same by Spark, for more rows than fit a driver."""
        from pyspark.sql import functions as sf

        if not self.places:
            return rows.withColumn(attributes, sf.lit(None).cast("string"))
        known = rows.sparkSession.read.schema("host string, attributes string").parquet(
            *(place.uri for place in self.places)
        )
        known = known.select(sf.col("host").alias(host), sf.col("attributes").alias(attributes))
        return rows.join(known, host, "left")


NO_ATTRIBUTES = AttributeFiles(places=())
"""Where the hosts input says nothing of any of them."""


def gather_attributes(
    spark: SparkSession,
    hosts: InputFacts | None,
    domain_rules: SuffixRules | None,
    wanted: Sequence[Place],
    place: Place,
) -> AttributeFiles:
    """Attributes of the hosts that Parquet files name in columns ``host`` and ``source``.

    ``hosts`` is the hosts input, ``domain_rules`` the suffix rules where nodes are registrable domains
    (a row then counts for its domain).  Work files go below ``place``.
    """
    if hosts is None or not hosts.attributes or not wanted:
        return NO_ATTRIBUTES
    pieces = plan_pieces(hosts, ("host", *hosts.attributes))
    with TaskRunner(spark, 1) as one:
        (n_wanted,) = one.run(WantedTask(place, tuple(wanted)), "attributes: hosts")
    parts = 1 << max(0, (n_wanted // _PART_HOSTS).bit_length())
    with TaskRunner(spark, len(pieces)) as piece_tasks:
        task = AttributesTask(place, pieces, domain_rules, parts)
        found = piece_tasks.run(task, "attributes: rows of the input")
    by_part = [[piece for piece, there in enumerate(found) if part in there] for part in range(parts)]
    filled = [(part, pieces_of) for part, pieces_of in enumerate(by_part) if pieces_of]
    if not filled:
        return NO_ATTRIBUTES
    with TaskRunner(spark, len(filled)) as part_tasks:
        part_tasks.run(ObjectsTask(place, filled, hosts.attributes), "attributes: one text a host")
    return AttributeFiles(places=tuple(_objects(place, part) for part, _ in filled))


def _wanted(place: Place) -> Place:
    return place.child("wanted.arrays")


def _rows(place: Place, piece: int, part: int) -> Place:
    return place.child("rows", f"{piece:05d}-{part:04d}.parquet")


def _objects(place: Place, part: int) -> Place:
    return place.child("objects", f"{part:04d}.parquet")


@dataclass(frozen=True)
class WantedTask:
    """Sorted ids of the wanted hosts; the report is their number."""

    place: Place
    files: tuple[Place, ...]

    def __call__(self, _: int) -> int:
        ids = np.zeros(0, np.int64)
        for file in self.files:
            with file.filesystem.open_input_file(file.path) as source:
                parquet = pq.ParquetFile(source)
                names = [name for name in _NAME_COLUMNS if name in parquet.schema_arrow.names]
                columns = parquet.read(columns=names).columns
            ids = np.unique(np.concatenate([ids, *(_ids(column.unique()) for column in columns)]))
        write_arrays(_wanted(self.place), {"ids": ids})
        return len(ids)


@dataclass(frozen=True)
class AttributesTask:
    """Writes a piece's values of wanted hosts by part; the report names the parts that have any."""

    place: Place
    pieces: list[Piece]
    domain_rules: SuffixRules | None
    parts: int

    def __call__(self, number: int) -> list[int]:
        wanted = read_arrays(_wanted(self.place))["ids"]
        piece = self.pieces[number]
        names = [name for name in piece.columns if name != "host"]
        tables = []
        for batch in piece.batches():
            hosts, ids = self._hosts(batch.column("host"))
            rows = np.flatnonzero(find_ids(wanted, ids) >= 0)
            rows = rows[hosts.is_valid().to_numpy(zero_copy_only=False)[rows]]
            if len(rows):
                tables.append(_long_rows(batch, names, hosts, ids, rows, self.parts))
        if not tables:
            return []
        table = pa.concat_tables(tables)
        there: list[int] = np.unique(table["part"].to_numpy()).tolist()
        for part in there:
            rows_of_part = table.filter(pc.equal(table["part"], part)).drop_columns("part")
            _write(_rows(self.place, number, part), rows_of_part)
        return there

    def _hosts(self, column: pa.Array) -> tuple[pa.Array, NDArray[np.int64]]:
        """Each row's node, null where it names none, and its id; decided once a distinct value."""
        encoded = as_octets(column).dictionary_encode()
        hosts = decide_names(encoded.dictionary).hosts
        if self.domain_rules is not None:
            # A host without a registrable domain is a node of its own.
            hosts = pc.coalesce(split_hosts(hosts, self.domain_rules).domains, hosts)
        hosts = pa.concat_arrays([hosts, pa.nulls(1, hosts.type)])
        at = encoded.indices.fill_null(len(hosts) - 1)
        return hosts.take(at), _ids(hosts)[at.to_numpy()]


@dataclass(frozen=True)
class ObjectsTask:
    """Writes one text a host of a part; the report is the number of hosts."""

    place: Place
    filled: list[tuple[int, list[int]]]
    names: tuple[str, ...]

    def __call__(self, number: int) -> int:
        part, pieces = self.filled[number]
        tables = []
        for piece in pieces:
            file = _rows(self.place, piece, part)
            tables.append(pq.read_table(file.path, filesystem=file.filesystem))
        objects = one_object_a_host(pa.concat_tables(tables), list(self.names))
        _write(_objects(self.place, part), objects)
        return int(objects.num_rows)


def _long_rows(
    batch: pa.RecordBatch,
    names: list[str],
    hosts: pa.Array,
    ids: NDArray[np.int64],
    rows: NDArray[np.int64],
    parts: int,
) -> pa.Table:
    """One row a value: host, column (place in ``names``), value (JSON), order, part; each once."""
    taken = pa.array(rows)
    columns = []
    for place, name in enumerate(names):
        values, order = json_values(batch.column(name).take(taken))
        columns.append(
            pa.table(
                {
                    "host": hosts.take(taken).cast(pa.large_string()),
                    "column": pa.array(np.full(len(rows), place, np.int8)),
                    "value": values,
                    "order": order,
                    "part": pa.array(stripe_of(ids[rows], parts).astype(np.int32)),
                }
            ).filter(values.is_valid())
        )
    keys = ["host", "column", "value", "part"]
    table = pa.concat_tables(columns).group_by(keys, use_threads=False).aggregate([("order", "min")])
    return table.rename_columns([name.removesuffix("_min") for name in table.column_names])


def _ids(hosts: Any) -> NDArray[np.int64]:
    return xxh64(*octets_of(hosts), _SEED)


def _write(place: Place, table: pa.Table) -> None:
    sink = pa.BufferOutputStream()
    pq.write_table(table, sink, compression="zstd")
    place.write_bytes(sink.getvalue())
