"""Core and known-spam lists: what counts, what is rejected, and every refusal by its exact message."""

import csv
import hashlib
import io
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from sparkrank.config import load_config
from sparkrank.errors import InputRefused
from sparkrank.names.canonical import canonical_host
from sparkrank.names.lists import (
    _PLAIN_HOST,
    HOSTS_SCHEMA,
    HostList,
    check_disjoint,
    read_core,
    read_known_spam,
    read_lists,
)
from sparkrank.names.rejections import Rejection
from sparkrank.shown import shown_value


class Rules:
    """Suffix rules of an invented list: `example`, `test` and `ac.example`; no domain for addresses."""

    def split(self, host: str) -> tuple[str | None, str | None]:
        if host[-1] in "0123456789]":
            return None, None
        labels = host.split(".")
        count = 2 if labels[-2:] == ["ac", "example"] else 1
        domain = ".".join(labels[-count - 1 :]) if len(labels) > count else None
        return ".".join(labels[-count:]), domain


RULES = Rules()


def write(folder: Path, content: str | bytes, name: str = "core.csv") -> str:
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return str(path)


def core(path: str, node: str = "host") -> HostList:
    return read_core(path, node=node, rules=RULES)


def rows(hosts: HostList) -> list[tuple[Any, ...]]:
    return [tuple(row.values()) for row in hosts.hosts.to_pylist()]


def refusal(path: str, node: str = "host") -> str:
    with pytest.raises(InputRefused) as caught:
        core(path, node)
    assert caught.value.exit_status == 3
    message = str(caught.value)
    assert "\n" not in message
    prefix = f"input.core at {path}: "
    assert message.startswith(prefix)
    return message.removeprefix(prefix)


def test_a_list_in_all_its_variety(tmp_path: Path) -> None:
    text = (
        "note,host,slice,weight\r\n"
        'a university,Uni.AC.example.,academic,2\r\n"said ""good"",\r\ntwice",http://press.test:80/x,press,.5\r\n'
        "an address,192.0.2.7,,\r\n,münchen.example,,1e1\r\n,uni.ac.example,academic,3\r\n"
        ",a b,,\r\n,,,\r\n,a b,,\r\n"
    )
    path = write(tmp_path, text)
    found = core(path)
    assert found.hosts.schema == HOSTS_SCHEMA
    assert rows(found) == [
        ("192.0.2.7", "(no suffix)", 1.0, 4),
        ("press.test", "press", 0.5, 3),
        ("uni.ac.example", "academic", 3.0, 6),
        ("xn--mnchen-3ya.example", "example", 10.0, 5),
    ]
    assert found.rejections == (
        Rejection(source="core.host", row_value="", reason="empty", rows=1),
        Rejection(source="core.host", row_value="a b", reason="not_bare", rows=2),
    )
    assert (found.kind, found.rows, found.duplicates) == ("core", 8, 1)
    assert found.fingerprint == hashlib.sha256(text.encode()).hexdigest()


@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("header", ["host", '"host"'])
def test_line_ends_marks_and_quotes_make_no_difference(
    tmp_path: Path, mark: bytes, end: str, header: str
) -> None:
    path = write(tmp_path, mark + end.join([header, "b.example", "a.example"]).encode())
    assert rows(core(path)) == [("a.example", "example", 1.0, 3), ("b.example", "example", 1.0, 2)]


def test_parquet_by_content_name_and_folder(tmp_path: Path) -> None:
    table = pa.table({"host": ["b.example", None, "a.example"], "weight": [2, None, None], "x": [1, 2, 3]})
    expected = [("a.example", "example", 1.0, 3), ("b.example", "example", 2.0, 1)]
    for name in ("core.parquet", "core.csv"):
        pq.write_table(table, tmp_path / name)
        found = core(str(tmp_path / name))
        assert rows(found) == expected
        assert found.rejections == (Rejection(source="core.host", row_value=None, reason="null", rows=1),)
    folder = tmp_path / "core"
    folder.mkdir()
    pq.write_table(table, folder / "0.parquet")
    pq.write_table(pa.table({"host": ["c.example"], "slice": ["s"]}), folder / "1.parquet")
    assert rows(core(str(folder))) == [*expected, ("c.example", "s", 1.0, 4)]


def test_columns_without_any_value(tmp_path: Path) -> None:
    nulls = pa.table({"host": ["a.example"], "slice": pa.nulls(1), "weight": pa.nulls(1)})
    pq.write_table(nulls, tmp_path / "core.parquet")
    assert rows(core(str(tmp_path / "core.parquet"))) == [("a.example", "example", 1.0, 1)]


def test_rejected_values_are_shown_safely(tmp_path: Path) -> None:
    path = write(tmp_path, f'host\na.example\n"x\x1b\n"\n{"y" * 10_000}\n')
    assert [(r.row_value, r.reason) for r in core(path).rejections] == [
        ("x\\x1b\\x0a", "not_bare"),
        ("y" * 200, "too_long"),
    ]


def test_domain_graph_counts_domains_and_their_www(tmp_path: Path) -> None:
    path = write(
        tmp_path,
        "host,weight\nwww.a.example,1\na.example,2\nblog.b.example,1\nwww.c.ac.example,1\n"
        "ac.example,1\n192.0.2.7,1\nwww.www.a.example,1\n",
    )
    found = core(path, "domain")
    assert rows(found) == [
        ("192.0.2.7", "(no suffix)", 1.0, 7),
        ("a.example", "example", 2.0, 3),
        ("ac.example", "ac.example", 1.0, 6),
        ("c.ac.example", "ac.example", 1.0, 5),
    ]
    assert [(r.row_value, r.reason, r.rows) for r in found.rejections] == [
        ("blog.b.example", "not_a_domain", 1),
        ("www.www.a.example", "not_a_domain", 1),
    ]


