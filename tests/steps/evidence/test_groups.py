"""Groups through the engine: members and shapes as the kernels have them on exact support, sums as in
plain loops over the rows, and the same for any way to divide the work."""

import itertools
from collections import Counter
from collections.abc import Iterator

import numpy as np
import pytest

from sparkrank.evidence.groups import find_groups
from sparkrank.graph.plan import GridPlan
from sparkrank.tables import arrow_schema
from sparkrank.tables.groups import FARM_GROUPS
from tests.kernels.kernels.farm_groups import groups_of
from tests.steps.evidence.supports import EXACT, gather, rows_of
from tests.steps.graphs import GRID, make_crawl, tasks_in_process

TARGETS = [
    "alone.one.example", "first.two.example", "second.three.example", "top.four.example",
    "middle0.four.example", "round.five.example", "small.six.example", "pair.seven.example",
]  # fmt: skip


def links() -> Iterator[tuple[str, str]]:
    def fan(name: str, count: int, target: str) -> Iterator[tuple[str, str]]:
        return ((f"{name.replace('*', str(i))}.example", target) for i in range(count))

    alone, first, second, top, _, around, small, pair = TARGETS
    # A star on one domain, returned; and one of two hosts, which is no group.
    yield from fan("b*.one", 12, alone)
    yield from ((alone, f"b{i}.one.example") for i in range(12))
    yield ("only.six.example", small)
    # Two targets that help each other, each with boosters on domains of their own.
    yield from fan("a*", 15, first)
    yield from fan("c*", 9, second)
    yield from [(first, second), (second, first)]
    # Two tiers, one host of the middle a candidate itself.
    yield from ((f"middle{i}.four.example", top) for i in range(4))
    yield from itertools.chain(*(fan(f"d{i}-*", 6, f"middle{i}.four.example") for i in range(4)))
    # A ring, all of it closed.
    yield from fan("e*.five", 10, around)
    yield from ((f"e{i}.five.example", f"e{(i + 1) % 10}.five.example") for i in range(10))
    # Sources shared by two, too few to hold them together; and by all, a directory with a standing.
    yield from [("a0.example", pair), ("c0.example", pair), *fan("f*", 18, pair)]
    yield from (("directory.example", target) for target in TARGETS)
    yield from (("directory.example", f"shop{i}.example") for i in range(30))
    yield from fan("reader*", 20, "directory.example")
    # What the core reaches, apart.
    yield from [("good.example", "shop0.example"), ("shop0.example", "good.example")]


@pytest.fixture(scope="module")
def crawl(spark, tmp_path_factory):
    core = [("good.example", "a", 1.0), ("shop0.example", "b", 1.0)]
    return make_crawl(spark, tmp_path_factory.mktemp("groups"), list(links()), core)


@pytest.fixture(scope="module")
def scored(crawl):
    return crawl.run(plan=GRID)


def grouped(crawl, scored, folder, wanted=TARGETS, *, by_spark=False, most_links=1 << 21, **settings):
    """Rows of the table, and the groups of candidates."""
    support = gather(crawl, scored, folder, wanted, by_spark=by_spark, **{**EXACT, **settings})
    if by_spark:
        found = find_groups(crawl.spark, support.gathering, support.strong_links, most_links=most_links)
    else:
        with tasks_in_process():
            found = find_groups(crawl.spark, support.gathering, support.strong_links, most_links=most_links)
    rows = sorted(found.table().to_pylist(), key=lambda row: (row["group"], row["host"]))
    assert found.members == len(rows)
    return rows, {row["host"]: row["farm_group"] for row in rows_of(found.candidates)}


@pytest.fixture(scope="module")
def found(crawl, scored, tmp_path_factory):
    return grouped(crawl, scored, tmp_path_factory.mktemp("found"))


def test_members_and_shapes_are_those_of_exact_support(scored, found) -> None:
    rows, _ = found
    hosts = scored.hosts
    at = {host: i for i, host in enumerate(hosts)}
    domain = {name: i for i, name in enumerate(sorted(set(scored.table["domain"].to_pylist())))}
    expected = groups_of(
        len(hosts),
        [(at[source], at[target]) for source, target in links()],
        sorted(at[target] for target in TARGETS),
        [domain[name] for name in scored.table["domain"].to_pylist()],
    )
    by_group = {
        frozenset(row["host"] for row in members): next(iter({row["shape"] for row in members}))
        for members in members_of(rows).values()
    }
    assert by_group == {
        frozenset(hosts[i] for i in (*group.candidates, *group.boosters)): group.shape for group in expected
    }
    assert Counter(by_group.values()) == {
        "star": 1, "star_with_back_links": 1, "alliance": 1, "two_tier": 1, "ring": 1
    }  # fmt: skip


