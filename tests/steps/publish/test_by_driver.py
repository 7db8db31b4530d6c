"""Small tables from the driver: the same rows, order and digest as through Spark."""

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from sparkrank.errors import SparkrankError
from sparkrank.publish.by_driver import publish_rows
from sparkrank.tables import REJECTED_ROWS, TableSpec, arrow_schema
from tests.steps.publish.test_write import (
    BY_ROWS,
    TABLE,
    another_attempt,
    publish,
    read_back,
    rows_of,
)


def arrow_rows(rows: list[tuple], table: TableSpec) -> pa.Table:
    """Rows of the tests, whose columns are in another order than the table's."""
    names = ["cautions", "host", "domain", "suffix", "rows", "share"]
    columns = dict(zip(names, zip(*rows, strict=True), strict=True)) if rows else {n: [] for n in names}
    return pa.table({n: pa.array(list(columns[n]), arrow_schema(table).field(n).type) for n in names})


@pytest.mark.parametrize("table", [TABLE, BY_ROWS])
@pytest.mark.parametrize("count", [0, 1, 500])
def test_same_rows_order_and_digest_as_through_spark(spark, run, table, count) -> None:
    rows = [
        (["doubt", str(i % 3)][: i % 3], f"h{i * 7919 % 1000:04d}.example", "d.example", None, i // 9, i / 7)
        for i in range(count)
    ]
    by_spark = publish(spark, rows, run, table, partitions=3)
    attempt = another_attempt(run)
    entry = publish_rows(arrow_rows(rows, table), table, attempt)
    assert (entry.digest, entry.rows) == (by_spark.digest, by_spark.rows)
    assert read_back(run, entry) == read_back(run, by_spark)
    assert len(entry.files) == 1
    assert entry.files[0].path.startswith(attempt.table_name(table.name))


def test_nulls_come_first_as_in_spark(spark, run) -> None:
    rows = [("edges.src", "b", "port", 2), ("edges.src", None, "null", 1), ("core.host", "\u00e9", "port", 3)]
    rows += [("edges.src", "", "empty", 1), ("edges.src", "B", "port", 2)]
    schema = arrow_schema(REJECTED_ROWS)
    columns = zip(*rows, strict=True)
    arrays = [pa.array(list(one), field.type) for one, field in zip(columns, schema, strict=True)]
    entry = publish_rows(pa.table(arrays, names=schema.names), REJECTED_ROWS, run)
    by_spark = sorted(rows, key=lambda row: (row[0], row[1] is not None, (row[1] or "").encode(), row[2]))
    assert [tuple(row.values()) for row in read_back(run, entry)] == by_spark
    in_spark = spark.createDataFrame(rows, "source string, row_value string, reason string, rows long")
    ordered = in_spark.orderBy("source", "row_value", "reason").collect()
    assert [tuple(row) for row in ordered] == by_spark


def test_same_rows_same_bytes_and_both_schemas_described(run) -> None:
    one, other = (publish_rows(arrow_rows(rows_of(40), TABLE), TABLE, another_attempt(run)) for _ in range(2))
    assert one.files[0].digest == other.files[0].digest
    schema = pq.ParquetFile(run.output.below(one.files[0].path).local_path).schema_arrow
    assert schema.field("host").metadata[b"description"] == b"A host."
    assert b"A host." in schema.metadata[b"org.apache.spark.sql.parquet.row.metadata"]


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda rows: rows.drop_columns(["share"]), "column share of type double; found no such column"),
        (lambda rows: rows.set_column(4, "rows", pa.array([1.0])), "column rows of type int64; found double"),
        (lambda rows: rows.set_column(1, "host", pa.array([None], pa.string())), "no nulls in column host"),
    ],
)
def test_what_is_not_the_table_is_refused(run, change, message) -> None:
    with pytest.raises(SparkrankError, match=message):
        publish_rows(change(arrow_rows(rows_of(1), TABLE)), TABLE, run)
