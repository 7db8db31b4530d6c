"""Publishing a table from its parts: rows, digest and descriptions as Spark's own way gives them."""

import hashlib
import itertools
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from sparkrank.errors import SparkrankError
from sparkrank.places import resolve
from sparkrank.publish import parts, table_file
from sparkrank.publish.attempts import RunFolder, new_attempt_id
from sparkrank.publish.by_tasks import publish_parts
from sparkrank.publish.digest import digest_ordered_rows
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.parts import TableParts, choose_cuts, part_numbers, write_parts
from sparkrank.publish.write import publish_table
from sparkrank.tables import ColumnSpec, ColumnType, TableSpec, arrow_schema
from tests.steps.graphs import tasks_in_process

TABLE = TableSpec(
    name="hosts_seen",
    meaning="A table of the tests.",
    key=("host",),
    order=("host",),
    columns=(
        ColumnSpec(name="host", type=ColumnType.STRING, unit="text", meaning="A host."),
        ColumnSpec(name="domain", type=ColumnType.STRING, unit="text", meaning="Domain.", nullable=True),
        ColumnSpec(name="rows", type=ColumnType.LONG, unit="rows", meaning="Its rows."),
        ColumnSpec(name="steps", type=ColumnType.INT, unit="links", meaning="Steps.", nullable=True),
        ColumnSpec(name="share", type=ColumnType.DOUBLE, unit="share", meaning="Share.", nullable=True),
        ColumnSpec(name="empty", type=ColumnType.DOUBLE, unit="share", meaning="No value.", nullable=True),
        ColumnSpec(name="is_core", type=ColumnType.BOOLEAN, unit="yes or no", meaning="A member."),
        ColumnSpec(name="cautions", type=ColumnType.STRINGS, unit="text", meaning="Doubts."),
    ),
)


def rows_of(count: int, seed: int = 3) -> pa.Table:
    """Rows in no order, with nulls where they may be."""
    random = np.random.default_rng(seed)
    numbers = random.permutation(count)
    columns = {
        "host": [f"h{n % 7}.site{n}.example" for n in numbers],
        "domain": [None if n % 5 == 0 else f"site{n}.example" for n in numbers],
        "rows": numbers,
        "steps": [None if n % 3 == 0 else int(n % 4) for n in numbers],
        "share": [None if n % 11 == 0 else float(n) / 7 for n in numbers],
        "empty": [None] * count,
        "is_core": numbers % 2 == 0,
        "cautions": [["x"] * int(n % 3) for n in numbers],
    }
    schema = arrow_schema(TABLE)
    arrays = [pa.array(columns[name], schema.field(name).type) for name in schema.names]
    return pa.Table.from_arrays(arrays, schema=schema)


def scratch(rows: pa.Table, folder: Path, *, files: int, table: TableSpec = TABLE) -> TableParts:
    """The rows dealt out to so many tasks, cut as tasks cut them."""
    cuts = choose_cuts(rows["host"].to_pylist()[::3], rows.num_rows)
    places, counts = [], []
    for number in range(files):
        dealt = rows.take(np.arange(number, rows.num_rows, files)).combine_chunks()
        places.append(resolve(str(folder / f"{number}.arrow")))
        part = part_numbers(column(dealt, "host"), cuts)
        chosen = [dealt.filter(pa.array(part == n)) for n in range(len(cuts) + 1)]
        given = [{name: column(one, name) for name in one.schema.names} for one in chosen]
        counts.append(write_parts(places[-1], table, given))
    return TableParts(files=tuple(places), rows=tuple(counts))


def column(rows: pa.Table, name: str) -> pa.Array:
    return pa.concat_arrays(rows[name].chunks) if rows.num_rows else pa.array([], rows[name].type)


@pytest.fixture
def many_parts(monkeypatch) -> None:
    """Parts of at least ten rows, row groups of at most seven."""
    monkeypatch.setattr(parts, "_LEAST_ROWS", 10)
    monkeypatch.setattr(table_file, "_ROW_GROUP_ROWS", 7)


def publish_here(spark, given: TableParts, run: RunFolder, table: TableSpec = TABLE) -> TableEntry:
    with tasks_in_process():
        return publish_parts(spark, given, table, run)


def read_back(run: RunFolder, entry: TableEntry) -> list[dict[str, Any]]:
    return [
        row
        for file in entry.files
        for row in pq.ParquetFile(run.output.below(file.path).local_path).read().to_pylist()
    ]


def test_rows_and_digest_are_those_of_the_way_through_spark(spark, run, tmp_path, many_parts) -> None:
    rows = rows_of(300)
    entry = publish_here(spark, scratch(rows, tmp_path, files=5), run)
    assert len(entry.files) == 16
    assert min(file.rows for file in entry.files) > 0
    assert read_back(run, entry) == rows.sort_by("host").to_pylist()
    other = RunFolder(output=run.output, run_id="run-1", attempt_id=new_attempt_id(), lock=run.lock)
    expected = publish_table(spark.createDataFrame(rows), TABLE, other)
    assert (entry.digest, entry.rows) == (expected.digest, expected.rows)
    assert digest_ordered_rows(run.output, entry.files, TABLE) == entry.digest


