"""Core and known-spam lists: every refusal by its exact message."""

from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from tests.kernels.names.test_lists import refusal, write


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (
            "",
            "expected a header row with a column host, found an empty file; "
            "begin the list with: host or host,slice,weight",
        ),
        (
            "a.example\nb.example\n",
            "expected a header row with a column host, found a.example; "
            "begin the list with: host or host,slice,weight",
        ),
        (
            "Host;slice\n",
            "expected a header row with a column host, found Host;slice; "
            "begin the list with: host or host,slice,weight",
        ),
        ("host,host\n", "expected one column host, found 2; rename the others"),
        ("host,weight,weight\n", "expected one column weight, found 2; rename the others"),
        (
            "host,slice\na.example\n",
            "expected 2 fields in row 2 as in the header, found 1; correct the row",
        ),
        (
            "host\na.example,b\n",
            "expected 1 fields in row 2 as in the header, found 2; correct the row",
        ),
        (
            'host\na.example\nb"x\n',
            "expected CSV as in RFC 4180, found a misplaced quote or a lone carriage return in row 3, "
            "near character 16 of the file; correct the row",
        ),
        (b"host\na\xff.example\n", "expected UTF-8, found byte 7 to be none; save the list as UTF-8"),
        (
            "host,slice\n",
            "expected at least one usable host, found 0 rows, none usable; "
            "trust starts from these hosts, add some",
        ),
        (
            "host\n%\n",
            "expected at least one usable host, found 1 rows, none usable, "
            'the first of them "%": bad_character; '
            "trust starts from these hosts, add some",
        ),
    ],
)
def test_refused_csv(tmp_path: Path, content: str | bytes, message: str) -> None:
    assert refusal(write(tmp_path, content)) == message


@pytest.mark.parametrize(
    ("table", "message"),
    [
        (pa.table({"x": ["a"]}), "expected a column host (text), found x; name the column host"),
        (
            pa.table({"host": [b"a"]}),
            "expected column host to be text, found binary; convert the column",
        ),
        (
            pa.table({"host": pa.nulls(1)}),
            "expected column host to be text, found null; convert the column",
        ),
        (
            pa.table({"host": ["a"], "slice": [1]}),
            "expected column slice to be text, found int64; convert the column",
        ),
        (
            pa.table({"host": ["a"], "weight": ["1"]}),
            "expected column weight to be a number, found text; convert the column",
        ),
        (
            pa.table([["a"], ["b"]], names=["host", "host"]),
            "expected one column host, found 2; rename the others",
        ),
    ],
)
def test_refused_parquet(tmp_path: Path, table: pa.Table, message: str) -> None:
    pq.write_table(table, tmp_path / "core.parquet")
    assert refusal(str(tmp_path / "core.parquet")) == f"core.parquet: {message}"


def test_refused_files(tmp_path: Path) -> None:
    assert (
        refusal(str(tmp_path / "no.csv")) == "expected a file or folder, found nothing there; check the path"
    )
    assert refusal(str(tmp_path)) == "expected at least one file, found an empty folder; check the path"
    assert refusal(write(tmp_path, "host\n", "core.parquet")) == (
        "core.parquet: expected a readable Parquet file, found: a file of another format; "
        "write it again, or hide it with a name that begins with _"
    )
    path = write(tmp_path, b"PAR1 cut short")
    assert refusal(path) == (
        "core.csv: expected a readable Parquet file, "
        "found: a file that is cut short (its footer is missing); "
        "write it again, or hide it with a name that begins with _"
    )


def test_damaged_pages(tmp_path: Path) -> None:
    pq.write_table(pa.table({"host": [f"h{i}.example" for i in range(999)]}), tmp_path / "core.parquet")
    content = bytearray((tmp_path / "core.parquet").read_bytes())
    content[4:400] = b"\xff" * 396
    path = write(tmp_path, bytes(content), "core.parquet")
    assert refusal(path).startswith("core.parquet: expected a readable Parquet file, found: ")
