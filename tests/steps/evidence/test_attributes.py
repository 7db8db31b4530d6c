"""What the hosts input says of hosts, against a reading of its rows one by one in plain Python."""

import contextlib
import datetime as dt
import decimal
import json
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from sparkrank.evidence import attributes, json_values
from sparkrank.evidence.attributes import AttributeFiles, gather_attributes
from sparkrank.graph import pieces
from sparkrank.inputs import check_hosts
from sparkrank.names.canonical import canonical_host
from sparkrank.names.suffixes import SuffixRules
from sparkrank.places import resolve
from tests.steps.graphs import RULES, make_crawl, tasks_in_process


def gather(
    folder: Path,
    tables: list[pa.Table],
    wanted: list[str],
    rules: SuffixRules | None = None,
    spark: Any = None,
) -> AttributeFiles:
    """The attributes of the wanted hosts from an input of these files; tasks in process without Spark."""
    (folder / "hosts").mkdir(parents=True)
    for number, table in enumerate(tables):
        pq.write_table(table, folder / "hosts" / f"{number}.parquet", row_group_size=3)
    half = len(wanted) // 2
    # As the work files have them: candidates, and sources beside their candidates.
    first, second = pa.array(wanted[:half], pa.string()), pa.array(wanted[half:], pa.string())
    pq.write_table(pa.table({"host": first, "trust": pa.nulls(half)}), folder / "measures.parquet")
    pq.write_table(pa.table({"host": second, "source": second}), folder / "support.parquet")
    facts = check_hosts(str(folder / "hosts"))
    files = [resolve(str(folder / f"{name}.parquet")) for name in ("measures", "support")]
    with tasks_in_process() if spark is None else contextlib.nullcontext():
        return gather_attributes(spark, facts, rules, files, resolve(str(folder / "work")))


def said(found: AttributeFiles) -> dict[str, str]:
    rows = found.table().to_pylist()
    by_host = {row["host"]: row["attributes"] for row in rows}
    assert len(by_host) == len(rows), "a host is there once"
    return by_host


def expected(tables: list[pa.Table], wanted: list[str], rules: SuffixRules | None = None) -> dict[str, str]:
    """Read one by one: JSON as the standard library writes it."""
    seen: dict[str, dict[str, set[Any]]] = {}
    for row in (row for table in tables for row in table.to_pylist()):
        host = canonical_host(row.pop("host")).host
        if host is not None and rules is not None:
            host = rules.split(host)[1] or host
        if host in wanted:
            for name, value in row.items():
                if value is not None:
                    text = value.isoformat() if isinstance(value, dt.date) else value
                    seen.setdefault(host, {}).setdefault(name, set()).add(text)
    objects = {
        host: {
            name: values.copy().pop() if len(values) == 1 else sorted(values) for name, values in of.items()
        }
        for host, of in seen.items()
    }
    return {host: json.dumps(one, sort_keys=True, ensure_ascii=False) for host, one in objects.items()}


def first_file() -> pa.Table:
    return pa.table(
        {
            "status": pa.array([200, 404, None, 200, 10, 9], pa.int16()),
            "host": [
                "A.example",
                "b.example",
                "c.example",
                "http://www.a.example/x",
                "b.example.",
                "not a host",
            ],
            "registered_on": pa.array([dt.date(2019, 2, 3), None, None, dt.date(2019, 2, 3), None, None]),
            "alive": [True, False, None, None, True, True],
            "Zürich": ["ja", "nein", None, "", "nein", "x"],
        }
    )


def second_file() -> pa.Table:
    return pa.table(
        {
            "host": [None, "a.example", "192.0.2.7", "unasked.example"],
            "Zürich": pa.array(["x", "auch", "é", "y"]).dictionary_encode(),
            "registered_on": pa.array([None, dt.date(2001, 1, 1), None, None], pa.date64()),
            "alive": [True, True, None, False],
            "status": pa.array([1, 200, 2**62, 3], pa.int64()),
        }
    )


WANTED = ["a.example", "b.example", "c.example", "www.a.example", "192.0.2.7", "never.example"]


@pytest.mark.parametrize("parts", [1 << 17, 1])
@pytest.mark.parametrize("rows_a_pass", [1 << 16, 2])
def test_rows_of_wanted_hosts_and_no_others(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, parts: int, rows_a_pass: int
) -> None:
    """However the input is cut, and however much is put together at once."""
    monkeypatch.setattr(attributes, "_PART_HOSTS", parts)
    monkeypatch.setattr(json_values, "_ROWS_A_PASS", rows_a_pass)
    monkeypatch.setattr(pieces, "_LEAST_ROWS", 3)
    monkeypatch.setattr(pieces, "_FEW_ROWS", 3)
    tables = [first_file(), second_file()]
    found = said(gather(tmp_path, tables, WANTED))
    assert found == expected(tables, WANTED)
    assert found["a.example"] == (
        '{"Zürich": ["auch", "ja"], "alive": true, "registered_on": ["2001-01-01", "2019-02-03"], '
        '"status": 200}'
    )
    # Numbers go by size, and a host of which nothing is said is not there.
    assert json.loads(found["b.example"])["status"] == [10, 404]
    assert found.keys() == {"a.example", "b.example", "www.a.example", "192.0.2.7"}


def test_in_a_domain_graph_rows_count_for_the_domain(tmp_path: Path) -> None:
    tables = [first_file(), second_file()]
    found = said(gather(tmp_path, tables, WANTED, RULES))
    assert found == expected(tables, WANTED, RULES)
    assert json.loads(found["a.example"])["Zürich"] == ["", "auch", "ja"]
    assert "www.a.example" not in found
    assert "192.0.2.7" in found