def test_duplicates_keep_the_largest_weight_wherever_it_stands(tmp_path: Path) -> None:
    for weights in ("1,3,2", "3,2,1", "1,2,3"):
        lines = [f"A.example,{weight}" for weight in weights.split(",")]
        found = core(write(tmp_path, "\n".join(["host,weight", *lines])))
        assert (found.hosts["weight"].to_pylist(), found.duplicates) == ([3.0], 2)


def test_one_host_in_two_slices(tmp_path: Path) -> None:
    path = write(tmp_path, "host,slice\na.example,press\nb.example,press\nA.example.,shops\n")
    assert refusal(path) == (
        'expected one slice a host, found a.example in "press" (row 2) and "shops" (row 4); keep one'
    )
    path = write(tmp_path, "host,slice\na.example,press\na.example,\n")
    assert refusal(path) == (
        'expected one slice a host, found a.example in "press" (row 2) and "example" (row 3); keep one'
    )


@pytest.mark.parametrize(
    "weight", ["0", "-1", "nan", "inf", "1e999", "1e-999", "1_0", " 1", "1,5", "0x1", "١", "e", "."]
)
def test_weights_are_above_zero(tmp_path: Path, weight: str) -> None:
    path = write(tmp_path, f'host,weight\na.example,1\nb.example,"{weight}"\n')
    assert refusal(path) == (
        f'expected a weight above 0, found "{weight}" in row 3; correct it or leave it empty for 1'
    )


@pytest.mark.parametrize("weight", [0.0, -1.0, float("nan"), float("inf")])
def test_weights_in_parquet_too(tmp_path: Path, weight: float) -> None:
    pq.write_table(pa.table({"host": ["a.example"], "weight": [weight]}), tmp_path / "c.parquet")
    assert refusal(str(tmp_path / "c.parquet")) == (
        f'expected a weight above 0, found "{weight}" in row 1; correct it or leave it empty for 1'
    )


def test_weights_have_a_finite_total(tmp_path: Path) -> None:
    path = write(tmp_path, "host,weight\na.example,1e308\nb.example,1e308\n")
    assert refusal(path) == (
        "expected weights with a finite total, found a larger one; "
        "only their proportions count, divide them all"
    )


@pytest.mark.parametrize("name", ["(other slices)", "a\tb", "x" * 201])
def test_slice_names(tmp_path: Path, name: str) -> None:
    path = write(tmp_path, f"host,slice\na.example,{name}\n")
    assert refusal(path) == (
        "expected a slice name of at most 200 characters without control characters, "
        f'other than "(other slices)", found "{shown_value(name)}" in row 2; rename the slice'
    )


def test_known_spam_may_be_empty_but_not_in_the_core(tmp_path: Path) -> None:
    spam = write(tmp_path, "host\n", "spam.csv")
    assert read_known_spam(spam, node="host", rules=RULES).hosts.num_rows == 0
    spam = write(tmp_path, "host\nx.example\nA.example\n%\nb.example\n", "spam.csv")
    good = write(tmp_path, "host\na.example\nb.example\n")
    listed = read_known_spam(spam, node="host", rules=RULES)
    assert [r.source for r in listed.rejections] == ["known_spam.host"]
    with pytest.raises(InputRefused) as caught:
        check_disjoint(core(good), listed)
    assert str(caught.value) == (
        "input.core and input.known_spam: expected no host in both, found a.example (row 2 and row 3) "
        "and 1 more; remove it from one of them"
    )


def test_both_lists_of_a_configuration(tmp_path: Path) -> None:
    good, spam = write(tmp_path, "host\na.example\n"), write(tmp_path, "host\nb.example\n", "spam.csv")
    base = ["run.id=r", "run.output=/o", "run.work=/w", "input.edges=/e", f"input.core={good}"]
    lists = read_lists(load_config(None, base), RULES)
    assert lists.known_spam is None
    lists = read_lists(load_config(None, [*base, f"input.known_spam={spam}"]), RULES)
    assert lists.known_spam is not None
    assert lists.known_spam.hosts["host"].to_pylist() == ["b.example"]
    with pytest.raises(InputRefused, match=r"expected no host in both, found a\.example"):
        read_lists(load_config(None, [*base, f"input.known_spam={good}"]), RULES)


@given(st.from_regex(_PLAIN_HOST, fullmatch=True))
def test_short_cut_agrees_with_the_long_way(host: str) -> None:
    found = canonical_host(host)
    assert found.host == (host if len(host) <= 253 else None)


HOSTILE = st.text(st.sampled_from('a.-,"\r\n\x00/@:%xn=é\u202e') | st.characters(codec="utf-8"), max_size=30)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
@given(st.lists(HOSTILE, max_size=8), st.sampled_from(["\r\n", "\n"]))
def test_every_row_is_kept_rejected_or_a_duplicate(tmp_path: Path, values: list[str], end: str) -> None:
    buffer = io.StringIO(newline="")
    writer = csv.writer(buffer, lineterminator=end, quoting=csv.QUOTE_ALL)
    writer.writerows([["host", "note"], ["core.example", ""], *([value, value] for value in values)])
    found = core(write(tmp_path, buffer.getvalue()))
    expected = {name.host for name in map(canonical_host, values) if name.host} | {"core.example"}
    assert set(found.hosts["host"].to_pylist()) == expected
    assert found.rows == len(values) + 1
    assert found.hosts.num_rows + found.duplicates + sum(r.rows for r in found.rejections) == found.rows
    rejected = {shown_value(value) for value in values if canonical_host(value).reason}
    assert {r.row_value for r in found.rejections} == rejected
