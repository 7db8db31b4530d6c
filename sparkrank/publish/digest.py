"""The digest of a table's ordered rows: equal for equal rows in equal order, however they are cut.

Every row is hashed with its position in the table, and the hashes are combined by exclusive or.
That needs no order among tasks, so a task a file computes its part, while the position makes the
order count. Two lanes of 64 bits make an accidental match negligible; this is no protection
against somebody who forges rows, which the SHA-256 of the files is for.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.errors import SparkrankError
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.octets import octets_of
from sparkrank.places import Place
from sparkrank.publish.entries import FileEntry
from sparkrank.tables import ColumnType, TableSpec

_Hashes = NDArray[np.uint64]

_LANES = (0x9E3779B97F4A7C15, 0xD1B54A32D192ED03)
# Weyl constants of the splitmix64 generator: steps that never repeat within 2^64.
_STEP = np.uint64(0x9E3779B97F4A7C15)
_NULL = np.uint64(0x5851F42D4C957F2D)
_BATCH_ROWS = 1 << 17
# Temporaries of a pass stay in the processor's cache.
_PASS_ROWS = 1 << 14


@dataclass(frozen=True, kw_only=True)
class FileRows:
    """What one file adds to its table's digest, and its nulls by column where none may be."""

    rows: int
    lanes: tuple[int, ...]
    nulls: dict[str, int]


class RowDigest:
    """Takes the rows of one file as they come; the first is at position ``first_row`` of the table."""

    def __init__(self, table: TableSpec, first_row: int) -> None:
        self._table = table
        self._first = first_row
        self._position = first_row
        self._lanes = np.zeros(len(_LANES), np.uint64)
        self._nulls = {column.name: 0 for column in table.columns if not column.nullable}

    def add(self, batch: pa.RecordBatch) -> None:
        """Takes the next rows."""
        for first in range(0, batch.num_rows, _PASS_ROWS):
            hashes = _row_hashes(batch.slice(first, _PASS_ROWS), self._table, self._nulls)
            end = self._position + len(hashes)
            at = np.arange(self._position, end, dtype=np.uint64) * _STEP
            for i, lane in enumerate(_LANES):
                placed = _mixed(hashes ^ _mixed(at + np.uint64(lane)))
                self._lanes[i] ^= np.bitwise_xor.reduce(placed)
            self._position = end

    @property
    def file_rows(self) -> FileRows:
        """What the rows so far add to their table's digest."""
        lanes = tuple(int(lane) for lane in self._lanes)
        return FileRows(rows=self._position - self._first, lanes=lanes, nulls=dict(self._nulls))


def digest_file(place: Place, first_row: int, table: TableSpec) -> FileRows:
    """Reads one file whose rows begin at position `first_row` of the table."""
    digest = RowDigest(table, first_row)
    with place.filesystem.open_input_file(place.path) as source:
        file = pq.ParquetFile(source)
        for batch in file.iter_batches(_BATCH_ROWS, columns=list(table.column_names), use_threads=False):
            digest.add(batch)
    return digest.file_rows


def combine(parts: Sequence[FileRows]) -> str:
    """The digest of a table from the parts of its files."""
    words = [0] * len(_LANES)
    for part in parts:
        words = [word ^ lane for word, lane in zip(words, part.lanes, strict=True)]
    return "xxh64x2:" + "".join(f"{word:016x}" for word in words)


def check_nulls(table: TableSpec, parts: Sequence[FileRows]) -> None:
    """SparkrankError if a column that must have none has nulls."""
    for column in table.columns:
        found = sum(part.nulls.get(column.name, 0) for part in parts)
        if found:
            raise SparkrankError(
                f"table {table.name}: expected no nulls in column {column.name}; "
                f"found {found} rows with one; this is a fault of the program, report it"
            )


def digest_ordered_rows(output: Place, files: Sequence[FileEntry], table: TableSpec) -> str:
    """The digest of a table from its files, in their order: what a reader holds a manifest against."""
    parts, position = [], 0
    for file in files:
        parts.append(digest_file(output.below(file.path), position, table))
        position += parts[-1].rows
    return combine(parts)


def _row_hashes(batch: pa.RecordBatch, table: TableSpec, nulls: dict[str, int]) -> _Hashes:
    """One hash a row; counts nulls in columns that must have none."""
    rows = np.zeros(batch.num_rows, np.uint64)
    for at, column in enumerate(table.columns):
        values = batch.column(column.name)
        if column.name in nulls:
            nulls[column.name] += values.null_count
            if column.type is ColumnType.STRINGS:
                nulls[column.name] += values.flatten().null_count
        hashes = _value_hashes(values, column.type)
        if values.null_count:
            hashes = np.where(values.is_valid().to_numpy(zero_copy_only=False), hashes, _NULL)
        # The column's number goes in, so that values that move to another column are noticed.
        place = np.full(1, at + 1, np.uint64) * _STEP
        rows = _mixed(np.bitwise_xor(rows, hashes + place))
    return rows


def _value_hashes(values: pa.Array, kind: ColumnType) -> _Hashes:
    """A hash of each value; of a null's place anything."""
    if kind is ColumnType.STRING:
        return xxh64(*octets_of(values), 0).view(np.uint64)
    if kind is ColumnType.STRINGS:
        return _list_hashes(values)
    numbers = values.fill_null(False if kind is ColumnType.BOOLEAN else 0)
    if kind is ColumnType.DOUBLE:
        doubles: NDArray[np.float64] = numbers.to_numpy()
        return _mixed(doubles.view(np.uint64))
    integers: NDArray[np.int64] = numbers.cast(pa.int64()).to_numpy()
    return _mixed(integers.view(np.uint64))


def _list_hashes(values: pa.Array) -> _Hashes:
    """Items by their hash and place in the list, summed, with the number of items."""
    lengths = values.value_lengths().fill_null(0).to_numpy().astype(np.int64)
    items = values.flatten()
    starts = np.cumsum(lengths) - lengths
    place = np.arange(len(items), dtype=np.int64) - np.repeat(starts, lengths)
    placed = xxh64(*octets_of(items), 0).view(np.uint64) + place.view(np.uint64) * _STEP
    ends = np.zeros(len(items) + 1, np.uint64)
    np.cumsum(_mixed(placed), out=ends[1:])
    return _mixed(ends[starts + lengths] - ends[starts] + lengths.view(np.uint64))


def _mixed(words: _Hashes) -> _Hashes:
    """Every bit of the result depends on every bit of the word (splitmix64's finish)."""
    mixed = words >> np.uint64(30)
    mixed ^= words
    mixed *= np.uint64(0xBF58476D1CE4E5B9)
    mixed ^= mixed >> np.uint64(27)
    mixed *= np.uint64(0x94D049BB133111EB)
    mixed ^= mixed >> np.uint64(31)
    return mixed
