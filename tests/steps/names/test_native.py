"""Native names against `canonical_host`, on the WHATWG vectors, made strings and hostile ones."""

import json
import string
from pathlib import Path
from typing import TYPE_CHECKING

import pyarrow as pa
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pyspark.sql import functions as sf

from sparkrank.names.canonical import canonical_host
from sparkrank.names.native import odd_name_map, plain_host

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

VECTORS = Path(__file__).parents[2] / "data" / "whatwg"
HUGE = 10_000_000
LABEL = "a" * 63
LONGEST = ".".join([LABEL, LABEL, LABEL, "a" * 61])

PLAIN = {
    "Shop.Example": "shop.example",
    "shop.example.": "shop.example",
    "localhost": "localhost",
    "a_b.r3---x.4you.example:8080/p/@q%20": "a_b.r3---x.4you.example",
    "HTTPS://Shop.Example?q": "shop.example",
    "ftp://shop.example#f": "shop.example",
    "wss://shop.example./": "shop.example",
    "ws://shop.example:": "shop.example",
    "//shop.example\\x": "shop.example",
    "http://shop.example/\ud7ff\n//": "shop.example",
    "http://shop.example/" + "x" * HUGE: "shop.example",
    LONGEST: LONGEST,
    f"http://{LABEL}.example:59999/": f"{LABEL}.example",
}
ODD = [
    None, "", ".", "a..b", "192.0.2.1", "shop.7", "shop.0x1f", "xn--bcher-kva.example", "a.XN--x.example",
    "bücher.example", "\u212aelvin.example", "shop.example\n", "shop.example ", " http://shop.example/",
    "http://u@shop.example/", "http://shop.example:65536/", "shop.example:", "shop.example/a//b", "a b",
    "http://sh%6fp.example/", "file://shop.example/", "gemini://shop.example/", "http:/shop.example",
    "http://shop.example\n/", "http://shop.example:80\t/", "shop.example?q", LONGEST + "a",
    LABEL + "a.example",
    f"http://{LONGEST}a/", "a" * HUGE, "a." * (HUGE // 2), "a/" + "/" * HUGE, "http://" + "a." * (HUGE // 2),
]  # fmt: skip


def native_answers(spark: "SparkSession", values: list[str | None]) -> dict[str | None, str | None]:
    frame = spark.createDataFrame(pa.table({"value": pa.array(values, pa.string())}))
    return {
        row.value: row.host
        for row in frame.select("value", plain_host(sf.col("value")).alias("host")).collect()
    }


def test_plain_values_are_decided_and_odd_ones_are_left(spark: "SparkSession") -> None:
    answers = native_answers(spark, [*PLAIN, *ODD])
    assert {value: answers[value] for value in PLAIN} == PLAIN
    assert [str(value)[:80] for value in ODD if answers[value] is not None] == []
    for value, host in PLAIN.items():
        assert canonical_host(value).host == host


def _hostish() -> st.SearchStrategy[str]:
    letters = st.text(st.sampled_from(string.ascii_letters + string.digits + "-_"), max_size=6)
    odd = st.text(st.sampled_from("ab1.-_:/@%[]\\?# \t\n\x7f\u00ad‍ß．１\u212a"), max_size=4)
    label = st.one_of(letters, letters, st.sampled_from(["xn--", "0x1", "1", LABEL, "test", "example"]), odd)
    name = st.lists(label, max_size=5).map(".".join)
    before = st.sampled_from(["", "", "http://", "HTTPS://", "//", "wss://", "ftp:/", "file://", "x://", " "])
    after = st.sampled_from(
        ["", "", ".", "/", ":80", ":65536", ":60000/", ":/", "?q", "#", "/a//b", "\\", "\n"]
    )
    return st.tuples(before, name, after, odd).map("".join)


@settings(max_examples=4, deadline=None, suppress_health_check=list(HealthCheck))
@given(st.lists(_hostish(), min_size=300, max_size=600))
def test_native_never_disagrees_on_made_strings(spark: "SparkSession", values: list[str]) -> None:
    for value, host in native_answers(spark, values).items():
        assert host is None or host == canonical_host(value).host, value


def test_vectors_and_their_cuts_agree(spark: "SparkSession") -> None:
    vectors = json.loads((VECTORS / "urls.json").read_text())
    vectors += json.loads((VECTORS / "toascii.json").read_text())
    inputs = [vector["input"].encode("utf-8", "replace").decode() for vector in vectors]
    # Every tail of a vector, and padding around the cut of the native matcher, make new edge cases.
    values = {text[cut:] for text in inputs for cut in range(0, min(len(text), 30), 3)}
    values |= {f"{'p' * pad}.{text}" for text in inputs[:40] for pad in (50, 63, 64, 245, 253, 254)}
    values |= {
        f"http://{'p.' * pad}{end}" for pad in range(115, 128) for end in ("a", "aa", "a/", "aa:8/", "1/")
    }
    decided = 0
    for value, host in native_answers(spark, sorted(values)).items():
        decided += host is not None
        assert host is None or host == canonical_host(value).host, value
    assert decided > 300


def test_odd_name_map_names_every_distinct_value_once(spark: "SparkSession") -> None:
    values = [*ODD[:-4], *ODD[:-4], "http://bücher.example/x", "http://" + "u" * HUGE + "@shop.example/"]
    frame = spark.createDataFrame(pa.table({"value": pa.array(values, pa.string())}))
    mapped = odd_name_map(frame)
    assert mapped.columns == ["value", "host", "reason"]
    rows = mapped.collect()
    assert len(rows) == len(set(values))
    for row in rows:
        name = canonical_host(row.value)
        assert (row.host, row.reason) == (name.host, name.reason)


@pytest.mark.parametrize(
    ("octets", "host", "reason"),
    [(b"http://shop.example/\xff", "shop.example", None), (b"sh\xffop.example", None, "bad_idna")],
)
def test_bytes_that_are_not_utf8(
    spark: "SparkSession", octets: bytes, host: str | None, reason: str | None
) -> None:
    frame = spark.createDataFrame(pa.table({"octets": pa.array([octets], pa.binary())}))
    frame = frame.select(sf.col("octets").cast("string").alias("value"))
    row = odd_name_map(frame).select("host", "reason").collect()[0]
    assert (row.host, row.reason) == (host, reason)
    assert frame.select(plain_host(sf.col("value"))).collect()[0][0] in (host, None)
