"""Publishes a table from its parts: a task sorts a part, writes its file and describes it on the way.

For large tables that numpy tasks make.  Nothing is shuffled by Spark or read back: a file's place in the
table is known from the counts of the parts before it.
"""

from __future__ import annotations

import itertools
import logging
import time
from dataclasses import dataclass
from typing import TYPE_CHECKING

import pyarrow as pa
import pyarrow.compute as pc

from sparkrank.errors import SparkrankError
from sparkrank.places import Place
from sparkrank.publish.attempts import RunFolder
from sparkrank.publish.digest import FileRows, combine
from sparkrank.publish.entries import FileEntry, TableEntry
from sparkrank.publish.parts import TableParts, read_part
from sparkrank.publish.table_file import DescribedTable, write_file
from sparkrank.tables import TableSpec
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

_log = logging.getLogger(__name__)


def publish_parts(spark: SparkSession, parts: TableParts, table: TableSpec, run: RunFolder) -> TableEntry:
    """Writes the parts' rows in the table's order below ``run``; the entry for a record or manifest.

    The table's order is by its one key, a string.  Digest and descriptions are those that
    ``publish_table`` gives for the same rows.  SparkrankError if two rows have one key, a null is where
    none may be, or fewer or more rows are written than went in.
    """
    started_seconds = time.monotonic()
    rows_in = parts.rows_by_part
    task = _PartTask(
        parts=parts,
        described=DescribedTable.of(table),
        output=run.output,
        folder=run.table_name(table.name),
        first_rows=tuple(itertools.accumulate(rows_in, initial=0)),
    )
    with TaskRunner(spark, len(rows_in), even=True) as tasks:
        written: list[tuple[FileEntry, FileRows]] = tasks.run(task, f"files of {table.name}")
    files = tuple(file for file, _ in written)
    rows = sum(rows_in)
    _log.info(
        "%s: %s rows in %d files written, %.1f s",
        table.name,
        f"{rows:,}",
        len(files),
        time.monotonic() - started_seconds,
    )
    return TableEntry(name=table.name, files=files, rows=rows, digest=combine([part for _, part in written]))


@dataclass(frozen=True, kw_only=True)
class _PartTask:
    """Writes the file of one part.  Done twice, it writes the same bytes under the same name."""

    parts: TableParts
    described: DescribedTable
    output: Place
    folder: str
    first_rows: tuple[int, ...]

    @property
    def table(self) -> TableSpec:
        return self.described.table

    def __call__(self, part: int) -> tuple[FileEntry, FileRows]:
        rows = read_part(self.parts.files, part).combine_chunks()
        expected = self.first_rows[part + 1] - self.first_rows[part]
        if rows.num_rows != expected:
            raise SparkrankError(
                f"table {self.table.name}: expected {expected} rows in part {part}, found {rows.num_rows}; "
                "remove the work folder and run again"
            )
        path = f"{self.folder}/part-{part:05d}.parquet"
        return write_file(rows, self._order(rows), self.described, self.first_rows[part], self.output, path)

    def _order(self, rows: pa.Table) -> pa.Array:
        """Positions of the rows by key; SparkrankError if two rows have one."""
        (key,) = self.table.key
        keys = rows[key]
        order = pc.sort_indices(keys)
        in_order = keys.take(order)
        twice = pc.index(pc.equal(in_order[1:], in_order[:-1]), True).as_py()
        if twice >= 0:
            raise SparkrankError(
                f"table {self.table.name}: expected one row a {key}, found two of "
                f"{in_order[twice].as_py()!r}; this is a fault of the program, report it"
            )
        return order
