"""Writes a table into the attempt's own folder and describes what was written.

Spark's committer may move task files into place. Nothing here trusts that: the files are listed and
read back afterwards, and they count only once a step record or a manifest names them.
"""

import functools
import logging
import time

import pyarrow.parquet as pq
from pyspark.sql import DataFrame, Observation
from pyspark.sql import functions as sf

from sparkrank.errors import SparkrankError
from sparkrank.places import Place
from sparkrank.publish.attempts import RunFolder
from sparkrank.publish.digest import FileRows, check_nulls, combine, digest_file
from sparkrank.publish.entries import FileEntry, TableEntry
from sparkrank.tables import TableSpec, spark_schema

_log = logging.getLogger(__name__)


def publish_table(df: DataFrame, table: TableSpec, run: RunFolder) -> TableEntry:
    """Write the rows in the table's order below `run`; the entry for a step record or manifest.

    1. Columns and types are checked against the declaration, which also gives their descriptions.
    2. Rows are sorted over all files: read in name order, the files are the table in order.
    3. A task a file reads it back: bytes, SHA-256, its rows' part of the table's digest.

    SparkrankError if a column is missing or of another type, a null is where none may be, or fewer or
    more rows are read back than went in.
    """
    started_seconds = time.monotonic()
    name = run.table_name(table.name)
    folder = run.output.below(name)
    rows_in = _write_sorted(_declared_columns(df, table), table, folder)
    written = _read_back(df, run.output, name, table)
    rows = sum(file.rows for file, _ in written)
    if rows != rows_in:
        raise SparkrankError(
            f"table {table.name} at {folder}: expected the {rows_in} rows that were written; "
            f"found {rows} in its files; run again"
        )
    check_nulls(table, [part for _, part in written])
    files = tuple(file for file, _ in written)
    digest = combine([part for _, part in written])
    _log.info(
        "%s: %s rows in %d files written, %.1f s",
        table.name,
        f"{rows:,}",
        len(files),
        time.monotonic() - started_seconds,
    )
    return TableEntry(name=table.name, files=files, rows=rows, digest=digest)


def _declared_columns(df: DataFrame, table: TableSpec) -> DataFrame:
    """The declared columns in schema order, with their descriptions; SparkrankError on any mismatch."""
    found = {field.name: field.dataType.simpleString() for field in df.schema.fields}
    columns = []
    for field in spark_schema(table).fields:
        expected = field.dataType.simpleString()
        if found.get(field.name) != expected:
            raise SparkrankError(
                f"table {table.name}: expected column {field.name} of type {expected}; "
                f"found {found.get(field.name, 'no such column')}; "
                "this is a fault of the program, report it"
            )
        columns.append(sf.col(f"`{field.name}`").alias(field.name, metadata=field.metadata))
    return df.select(*columns)


def _write_sorted(df: DataFrame, table: TableSpec, folder: Place) -> int:
    """Write the sorted rows to a folder that must be new; the number of rows that went in."""
    keys = table.order
    if not set(table.key) <= set(keys):
        # Without its key in the order rows could tie; ties would fall as partitions do.
        keys += tuple(name for name in table.column_names if name not in keys)
    counted = Observation()
    ordered = df.orderBy(*keys).observe(counted, sf.count(sf.lit(1)).alias("rows"))
    # No _SUCCESS file: success is what a record or manifest says, nothing else.
    ordered.write.option("mapreduce.fileoutputcommitter.marksuccessfuljobs", "false").parquet(folder.uri)
    return int(counted.get["rows"])


def _read_back(df: DataFrame, output: Place, name: str, table: TableSpec) -> list[tuple[FileEntry, FileRows]]:
    """The data files in name order, which is row order; read in tasks, since tables can be large."""
    paths = [
        f"{name}/{file.name}"
        for file in output.below(name).list_files()
        # Hadoop keeps checksums in hidden files beside the data on local disks.
        if not file.name.startswith((".", "_"))
    ]
    starts, position = [], 0
    for path in paths:
        starts.append((path, position))
        place = output.below(path)
        position += int(pq.read_metadata(place.path, filesystem=place.filesystem).num_rows)
    context = df.sparkSession.sparkContext
    described = context.parallelize(starts, max(1, len(starts)))
    return described.map(functools.partial(_describe, output, table)).collect()


def _describe(output: Place, table: TableSpec, start: tuple[str, int]) -> tuple[FileEntry, FileRows]:
    path, first_row = start
    place = output.below(path)
    stamp = place.stamp()
    part = digest_file(place, first_row, table)
    entry = FileEntry(path=path, rows=part.rows, bytes=stamp.size, digest="sha256:" + stamp.checksum)
    return entry, part
