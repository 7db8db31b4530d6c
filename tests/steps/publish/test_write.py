"""Publishing a table: order over files, the digest of ordered rows, descriptions, refusals."""

import hashlib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pyarrow.parquet as pq
import pytest

from sparkrank.errors import SparkrankError
from sparkrank.publish.attempts import RunFolder, new_attempt_id
from sparkrank.publish.write import publish_table
from sparkrank.tables import ColumnSpec, ColumnType, TableSpec

TABLE = TableSpec(
    name="hosts_seen",
    meaning="A table of the tests.",
    key=("host",),
    order=("host",),
    columns=(
        ColumnSpec(name="host", type=ColumnType.STRING, unit="text", meaning="A host."),
        ColumnSpec(name="domain", type=ColumnType.STRING, unit="text", meaning="Domain.", nullable=True),
        ColumnSpec(name="suffix", type=ColumnType.STRING, unit="text", meaning="Suffix.", nullable=True),
        ColumnSpec(name="rows", type=ColumnType.LONG, unit="rows", meaning="Its rows."),
        ColumnSpec(name="share", type=ColumnType.DOUBLE, unit="share", meaning="Share.", nullable=True),
        ColumnSpec(name="cautions", type=ColumnType.STRINGS, unit="text", meaning="Doubts."),
    ),
)
SCHEMA = "cautions array<string>, host string, domain string, suffix string, rows long, share double"
BY_ROWS = TableSpec(
    name="by_rows", meaning="Another order.", key=("host",), order=("rows",), columns=TABLE.columns
)


def rows_of(count: int) -> list[tuple[Any, ...]]:
    return [([], f"h{i:04d}.example", "d.example", None, i, i / 7) for i in range(count)]


def another_attempt(run: RunFolder) -> RunFolder:
    return RunFolder(output=run.output, run_id=run.run_id, attempt_id=new_attempt_id(), lock=run.lock)


def publish(spark, rows, run: RunFolder, table: TableSpec = TABLE, partitions: int = 1):
    df = spark.createDataFrame(rows, SCHEMA).repartition(partitions)
    return publish_table(df, table, another_attempt(run))


def read_back(run: RunFolder, entry) -> list[dict[str, Any]]:
    """The rows as a reader without Spark gets them: the manifest's files, one after the other."""
    return [
        row
        for file in entry.files
        for row in pq.ParquetFile(run.output.below(file.path).local_path).read().to_pylist()
    ]


@pytest.fixture
def seven_files(spark) -> Iterator[None]:
    """Sorting into seven files, which adaptive execution would join for so few rows."""
    before = {
        key: spark.conf.get(key) for key in ("spark.sql.shuffle.partitions", "spark.sql.adaptive.enabled")
    }
    spark.conf.set("spark.sql.shuffle.partitions", "7")
    spark.conf.set("spark.sql.adaptive.enabled", "false")
    yield
    for key, value in before.items():
        spark.conf.set(key, value)


def test_rows_are_in_order_over_all_files_and_the_digest_does_not_depend_on_them(
    spark, run, seven_files
) -> None:
    rows = rows_of(200)
    many = publish(spark, rows[::-1], run, partitions=3)
    assert len(many.files) == 7
    assert min(file.rows for file in many.files) > 0
    found = read_back(run, many)
    assert [row["host"] for row in found] == [row[1] for row in rows]
    assert list(found[0]) == list(TABLE.column_names)
    spark.conf.set("spark.sql.shuffle.partitions", "1")
    one = publish(spark, rows, run, partitions=2)
    assert len(one.files) == 1
    spark.conf.set("spark.sql.shuffle.partitions", "2")
    two = publish(spark, rows, run, partitions=7)
    assert len(two.files) == 2
    assert one.digest == two.digest == many.digest
    assert one.rows == two.rows == many.rows == 200


def test_an_entry_describes_the_files_as_they_are(spark, run) -> None:
    entry = publish(spark, rows_of(5), run)
    for file in entry.files:
        data = Path(run.output.below(file.path).local_path).read_bytes()
        assert file.bytes == len(data)
        assert file.digest == "sha256:" + hashlib.sha256(data).hexdigest()
        assert file.path.startswith("hosts_seen/run_id=run-1/attempt=")
    assert sum(file.rows for file in entry.files) == entry.rows == 5
    folder = run.output.child("hosts_seen")
    assert not [file for file in folder.list_files() if "_SUCCESS" in file.name]


