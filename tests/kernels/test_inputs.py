"""Checks of Parquet inputs: facts, fingerprints, and every refusal by its exact message."""

import hashlib
import os
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

import sparkrank.inputs.parquet as checks
from sparkrank.errors import ConfigError, InputRefused
from sparkrank.inputs import check_edges, check_hosts


def edges(rows: int = 2, **columns: Any) -> pa.Table:
    base = {"src": [f"s{i}.example" for i in range(rows)], "dst": [f"d{i}.example" for i in range(rows)]}
    return pa.table({**base, **columns})


def write(path: Path, table: pa.Table) -> Path:
    path.parent.mkdir(parents=True, exist_ok=True)
    pq.write_table(table, path)
    return path


def refusal(path: Path | str) -> str:
    with pytest.raises(InputRefused) as caught:
        check_edges(str(path))
    assert caught.value.exit_status == 3
    message = str(caught.value)
    assert "\n" not in message
    return message


def test_facts_of_one_file(tmp_path: Path) -> None:
    path = write(tmp_path / "e.parquet", edges(3))
    facts = check_edges(str(path))
    assert (facts.rows, facts.bytes, facts.has_links, facts.has_rel) == (3, path.stat().st_size, False, False)
    (file,) = facts.files
    assert (file.name, file.rows, file.bytes) == ("e.parquet", 3, path.stat().st_size)
    assert file.fingerprint == hashlib.sha256(path.read_bytes()).hexdigest()
    assert facts.cautions == ()
    assert check_edges(f"file://{path}").fingerprint == facts.fingerprint


def test_facts_of_a_partitioned_folder(tmp_path: Path) -> None:
    table = edges(2, links=pa.array([1, 2]), rel=["nofollow", None])
    for part in ("1", "0"):
        write(tmp_path / "crawl=2026-11" / f"part={part}" / "e.parquet", table)
    for hidden in ("_SUCCESS", ".e.parquet.crc", "_temporary/0/x.parquet", "crawl=2026-11/x._COPYING_"):
        (tmp_path / hidden).parent.mkdir(parents=True, exist_ok=True)
        (tmp_path / hidden).write_bytes(b"not Parquet")
    facts = check_edges(str(tmp_path))
    assert [file.name for file in facts.files] == [
        "crawl=2026-11/part=0/e.parquet",
        "crawl=2026-11/part=1/e.parquet",
    ]
    assert (facts.rows, facts.has_links, facts.has_rel) == (4, True, True)
    assert facts.partition_keys == ("crawl", "part")


@pytest.mark.parametrize("links", ["int8", "int16", "int32", "int64", "uint8", "uint16", "uint32"])
def test_links_of_any_whole_type(tmp_path: Path, links: str) -> None:
    path = write(tmp_path / "e.parquet", edges(1, links=pa.array([1], links)))
    assert check_edges(str(path)).has_links


@pytest.mark.parametrize("text", [pa.string(), pa.large_string(), pa.dictionary(pa.int32(), pa.string())])
def test_text_however_it_is_stored(tmp_path: Path, text: Any) -> None:
    path = write(tmp_path / "e.parquet", edges(1, src=pa.array(["a.example"]).cast(text)))
    assert check_edges(str(path)).rows == 1


def test_ways_of_storing_text_do_not_drift(tmp_path: Path) -> None:
    write(tmp_path / "0.parquet", edges(1))
    write(tmp_path / "1.parquet", edges(1, src=pa.array(["a.example"], pa.large_string())))
    assert check_edges(str(tmp_path)).rows == 2


def test_fingerprint_follows_content_and_names(tmp_path: Path) -> None:
    write(tmp_path / "a" / "0.parquet", edges(1))
    first = check_edges(str(tmp_path / "a")).fingerprint
    os.utime(tmp_path / "a" / "0.parquet", (1, 1))
    assert check_edges(str(tmp_path / "a")).fingerprint == first, "content decides, not the time"
    (tmp_path / "a").rename(tmp_path / "b")
    assert check_edges(str(tmp_path / "b")).fingerprint == first, "a moved folder is the same input"
    (tmp_path / "b" / "0.parquet").rename(tmp_path / "b" / "1.parquet")
    renamed = check_edges(str(tmp_path / "b")).fingerprint
    write(tmp_path / "b" / "1.parquet", edges(1, dst=["other.example"]))
    changed = check_edges(str(tmp_path / "b")).fingerprint
    assert len({first, renamed, changed}) == 3


