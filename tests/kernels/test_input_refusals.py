"""Checks of Parquet inputs: every refusal by its exact message."""

import os
from pathlib import Path

import pyarrow as pa
import pytest

from sparkrank.errors import ConfigError
from sparkrank.inputs import check_edges
from tests.kernels.test_inputs import edges, refusal, write


def test_nothing_there(tmp_path: Path) -> None:
    path = tmp_path / "none"
    assert refusal(path) == (
        f"input.edges at {path}: expected a file or folder, found nothing there; check the path"
    )
    (tmp_path / "_hidden").touch()
    assert refusal(tmp_path) == (
        f"input.edges at {tmp_path}: expected at least one file, found an empty folder; check the path"
    )


def test_unreachable_scheme() -> None:
    with pytest.raises(ConfigError, match=r"^ftp://crawl/edges: expected a local path or one of "):
        check_edges("ftp://crawl/edges")


@pytest.mark.skipif(os.geteuid() == 0, reason="root reads everything")
def test_unreadable_folder(tmp_path: Path) -> None:
    folder = tmp_path / "closed"
    write(folder / "e.parquet", edges(1))
    folder.chmod(0)
    message = refusal(folder)
    folder.chmod(0o700)
    assert message.startswith(f"input.edges at {folder}: expected a readable file or folder, found: ")


def test_link_that_leads_nowhere(tmp_path: Path) -> None:
    write(tmp_path / "part=0" / "a.parquet", edges(1))
    (tmp_path / "part=0" / "e.parquet").symlink_to(tmp_path / "gone")
    assert refusal(tmp_path) == (
        f"input.edges at {tmp_path}: expected files that are there, "
        "found part=0/e.parquet, a link that leads nowhere; repair or remove it"
    )


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (b"", "an empty file"),
        (b"src,dst\n", "a file of another format"),
        (b"PAR1", "a file that is cut short (its footer is missing)"),
        (b"PAR1PAR1", "a file that is cut short (its footer is missing)"),
        (b"PAR1\xff\xff\xff\x7fPAR1", "a file that is cut short (its footer is missing)"),
    ],
)
def test_not_parquet(tmp_path: Path, content: bytes, found: str) -> None:
    path = tmp_path / "e.parquet"
    path.write_bytes(content)
    assert refusal(path) == (
        f"input.edges at {path}: e.parquet: expected a readable Parquet file, found: {found}; "
        "write it again, or hide it with a name that begins with _"
    )


def test_cut_short_anywhere(tmp_path: Path) -> None:
    path = write(tmp_path / "e.parquet", edges(50))
    content = path.read_bytes()
    for end in range(0, len(content), 37):
        path.write_bytes(content[:end])
        assert refusal(path).startswith(
            f"input.edges at {path}: e.parquet: expected a readable Parquet file, found: "
        )


def test_damaged_footer(tmp_path: Path) -> None:
    path = write(tmp_path / "e.parquet", edges(2))
    content = bytearray(path.read_bytes())
    start = len(content) - 8 - int.from_bytes(content[-8:-4], "little")
    content[start : start + 40] = b"\xff" * 40
    path.write_bytes(content)
    assert refusal(path).startswith(
        f"input.edges at {path}: e.parquet: expected a readable Parquet file, found: "
    )


def test_first_bad_file_by_name_is_named(tmp_path: Path) -> None:
    for name in ("c", "b", "a"):
        (tmp_path / f"{name}.parquet").write_bytes(b"" if name != "a" else b"x")
    assert refusal(tmp_path).startswith(f"input.edges at {tmp_path}: a.parquet: ")


def test_no_rows(tmp_path: Path) -> None:
    path = write(tmp_path / "e.parquet", edges(0).cast(pa.schema({"src": pa.string(), "dst": pa.string()})))
    assert refusal(path) == f"input.edges at {path}: expected at least one row, found none; check the path"
    write(tmp_path / "f.parquet", edges(1))
    assert check_edges(str(tmp_path)).rows == 1, "an empty part is no fault"


