"""The native suffix split against `SuffixRules`, which the kernel tests hold against the package."""

from pathlib import Path
from typing import TYPE_CHECKING

import publicsuffixlist
import pyarrow as pa
import pytest

from sparkrank.names.canonical import canonical_host
from sparkrank.names.suffixes import SuffixRules, with_suffix_and_domain

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

EXTRA = ("pages.example", "*.farm.example", "!www.farm.example", "a.b.c.d.deep.example", "*.wild")
ODD_HOSTS = [
    "192.0.2.1",
    "[2001:db8::1]",
    "a..example",
    "a.example.",
    "09.",
    ".test",
    "localhost",
    "1.2.example",
]


def hosts_around_rules(step: int) -> list[str]:
    lines = Path(publicsuffixlist.PSLFILE).read_text(encoding="utf-8").splitlines()
    rules = [line.split()[0] for line in lines if line and not line.startswith("//")]
    special = [rule for rule in rules if rule[0] in "*!"]
    hosts = set()
    for rule in [*rules[::step], *special, *EXTRA]:
        name = canonical_host(rule.lstrip("!").removeprefix("*.")).host
        hosts |= {f"{head}{name}" for head in ("", "w.", "v.w.", "u.v.w.")}
    return sorted(hosts)


@pytest.mark.parametrize("rules", [SuffixRules.load("icann+private", EXTRA), SuffixRules.of_rules(["test"])])
def test_native_split_equals_the_rules(spark: "SparkSession", rules: SuffixRules) -> None:
    hosts: list[str | None] = [None, *ODD_HOSTS, *hosts_around_rules(step=5)]
    table = pa.table(
        {"host": pa.array(hosts, pa.string()), "in_degree": pa.array(range(len(hosts)), pa.int64())}
    )
    split = with_suffix_and_domain(spark.createDataFrame(table), "host", rules)
    assert split.columns == ["host", "in_degree", "suffix", "domain"]
    found = {row.in_degree: (row.host, row.suffix, row.domain) for row in split.collect()}
    assert len(found) == len(hosts) > 8_000
    for position, host in enumerate(hosts):
        expected = (None, None) if host is None else rules.split(host)
        assert found[position] == (host, *expected)


def test_rules_are_broadcast_and_hosts_never_shuffled(spark: "SparkSession") -> None:
    frame = spark.createDataFrame(pa.table({"host": ["shop.example"]}))
    split = with_suffix_and_domain(frame, "host", SuffixRules.load())
    plan = split._jdf.queryExecution().executedPlan().toString()
    assert "BroadcastHashJoin" in plan
    assert "hashpartitioning" not in plan
    assert "Python" not in plan
