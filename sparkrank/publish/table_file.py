"""One Parquet file of a table, written by Arrow and described on the way: nothing is read back."""

from __future__ import annotations

from dataclasses import dataclass

import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.places import Place
from sparkrank.publish.digest import FileRows, RowDigest, check_nulls
from sparkrank.publish.entries import FileEntry
from sparkrank.tables import ColumnType, TableSpec, arrow_schema, spark_schema

# Some MB: who asks for one key reads one row group, and the statistics of all fit into a footer.
_ROW_GROUP_ROWS = 1 << 16
# Where Spark looks for a table's own schema, with the descriptions of columns.
_SPARK_SCHEMA_KEY = "org.apache.spark.sql.parquet.row.metadata"


@dataclass(frozen=True, kw_only=True)
class DescribedTable:
    """A table and its schema as Spark writes it down, which takes PySpark to make."""

    table: TableSpec
    spark_schema: str

    @classmethod
    def of(cls, table: TableSpec) -> DescribedTable:
        return cls(table=table, spark_schema=spark_schema(table).json())


def write_file(
    rows: pa.Table, order: pa.Array, described: DescribedTable, first_row: int, output: Place, path: str
) -> tuple[FileEntry, FileRows]:
    """Writes the rows in the order given, the first of them at position ``first_row`` of the table.

    ``path`` is relative to ``output``.  The same rows give the same bytes.  SparkrankError for a null where
    none may be.
    """
    table = described.table
    schema = arrow_schema(table)
    schema = schema.with_metadata({**schema.metadata, _SPARK_SCHEMA_KEY: described.spark_schema})
    options = {
        "compression": "zstd",
        # Keys are distinct and scores nearly so: dictionaries pay for other strings and small numbers.
        "use_dictionary": [
            column.name
            for column in table.columns
            if column.type is not ColumnType.DOUBLE and (column.name,) != table.key
        ],
        "write_page_index": True,
    }
    digest = RowDigest(table, first_row)
    sink = pa.BufferOutputStream()
    with pq.ParquetWriter(sink, schema, **options) as writer:
        # An empty table has one group without rows, which the writer needs to have a schema.
        for first in range(0, max(1, rows.num_rows), _ROW_GROUP_ROWS):
            group = rows.take(order.slice(first, _ROW_GROUP_ROWS))
            for batch in group.to_batches():
                digest.add(batch)
            check_nulls(table, [digest.file_rows])
            writer.write_table(group)
    stamp = output.below(path).write_bytes(sink.getvalue())
    entry = FileEntry(path=path, rows=rows.num_rows, bytes=stamp.size, digest="sha256:" + stamp.checksum)
    return entry, digest.file_rows