def members_of(rows):
    found = {}
    for row in rows:
        found.setdefault(row["group"], []).append(row)
    return found


def test_what_groups_add_up_to(scored, found) -> None:
    rows, of_candidate = found
    for name, members in members_of(rows).items():
        hosts = [row["host"] for row in members]
        candidates = [host for host in hosts if host in TARGETS]
        domains = Counter(scored[host]["domain"] for host in hosts)
        mass = {host: scored[host]["absolute_mass"] for host in hosts}
        assert name == min(candidates, key=lambda host: (-mass[host], host))
        carried = sum(scored[host]["scaled_pagerank"] - 1 for host in candidates)
        out = Counter(source for source, _ in links())
        given = sum(
            0.85 * scored[source]["scaled_pagerank"] / out[source]
            for source, target in links()
            if target in candidates and source in hosts and out[source] <= 10
        )
        for row in members:
            assert row["hosts"] == len(hosts)
            assert row["targets"] == len(candidates)
            assert row["boosters"] == len(hosts) - len(candidates)
            assert row["domains"] == len(domains)
            assert row["largest_domain_share"] == max(domains.values()) / len(hosts)
            assert row["total_mass"] == pytest.approx(sum(mass.values()), rel=1e-9)
            assert row["explained_share"] == pytest.approx(given / carried, rel=1e-6)
            assert (row["role"] == "booster") == (row["host"] not in candidates)
        assert {host: of_candidate[host] for host in candidates} == dict.fromkeys(candidates, name)
    # Two hosts are no group, and a directory is in none.
    assert set(of_candidate) == {row["host"] for row in rows if row["role"] != "booster"}
    assert "small.six.example" not in of_candidate
    assert "directory.example" not in {row["host"] for row in rows}


def test_roles(found) -> None:
    rows, _ = found
    roles = {row["host"]: row["role"] for row in rows}
    assert {host: roles[host] for host in TARGETS if host in roles} == {
        "alone.one.example": "target",
        "first.two.example": "both",
        "second.three.example": "both",
        "top.four.example": "target",
        "middle0.four.example": "both",
        "round.five.example": "target",
        "pair.seven.example": "target",
    }
    assert roles["middle1.four.example"] == "booster"
    # It gives the pair as much as the first; to the first it means more.
    assert roles["a0.example"] == "booster"


@pytest.mark.parametrize("most_links", [1 << 21, 7])
@pytest.mark.parametrize("plan", [GRID, GridPlan(stripes=7, build_groups=3, solve_groups=1)])
def test_the_same_rows_for_any_way_to_divide_the_work(
    crawl, found, tmp_path, monkeypatch, plan, most_links
) -> None:
    monkeypatch.setattr("sparkrank.evidence.support._GROUP_TARGETS", 2)
    monkeypatch.setattr("sparkrank.evidence.support._GROUP_LINKS", 4)
    rows, of_candidate = grouped(crawl, crawl.run(plan=plan), tmp_path, most_links=most_links)
    expected, expected_of = found
    assert of_candidate == expected_of
    for row, other in zip(rows, expected, strict=True):
        for name, value in row.items():
            if isinstance(value, float):
                assert value == pytest.approx(other[name], rel=1e-9, abs=0), name
            else:
                assert value == other[name]


def test_tasks_run_anywhere(crawl, scored, tmp_path, found) -> None:
    assert grouped(crawl, scored, tmp_path, by_spark=True, most_links=30) == found


def test_no_strong_link_is_an_empty_table(crawl, scored, tmp_path) -> None:
    rows, of_candidate = grouped(crawl, scored, tmp_path, ["shop3.example"])
    assert (rows, of_candidate) == ([], {})


def test_types_are_those_declared(crawl, scored, tmp_path) -> None:
    support = gather(crawl, scored, tmp_path, TARGETS)
    with tasks_in_process():
        found = find_groups(crawl.spark, support.gathering, support.strong_links)
    assert found.table().schema.equals(arrow_schema(FARM_GROUPS))
    assert np.isfinite(found.table()["total_mass"].to_numpy()).all()
    declared = [(field.name, field.dataType) for field in found.frame(crawl.spark).schema]
    assert [name for name, _ in declared] == list(FARM_GROUPS.column_names)
    assert found.frame(crawl.spark).count() == found.members