@pytest.mark.parametrize(
    ("table", "message"),
    [
        (
            pa.table({"from": ["a"], "dst": ["b"]}),
            "expected a column src (text), found from, dst; name the column src",
        ),
        (
            pa.table({"src": ["a"]}),
            "expected a column dst (text), found src; name the column dst",
        ),
        (
            edges(1, src=pa.array([b"a.example"])),
            "expected column src to be text, found binary; convert the column",
        ),
        (
            edges(1, dst=pa.array([1])),
            "expected column dst to be text, found int64; convert the column",
        ),
        (
            edges(1, dst=pa.array([["a"]])),
            "expected column dst to be text, found list<element: string>; convert the column",
        ),
        (
            edges(1, links=pa.array([1.0])),
            "expected column links to be a whole number, found double; convert the column",
        ),
        (
            edges(1, links=pa.array(["1"])),
            "expected column links to be a whole number, found text; convert the column",
        ),
        (
            edges(1, links=pa.array([True])),
            "expected column links to be a whole number, found bool; convert the column",
        ),
        (
            edges(1, links=pa.array([1], pa.uint64())),
            "expected column links to be a whole number, found uint64; convert the column",
        ),
        (
            edges(1, rel=pa.array([1])),
            "expected column rel to be text, found int64; convert the column",
        ),
        (
            pa.table({"Src": ["a"], "dst": ["b"]}),
            "expected one column src, found Src; rename or remove columns",
        ),
        (
            edges(1, LINKS=pa.array([1]), links=pa.array([1])),
            "expected one column links, found LINKS, links; rename or remove columns",
        ),
        (
            pa.table([["a"], ["b"], ["c"]], names=["src", "dst", "dst"]),
            "expected one column dst, found dst, dst; rename or remove columns",
        ),
    ],
)
def test_wrong_columns(tmp_path: Path, table: pa.Table, message: str) -> None:
    path = write(tmp_path / "e.parquet", table)
    assert refusal(path) == f"input.edges at {path}: e.parquet: {message}"


@pytest.mark.parametrize(
    ("first", "second", "message"),
    [
        (
            edges(1, links=pa.array([1])),
            edges(1),
            "links alike in every file, found int64 in 0.parquet and none",
        ),
        (edges(1), edges(1, rel=["ugc"]), "rel alike in every file, found none in 0.parquet and text"),
        (
            edges(1, links=pa.array([1], "int32")),
            edges(1, links=pa.array([1], "int64")),
            "links alike in every file, found int32 in 0.parquet and int64",
        ),
    ],
)
def test_drifting_schemas(tmp_path: Path, first: pa.Table, second: pa.Table, message: str) -> None:
    write(tmp_path / "0.parquet", first)
    write(tmp_path / "1.parquet", first)
    write(tmp_path / "2.parquet", second)
    assert refusal(tmp_path) == (
        f"input.edges at {tmp_path}: expected column {message} in 2.parquet; write the files with one schema"
    )


def test_folders_that_spark_would_not_read(tmp_path: Path) -> None:
    write(tmp_path / "old" / "e.parquet", edges(1))
    assert refusal(tmp_path) == (
        f"input.edges at {tmp_path}: expected folders named key=value below it, found old; "
        "move its files up or name the folder itself as the input"
    )
    (tmp_path / "old").rename(tmp_path / "crawl=1")
    write(tmp_path / "f.parquet", edges(1))
    assert refusal(tmp_path) == (
        f"input.edges at {tmp_path}: expected the same partition folders for every file, "
        "found crawl=1/e.parquet beside f.parquet; make them alike"
    )
    (tmp_path / "f.parquet").unlink()
    (tmp_path / "crawl=1").rename(tmp_path / "Links=1")
    assert refusal(tmp_path) == (
        f"input.edges at {tmp_path}: expected partition folders that name no column of the input, "
        "found Links=…; rename the folders"
    )
