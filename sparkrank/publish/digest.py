"""The digest of a table's ordered rows: equal for equal rows in equal order, however they are cut.

Every row is hashed with its position in the table, and the hashes are combined by exclusive or.
That needs no order among tasks, so Spark computes it natively in one scan, while the position makes
the order count. Two lanes of 64 bits make an accidental match negligible; this is no protection
against somebody who forges rows, which the SHA-256 of the files is for.
"""

from collections.abc import Sequence

from pyspark.sql import Column, SparkSession
from pyspark.sql import functions as sf

from sparkrank.errors import SparkrankError
from sparkrank.publish.entries import FileEntry
from sparkrank.tables import ColumnType, TableSpec, spark_schema

_LANES = (0, 1)
_FILE, _ROW, _START = "__file", "__row", "__start"


def digest_ordered_rows(
    spark: SparkSession, folder_uri: str, files: Sequence[FileEntry], table: TableSpec
) -> str:
    """The digest of the written files, read back in the order of `files`.

    Checks in the same scan that as many rows are read as the files' footers count and that no column
    has nulls that the declaration excludes; SparkrankError otherwise.
    """
    starts, rows = [], 0
    for file in files:
        starts.append((file.path.rpartition("/")[2], rows))
        rows += file.rows
    positions = spark.createDataFrame(starts, f"{_FILE} string, {_START} long")
    written = (
        spark.read.schema(spark_schema(table))
        .parquet(folder_uri)
        .select(
            "*",
            sf.col("_metadata.file_name").alias(_FILE),
            sf.col("_metadata.row_index").alias(_ROW),
        )
        .join(sf.broadcast(positions), _FILE)
    )
    position = sf.col(_START) + sf.col(_ROW)
    lanes = [sf.bit_xor(_row_hash(lane, position, table)).alias(f"lane {lane}") for lane in _LANES]
    never_null = [column for column in table.columns if not column.nullable]
    nulls = [
        sf.count_if(_is_null(column.name, column.type)).alias(f"null {column.name}") for column in never_null
    ]
    # Names with a blank, which no column has.
    found = written.agg(sf.count(sf.lit(1)).alias("all rows"), *lanes, *nulls).first()
    assert found is not None  # an aggregate without groups has one row
    if found["all rows"] != rows:
        raise SparkrankError(
            f"table {table.name} at {folder_uri}: expected {rows} rows by the files' footers; "
            f"found {found['all rows']} when reading them; run again"
        )
    for column in never_null:
        nulls_found = found[f"null {column.name}"]
        if nulls_found:
            raise SparkrankError(
                f"table {table.name}: expected no nulls in column {column.name}; "
                f"found {nulls_found} rows with one; this is a fault of the program, report it"
            )
    # No rows, no hashes: the exclusive or of nothing is null to Spark and zero to us.
    words = [(found[f"lane {lane}"] or 0) & 0xFFFF_FFFF_FFFF_FFFF for lane in _LANES]
    return f"xxh64x2:{words[0]:016x}{words[1]:016x}"


def _row_hash(lane: int, position: Column, table: TableSpec) -> Column:
    """Hash of lane, position and values. Spark's hash passes over nulls, so each value is preceded by
    whether it is null, and lists by their length: moving either changes the hash."""
    parts = [sf.lit(lane), position]
    for column in table.columns:
        value = sf.col(column.name)
        parts.append(value.isNull())
        if column.type is ColumnType.STRINGS:
            parts.append(sf.size(value))
        parts.append(value)
    return sf.xxhash64(*parts)


def _is_null(name: str, kind: ColumnType) -> Column:
    value = sf.col(name)
    if kind is ColumnType.STRINGS:
        return value.isNull() | sf.exists(value, lambda item: item.isNull())
    return value.isNull()