def test_hostile_values_are_data(tmp_path: Path) -> None:
    values = [
        '"}, {"rank": 1',
        "\\",
        "\x1b[2J\n\u202e",
        "=HYPERLINK(1)",
        "<script>",
        "é" * 500,
        "\U0001f980" * 300,
        '"' * 300,
    ]
    hosts = [f"h{i}.example" for i in range(len(values))]
    found = said(gather(tmp_path, [pa.table({"host": hosts, "note": values})], hosts))
    notes = [json.loads(found[host]) for host in hosts]
    assert all(list(note) == ["note"] for note in notes)
    assert [note["note"] for note in notes] == [
        *values[:2],
        "\\x1b[2J\\x0a\\u202e",
        *values[3:5],
        "é" * 200,
        "\U0001f980" * 200,
        '"' * 200,
    ]
    assert all(text.isprintable() for text in found.values())


def test_bytes_that_are_no_text_are_shown_as_such(tmp_path: Path) -> None:
    octets = pa.array([b"caf\xe9", b"ok"], pa.binary())
    text = pa.Array.from_buffers(pa.string(), 2, octets.buffers())
    found = said(
        gather(tmp_path, [pa.table({"host": ["a.example", "b.example"], "note": text})], ["a.example"])
    )
    assert found == {"a.example": '{"note": "caf\ufffd"}'}


def test_values_of_every_kind(tmp_path: Path) -> None:
    at = dt.datetime(2024, 5, 1, 12, 30, tzinfo=dt.UTC)
    row = {
        "big": pa.array([2**64 - 1], pa.uint64()),
        "half": pa.array([0.1], pa.float32()),
        "price": pa.array([decimal.Decimal("1.50")]),
        "nan": pa.array([float("nan")]),
        "infinite": pa.array([float("inf")]),
        "nothing": pa.nulls(1),
        "seen": pa.array([at], pa.timestamp("s", "Europe/Vienna")),
        "local": pa.array([at.replace(tzinfo=None)], pa.timestamp("ms")),
        "text": pa.array(["x"], pa.large_string()),
    }
    found = said(gather(tmp_path, [pa.table({"host": ["a.example"], **row})], ["a.example"]))
    assert json.loads(found["a.example"]) == {
        "big": 2**64 - 1,
        "half": 0.1,
        "price": 1.5,
        "seen": "2024-05-01 12:30:00.000000Z",
        "local": "2024-05-01 12:30:00.000000",
        "text": "x",
    }


def test_of_many_different_values_the_first_are_listed_and_the_rest_counted(tmp_path: Path) -> None:
    table = pa.table({"host": ["a.example"] * 40, "n": [i % 20 for i in range(40)]})
    found = said(gather(tmp_path, [table], ["a.example", "b.example"]))
    assert json.loads(found["a.example"]) == {"n": [0, 1, 2, 3, 4, 5, 6, 7, "and 12 more"]}
    table = pa.table({"host": ["a.example"] * 8, "n": list(range(8))})
    found = said(gather(tmp_path / "eight", [table], ["a.example"]))
    assert json.loads(found["a.example"]) == {"n": list(range(8))}


def test_without_attributes_nothing_is_read(tmp_path: Path) -> None:
    assert gather(tmp_path / "bare", [pa.table({"host": ["a.example"]})], ["a.example"]).places == ()
    assert gather(tmp_path / "other", [first_file()], ["never.example", "neither.example"]).places == ()
    assert gather_attributes(None, None, None, [], resolve(str(tmp_path))) == AttributeFiles(places=())


def test_a_column_for_rows_of_an_engine_and_in_memory(spark, tmp_path: Path) -> None:
    found = gather(tmp_path, [first_file(), second_file()], WANTED, RULES, spark)
    assert said(found) == expected([first_file(), second_file()], WANTED, RULES)
    about_b = said(found)["b.example"]
    table = pa.table({"source": ["b.example", "c.example", "b.example"], "n": [1, 2, 3]})
    added = found.added(table, "source", "source_attributes")
    assert added.to_pydict() == {**table.to_pydict(), "source_attributes": [about_b, None, about_b]}
    rows = spark.createDataFrame(list(zip(*table.to_pydict().values(), strict=True)), "source string, n int")
    joined = found.joined(rows, "source", "source_attributes").orderBy("n")
    assert [row.asDict() for row in joined.collect()] == added.to_pylist()
    none = AttributeFiles(places=())
    assert none.joined(rows, "source", "attributes").dtypes[-1] == ("attributes", "string")
    assert none.added(table, "source", "attributes")["attributes"].to_pylist() == [None] * 3
    assert none.added(table, "source", "attributes").schema.field("attributes").type == pa.string()


def test_no_score_sees_them(tmp_path: Path) -> None:
    """The same hosts with and without attributes: the same rows to the last bit."""
    edges = [("a.example", "b.example"), ("b.example", "target.test"), ("c.example", "target.test")]
    hosts = ["lonely.example", "a.example", "target.test"]
    told = {"status": [404, 200, 410], "language": ["de", None, "en"], "trust": [0.0, 1.0, 0.0]}
    crawls = [
        make_crawl(None, tmp_path / name, edges, [("a.example", "one")], hosts=hosts)
        for name in ("without", "with")
    ]
    assert crawls[1].hosts is not None
    pq.write_table(pa.table({"host": hosts, **told}), crawls[1].hosts)
    without, with_attributes = (crawl.run().table for crawl in crawls)
    assert without.num_rows == 5
    assert with_attributes.equals(without)
