"""Checks of Parquet inputs: facts, fingerprints, and every refusal by its exact message."""

import hashlib
import os
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

import sparkrank.inputs.parquet as checks
from sparkrank.errors import InputRefused
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