@pytest.mark.parametrize("files", [1, 3])
def test_spark_s_tasks_write_what_this_process_writes(spark, run, tmp_path, monkeypatch, files) -> None:
    """Cut into one scratch file or three: where a row came from is not to be seen in the files."""
    monkeypatch.setattr(parts, "_LEAST_ROWS", 30)
    rows = rows_of(100)
    by_spark = publish_parts(spark, scratch(rows, tmp_path / "a", files=files), TABLE, run)
    assert len(by_spark.files) == 3
    before = {file.path: Path(run.output.below(file.path).local_path).read_bytes() for file in by_spark.files}
    again = publish_here(spark, scratch(rows, tmp_path / "b", files=7), run)
    assert again == by_spark
    # A task that runs twice leaves one file, with the same bytes.
    folder = run.output.below(run.table_name("hosts_seen"))
    assert {f"{run.table_name('hosts_seen')}/{file.name}" for file in folder.list_files()} == set(before)
    assert all(Path(run.output.below(path).local_path).read_bytes() == data for path, data in before.items())


def test_an_entry_describes_the_files_as_they_are(spark, run, tmp_path, many_parts) -> None:
    entry = publish_here(spark, scratch(rows_of(50), tmp_path, files=2), run)
    for number, file in enumerate(entry.files):
        data = Path(run.output.below(file.path).local_path).read_bytes()
        assert file.bytes == len(data)
        assert file.digest == "sha256:" + hashlib.sha256(data).hexdigest()
        assert file.path == f"{run.table_name('hosts_seen')}/part-{number:05d}.parquet"
    assert sum(file.rows for file in entry.files) == entry.rows == 50


def test_a_host_is_in_one_row_group_by_its_statistics(spark, run, tmp_path, many_parts) -> None:
    entry = publish_here(spark, scratch(rows_of(60), tmp_path, files=2), run)
    ranges = []
    for file in entry.files:
        metadata = pq.read_metadata(run.output.below(file.path).local_path)
        for number in range(metadata.num_row_groups):
            statistics = metadata.row_group(number).column(0).statistics
            assert metadata.row_group(number).num_rows <= 7
            ranges.append((statistics.min, statistics.max))
    assert len(ranges) >= 9
    ends = [end for both in ranges for end in both]
    assert ends == sorted(ends)
    assert all(first[1] < second[0] for first, second in itertools.pairwise(ranges))


def test_descriptions_travel_for_spark_and_for_arrow(spark, run, tmp_path) -> None:
    entry = publish_here(spark, scratch(rows_of(9), tmp_path, files=2), run)
    (file,) = entry.files
    read = spark.read.parquet(run.output.below(file.path).uri)
    found = pq.read_schema(run.output.below(file.path).local_path)
    for spec in TABLE.columns:
        assert read.schema[spec.name].metadata == {"comment": spec.meaning, "unit": spec.unit}
        assert read.schema[spec.name].dataType.simpleString() == spec.type.value.replace("long", "bigint")
        assert found.field(spec.name).metadata[b"description"] == spec.meaning.encode()
        assert found.field(spec.name).metadata[b"unit"] == spec.unit.encode()
    assert read.count() == 9


def test_an_empty_table_is_one_file_without_rows(spark, run, tmp_path) -> None:
    entry = publish_here(spark, scratch(rows_of(0), tmp_path, files=3), run)
    assert (entry.rows, [file.rows for file in entry.files]) == (0, [0])
    assert entry.digest == "xxh64x2:" + 32 * "0"
    assert pq.read_schema(run.output.below(entry.files[0].path).local_path).names == list(TABLE.column_names)
    assert spark.read.parquet(run.output.below(entry.files[0].path).uri).count() == 0


def test_two_rows_of_one_key_are_refused(spark, run, tmp_path) -> None:
    rows = rows_of(9)
    given = scratch(pa.concat_tables([rows, rows.slice(0, 1)]), tmp_path, files=2)
    with pytest.raises(SparkrankError) as refusal:
        publish_here(spark, given, run)
    assert str(refusal.value) == (
        f"table hosts_seen: expected one row a host, found two of {rows['host'][0].as_py()!r}; "
        "this is a fault of the program, report it"
    )


@pytest.mark.parametrize(("name", "value"), [("rows", None), ("cautions", [None])])
def test_a_null_where_none_may_be_is_refused(spark, run, tmp_path, name, value) -> None:
    rows = rows_of(3)
    at = rows.schema.get_field_index(name)
    nulls = pa.array([value] * 2 + rows[name].to_pylist()[2:], rows.schema.field(name).type)
    given = scratch(rows.set_column(at, rows.schema.field(name), nulls), tmp_path, files=1)
    with pytest.raises(SparkrankError) as refusal:
        publish_here(spark, given, run)
    assert str(refusal.value) == (
        f"table hosts_seen: expected no nulls in column {name}; found 2 rows with one; "
        "this is a fault of the program, report it"
    )


def test_lost_rows_are_noticed(spark, run, tmp_path, many_parts) -> None:
    """A scratch file that another version of a task wrote: its part has other rows than were reported."""
    given = scratch(rows_of(40), tmp_path, files=2)
    rows = given.rows_by_part[0]
    more = (given.rows[0][0] + 1, *given.rows[0][1:])
    with pytest.raises(SparkrankError) as refusal:
        publish_here(spark, TableParts(files=given.files, rows=(more, given.rows[1])), run)
    assert str(refusal.value) == (
        f"table hosts_seen: expected {rows + 1} rows in part 0, found {rows}; "
        "remove the work folder and run again"
    )