def test_large_files_are_known_by_their_footer(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(checks, "WHOLE_CONTENT_BYTES", 10)
    path = write(tmp_path / "e.parquet", edges(1))
    os.utime(path, ns=(5, 5))
    facts = check_edges(str(path))
    content = path.read_bytes()
    footer = content[-8 - int.from_bytes(content[-8:-4], "little") :]
    expected = hashlib.sha256(f"{len(content)} 5 ".encode() + footer).hexdigest()
    assert facts.files[0].fingerprint == expected
    assert facts.cautions == (
        "input.edges: 1 of 1 files are larger than 0 MB: "
        "fingerprinted by size, time of change and footer, not by content",
    )


def test_many_files_are_known_by_their_footers(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(checks, "MANY_FILES", 1)
    for name in ("0", "1"):
        write(tmp_path / f"{name}.parquet", edges(1))
    facts = check_edges(str(tmp_path))
    assert facts.cautions == (
        "input.edges: 2 files, more than 1: fingerprinted by size, time of change and footer, not by content",
    )
    (tmp_path / "1.parquet").write_bytes(b"PAR1")
    assert "1.parquet" in refusal(tmp_path), "every footer is still read"


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


def test_hosts_are_checked_alike(tmp_path: Path) -> None:
    path = write(tmp_path / "h.parquet", pa.table({"host": ["a.example"], "note": [1]}))
    facts = check_hosts(str(path))
    assert (facts.source, facts.rows, facts.has_links) == ("input.hosts", 1, False)
    path = write(tmp_path / "h.parquet", edges(1))
    with pytest.raises(InputRefused) as caught:
        check_hosts(str(path))
    assert str(caught.value) == (
        f"input.hosts at {path}: h.parquet: expected a column host (text), found src, dst; "
        "name the column host"
    )


def hosts_refusal(path: Path) -> str:
    with pytest.raises(InputRefused) as caught:
        check_hosts(str(path))
    message = str(caught.value)
    assert "\n" not in message
    return message


def test_further_columns_of_the_hosts_are_attributes(tmp_path: Path) -> None:
    table = pa.table({"status": [1], "host": ["a.example"], "Sprache": ["de"], "alive": [True]})
    facts = check_hosts(str(write(tmp_path / "h" / "0.parquet", table)))
    assert (facts.columns, facts.attributes) == (("host",), ("status", "Sprache", "alive"))
    # Another order and width of the same kind are the same columns.
    other = pa.table({"Sprache": ["de"], "host": ["b.example"], "alive": [None], "status": [1]})
    types = [
        ("Sprache", pa.large_string()),
        ("host", pa.string()),
        ("alive", pa.bool_()),
        ("status", pa.int8()),
    ]
    write(tmp_path / "h" / "1.parquet", other.cast(pa.schema(types)))
    assert check_hosts(str(tmp_path / "h")).attributes == facts.attributes
    assert check_edges(str(write(tmp_path / "e.parquet", edges(1, note=["x"])))).attributes == ()


def test_attributes_that_cannot_be_handed_on(tmp_path: Path) -> None:
    path = tmp_path / "h.parquet"
    where = f"input.hosts at {path}: h.parquet"
    many = {f"c{i}": [i] for i in range(32)}
    assert len(check_hosts(str(write(path, pa.table({"host": ["a.example"], **many})))).attributes) == 32
    write(path, pa.table({"host": ["a.example"], **many, "more": [1]}))
    assert hosts_refusal(path) == (
        f"{where}: expected at most 32 columns beside host, found 33; leave out those that no reviewer needs"
    )
    write(path, pa.table({"host": ["a.example"], "addresses": [["192.0.2.7"]]}))
    found = hosts_refusal(path)
    assert found.startswith(
        f"{where}: expected column addresses to be text, numbers, booleans, dates or times, found list<"
    )
    assert found.endswith("; convert or leave out the column")
    write(path, pa.table({"host": ["a.example"], "a\x1b[2J": [1]}))
    assert hosts_refusal(path) == (
        f"{where}: expected column names of at most 200 characters, none of them a control character, "
        "found a\\x1b[2J; rename the column"
    )
    write(path, pa.Table.from_arrays([["a.example"], [1], [2]], names=["host", "note", "note"]))
    assert hosts_refusal(path) == f"{where}: expected one column note, found 2; rename columns"
    (tmp_path / "h").mkdir()
    write(tmp_path / "h" / "0.parquet", pa.table({"host": ["a.example"], "note": [1]}))
    write(tmp_path / "h" / "1.parquet", pa.table({"host": ["a.example"], "note": ["x"]}))
    assert hosts_refusal(tmp_path / "h") == (
        f"input.hosts at {tmp_path / 'h'}: expected column note alike in every file, found a whole number in "
        "0.parquet and text in 1.parquet; write the files with one schema"
    )