def test_the_digest_tells_moved_values_nulls_and_order_apart(spark, run) -> None:
    host, other = "a.example", "b.example"
    variants = {
        "base": [([], host, "x", None, 1, 0.5), ([], other, "y", None, 2, 0.5)],
        "null in another column": [([], host, None, "x", 1, 0.5), ([], other, "y", None, 2, 0.5)],
        "empty text for null": [([], host, "x", "", 1, 0.5), ([], other, "y", None, 2, 0.5)],
        "values swapped between rows": [([], host, "y", None, 1, 0.5), ([], other, "x", None, 2, 0.5)],
        "a last bit": [([], host, "x", None, 1, 0.5000000000000001), ([], other, "y", None, 2, 0.5)],
        "two cautions": [(["x", ""], host, "x", None, 1, 0.5), ([], other, "y", None, 2, 0.5)],
    }
    digests = {name: publish(spark, rows, run).digest for name, rows in variants.items()}
    # The same rows in the other order: only the position differs.
    turned = [(*row[:4], 3 - row[4], row[5]) for row in variants["base"]]
    digests["by rows"] = publish(spark, variants["base"], run, table=BY_ROWS).digest
    digests["turned, by rows"] = publish(spark, turned, run, table=BY_ROWS).digest
    assert digests["by rows"] == digests["base"]
    del digests["by rows"]
    assert len(set(digests.values())) == len(digests)


def test_the_position_counts(spark, run, tmp_path) -> None:
    """Two files of a row each, read in one order and the other: the same rows, another digest."""
    from sparkrank.publish.digest import digest_ordered_rows

    spark.conf.set("spark.sql.adaptive.enabled", "false")
    try:
        attempt = another_attempt(run)
        df = spark.createDataFrame(rows_of(2), SCHEMA)
        entry = publish_table(df, TABLE, attempt)
    finally:
        spark.conf.set("spark.sql.adaptive.enabled", "true")
    assert [file.rows for file in entry.files] == [1, 1]
    assert digest_ordered_rows(run.output, entry.files, TABLE) == entry.digest
    assert digest_ordered_rows(run.output, entry.files[::-1], TABLE) != entry.digest


def test_ties_in_the_order_are_broken_by_the_other_columns(spark, run) -> None:
    rows = [([], f"h{i}.example", None, None, 1, None) for i in range(20)]
    digests = {publish(spark, given, run, table=BY_ROWS).digest for given in (rows, rows[::-1])}
    assert len(digests) == 1


def test_an_empty_table_is_one_file_without_rows(spark, run) -> None:
    entry = publish(spark, [], run, partitions=7)
    assert (entry.rows, [file.rows for file in entry.files]) == (0, [0])
    assert entry.digest == "xxh64x2:" + 32 * "0"
    schema = pq.read_schema(run.output.below(entry.files[0].path).local_path)
    assert schema.names == list(TABLE.column_names)


def test_descriptions_travel_with_the_file(spark, run) -> None:
    entry = publish(spark, rows_of(1), run)
    read = spark.read.parquet(run.output.below(entry.files[0].path).uri)
    assert read.schema["host"].metadata == {"comment": "A host.", "unit": "text"}


def test_a_column_of_another_type_is_refused_before_anything_is_written(spark, run) -> None:
    df = spark.createDataFrame(rows_of(1), SCHEMA).selectExpr("* except(rows)", "cast(rows as int) rows")
    with pytest.raises(SparkrankError) as refusal:
        publish_table(df, TABLE, run)
    assert str(refusal.value) == (
        "table hosts_seen: expected column rows of type bigint; found int; "
        "this is a fault of the program, report it"
    )
    assert not run.output.child("hosts_seen").exists()


def test_a_missing_column_is_refused(spark, run) -> None:
    df = spark.createDataFrame(rows_of(1), SCHEMA).drop("share")
    with pytest.raises(SparkrankError, match="expected column share of type double; found no such column"):
        publish_table(df, TABLE, run)


@pytest.mark.parametrize(
    ("row", "column"),
    [
        (([], "a.example", None, None, None, None), "rows"),
        (([None], "a.example", None, None, 1, None), "cautions"),
    ],
)
def test_a_null_where_none_may_be_is_refused(spark, run, row, column) -> None:
    with pytest.raises(SparkrankError) as refusal:
        publish(spark, [row], run)
    assert str(refusal.value) == (
        f"table hosts_seen: expected no nulls in column {column}; found 1 rows with one; "
        "this is a fault of the program, report it"
    )


def test_lost_rows_are_noticed(spark, run, monkeypatch) -> None:
    """A file that a store loses between the write and the listing."""
    from sparkrank.publish import write

    read_back = write._read_back
    monkeypatch.setattr(write, "_read_back", lambda *given: read_back(*given)[:0])
    with pytest.raises(SparkrankError, match="expected the 3 rows that were written; found 0 in its files"):
        publish(spark, rows_of(3), run)
