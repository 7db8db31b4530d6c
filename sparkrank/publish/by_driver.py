"""Publishes a small table from the driver: no query to plan and compile for some thousand rows."""

from __future__ import annotations

import logging
import time

import pyarrow as pa
import pyarrow.compute as pc

from sparkrank.errors import SparkrankError
from sparkrank.publish.attempts import RunFolder
from sparkrank.publish.digest import combine
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.table_file import DescribedTable, write_file
from sparkrank.tables import TableSpec, arrow_schema

_log = logging.getLogger(__name__)

MOST_ROWS = 1 << 20
"""Rows that a driver with the usual memory holds and sorts beside everything else: some hundred MB."""


def publish_rows(rows: pa.Table, table: TableSpec, run: RunFolder) -> TableEntry:
    """Writes the rows in the table's order below ``run``, as one file; the entry for a record or manifest.

    Digest and descriptions are those that ``publish_table`` gives for the same rows.  SparkrankError if a
    column is missing or of another type, or a null is where none may be.
    """
    started_seconds = time.monotonic()
    rows = _declared_columns(rows, table)
    # With its key in the order no two rows tie.
    keys = table.order + tuple(name for name in table.key if name not in table.order)
    order = _sorted(rows, keys)
    path = f"{run.table_name(table.name)}/part-00000.parquet"
    entry, part = write_file(rows, order, DescribedTable.of(table), 0, run.output, path)
    seconds = time.monotonic() - started_seconds
    _log.info("%s: %s rows written, %.1f s", table.name, f"{rows.num_rows:,}", seconds)
    return TableEntry(name=table.name, files=(entry,), rows=rows.num_rows, digest=combine([part]))


def _declared_columns(rows: pa.Table, table: TableSpec) -> pa.Table:
    """The declared columns in schema order; SparkrankError on any mismatch."""
    schema = arrow_schema(table)
    for field in schema:
        found = rows.schema.field(field.name).type if field.name in rows.schema.names else "no such column"
        if found != field.type:
            raise SparkrankError(
                f"table {table.name}: expected column {field.name} of type {field.type}; found {found}; "
                "this is a fault of the program, report it"
            )
    return pa.table([rows[name].combine_chunks() for name in schema.names], schema=schema)


def _sorted(rows: pa.Table, keys: tuple[str, ...]) -> pa.Array:
    """Positions of the rows in order, as Spark sorts: nulls first, strings by their bytes."""
    columns: dict[str, pa.ChunkedArray] = {}
    for name in keys:
        # Arrow has nulls last; a column of its own says which are to be first.
        columns[f"{name} is there"] = pc.is_valid(rows[name]).cast(pa.int8())
        columns[name] = rows[name]
    return pc.sort_indices(pa.table(columns), [(name, "ascending") for name in columns])
