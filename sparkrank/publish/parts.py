"""Rows that tasks make in no order → parts of a table, one an output file: ranges of its key.

A part lies between two cuts.  Cuts come from a sample of the keys, so that parts are about equal.  Each
task leaves a scratch file with a record batch a part; whoever writes a part takes its batch from every
scratch file, and nothing else of them.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import shutil
import tempfile
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from sparkrank.errors import SparkrankError
from sparkrank.places import Place
from sparkrank.tables import TableSpec, arrow_schema

# A sixteenth of the table, so that every core has some; between 16 and 70 MB of a table such as
# host_scores, so that a file is worth a request to a store and a task fits into a worker.
_PARTS = 16
_LEAST_ROWS = 1 << 18
_MOST_ROWS = 1 << 20
# Parts of a random sample of 256 a part differ by about 6%.
_SAMPLED_KEYS_A_PART = 256
_COPIED_BYTES = 8 << 20  # a piece of a file that goes to a store


@dataclass(frozen=True, kw_only=True)
class TableParts:
    """Scratch files of a table to be, and the rows of each part in each file: ``rows[file][part]``."""

    files: tuple[Place, ...]
    rows: tuple[tuple[int, ...], ...]

    @property
    def rows_by_part(self) -> list[int]:
        """Rows of each part in all files."""
        return [sum(counts) for counts in zip(*self.rows, strict=True)]


def count_parts(n_rows: int) -> int:
    """How many parts a table of so many rows is cut into; at least one."""
    rows_a_part = min(max(n_rows / _PARTS, _LEAST_ROWS), _MOST_ROWS)
    return max(1, round(n_rows / rows_a_part))


def sample_size(n_rows: int) -> int:
    """How many keys to choose cuts from."""
    return _SAMPLED_KEYS_A_PART * count_parts(n_rows)


def choose_cuts(sample: Iterable[str], n_rows: int) -> pa.StringArray:
    """Cuts between the parts of ``n_rows`` rows: the least key of every part but the first, ascending.

    They follow from the set of sampled keys alone.  Every part has a sampled key, so none is empty.
    """
    # The contract's order is by bytes; for text in UTF-8 that is by code point, as Python's own.
    keys = sorted(set(sample))
    n_parts = max(1, min(count_parts(n_rows), len(keys)))
    return pa.array([keys[part * len(keys) // n_parts] for part in range(1, n_parts)], pa.string())


def part_numbers(keys: pa.Array, cuts: pa.StringArray) -> NDArray[np.int64]:
    """The part of each key: how many cuts are not above it; shape (n,).

    A binary search for all keys at once: each round compares every key with a cut of its own.
    """
    number = np.zeros(len(keys), np.int64)
    step = (1 << len(cuts).bit_length()) >> 1
    while step:
        probed = number + (step - 1)
        is_cut = probed < len(cuts)
        cut = cuts.take(pa.array(np.minimum(probed, len(cuts) - 1)))
        above = pc.greater_equal(keys, cut).to_numpy(zero_copy_only=False)
        number += np.where(is_cut & above, step, 0)
        step >>= 1
    return number


def write_parts(place: Place, table: TableSpec, parts: Iterable[Mapping[str, pa.Array]]) -> tuple[int, ...]:
    """Writes a scratch file with a record batch a part, and gives the rows of each.

    Parts are written as they come: one at a time is in memory.  SparkrankError if a part has other
    columns than the table's.
    """
    schema = arrow_schema(table)
    rows = []
    with _new_file(place) as file, pa.ipc.new_file(file, schema) as writer:
        for columns in parts:
            batch = _declared_columns(columns, table, schema)
            # Also where it has no rows: the number of a batch is the number of its part.
            writer.write_batch(batch)
            rows.append(batch.num_rows)
    return tuple(rows)


def read_part(files: Sequence[Place], part: int) -> pa.Table:
    """The part's rows of all scratch files, a chunk a file."""
    return pa.Table.from_batches([_read_batch(place, part) for place in files])


@contextlib.contextmanager
def _new_file(place: Place) -> Iterator[Any]:
    """A scratch file to write into, there under its name once the block ends without an error.

    On a local disk it has a temporary name until then; what goes to a store waits in a temporary file.
    """
    if not place.is_local:
        with tempfile.TemporaryFile() as spool:
            yield spool
            spool.seek(0)
            with place.filesystem.open_output_stream(place.path, compression=None) as stream:
                shutil.copyfileobj(spool, stream, _COPIED_BYTES)
        return
    os.makedirs(os.path.dirname(place.path), exist_ok=True)
    temporary = f"{place.path}.{secrets.token_hex(6)}.tmp"
    try:
        with open(temporary, "wb") as file:
            yield file
        os.replace(temporary, place.path)
    except BaseException:
        if os.path.lexists(temporary):
            os.unlink(temporary)
        raise


def _declared_columns(columns: Mapping[str, pa.Array], table: TableSpec, schema: pa.Schema) -> pa.RecordBatch:
    for name in {**dict.fromkeys(schema.names), **columns}:
        expected = schema.field(name).type if name in schema.names else "no such column"
        found = columns[name].type if name in columns else "no such column"
        if found != expected:
            raise SparkrankError(
                f"table {table.name}: expected column {name} of type {expected}; found {found}; "
                "this is a fault of the program, report it"
            )
    return pa.RecordBatch.from_arrays([columns[name] for name in schema.names], schema=schema)


def _read_batch(place: Place, number: int) -> pa.RecordBatch:
    if place.is_local:
        source = pa.memory_map(place.local_path)
    else:
        source = place.filesystem.open_input_file(place.path)
    return pa.ipc.open_file(source).get_batch(number)
