"""Published examples and closed forms, many small disjoint graphs in one edge table.

Scaled PageRank of a host depends on nothing outside its own component, not even on N.  Each graph's
hosts carry its name: host `x` of the graph `mass` is x.mass.example.
"""

import math

import numpy as np
import pytest

from tests.reference import Named, dense_solve, encyclopaedia, langville_meyer, mass_example, trust_example
from tests.steps.graphs import Crawl, Scored, make_crawl


def named(name: str, graph: Named) -> list[tuple[str, str]]:
    """The edges of a graph of `tests/reference.py` under its own name."""
    hosts = [f"{host.lower()}.{name}.example" for host in graph.hosts]
    return [(hosts[u], hosts[v]) for u, v in graph.edges]


def linked(name: str, pairs: str) -> list[tuple[str, str]]:
    ends = (pair.split("-") for pair in pairs.split())
    return [(f"{u}.{name}.example", f"{v}.{name}.example") for u, v in ends]


def boosters(name: str, target: str, count: int, *, back: bool, first: int = 0) -> list[tuple[str, str]]:
    """A farm's links, in the words of the trade: boosters to the target, and back."""
    numbers = range(first, first + count)
    pairs = " ".join(f"k{i}-{target}" + (f" {target}-k{i}" if back else "") for i in numbers)
    return linked(name, pairs)


def all_edges() -> list[tuple[str, str]]:
    rows = named("mass", mass_example()) + named("article", encyclopaedia())
    rows += named("trust", trust_example()) + named("langville", langville_meyer())
    for k in (10, 100):
        rows += boosters(f"back{k}", "t", k, back=True) + boosters(f"oneway{k}", "t", k, back=False)
    # Two targets that link only to each other, with 100 and 300 boosters; the same two apart.
    rows += boosters("pair", "t", 100, back=False) + boosters("pair", "u", 300, back=False, first=100)
    rows += linked("pair", "t-u u-t")
    rows += boosters("apart", "t", 100, back=True) + boosters("apart", "u", 300, back=True, first=100)
    # All 400 boosters to both targets, both back to all.
    rows += boosters("both", "t", 400, back=True) + boosters("both", "u", 400, back=True)
    # Links from outside: 412 one-way boosters do the work of 113 optimal ones.
    rows += boosters("oneway412", "t", 412, back=False) + boosters("back113", "t", 113, back=True)
    return rows


CORE = [
    *[(f"{host}.mass.example", "mass") for host in ("g0", "g1", "g3")],
    *[(f"{host}.trust.example", "trust") for host in ("2", "4")],
]


@pytest.fixture(scope="module")
def crawl(spark, tmp_path_factory: pytest.TempPathFactory) -> Crawl:
    rows = all_edges()
    n_hosts = len({host for row in rows for host in row})
    return make_crawl(
        spark,
        tmp_path_factory.mktemp("published"),
        rows,
        CORE,
        # J = 1: a member's own share of trust is what a host without in-links scores.
        mass__good_share=len(CORE) / n_hosts,
        solve__tolerance=1e-11,
    )


@pytest.fixture(scope="module")
def scored(crawl) -> Scored:
    return crawl.run()


def scaled(scored: Scored, name: str) -> dict[str, float]:
    """Scaled PageRank of one of the graphs' hosts by their first label."""
    pairs = zip(scored.hosts, scored.column("scaled_pagerank"), strict=True)
    return {host.split(".")[0]: p for host, p in pairs if host.endswith(f".{name}.example")}


# p, t and relative mass, scaled, of the 12-host example (from memory, recomputed by a dense solve).
MASS_VALUES = {
    "x": (9.33, 2.295, 0.7540),
    "g0": (2.7, 1.85, 0.3148),
    "g1": (1, 1, 0),
    "g3": (1, 1, 0),
    "g2": (2.7, 0.85, 0.6852),
    "s0": (4.4, 0, 1),
    **{f"s{i}": (1, 0, 1) for i in range(1, 7)},
}


@pytest.mark.parametrize("host", MASS_VALUES)
def test_mass_estimation_example(scored, host) -> None:
    p, t, relative = MASS_VALUES[host]
    row = scored[f"{host}.mass.example"]
    assert row["scaled_pagerank"] == pytest.approx(p, rel=1e-9, abs=0)
    assert row["trust"] == pytest.approx(t, rel=1e-9, abs=0)
    assert row["absolute_mass"] == pytest.approx(p - t, rel=1e-9, abs=1e-12)
    assert row["relative_mass"] == pytest.approx(relative, rel=0, abs=5e-5)
    # Without the slice `trust` the slice `mass` stands for all: its trust grows by 5/3.
    assert row["relative_mass_low"] == pytest.approx(1 - 5 / 3 * t / p, rel=1e-9, abs=1e-12)
    # Without the slice `mass` nothing of the core is left here.
    assert row["relative_mass_high"] == pytest.approx(1, rel=1e-12)
    assert row["core_reached"] == (t > 0)


def test_mass_estimation_example_as_published(spark, tmp_path) -> None:
    """The 12 hosts alone with good_share .25: w = 1/12 on each of three core members; tasks by Spark."""
    members = [(f"{host}.mass.example", "good") for host in ("g0", "g1", "g3")]
    crawl = make_crawl(spark, tmp_path, named("mass", mass_example()), members, mass__good_share=0.25)
    alone = crawl.run(by_spark=True)
    assert alone.graph.n_hosts == 12
    for host, (p, t, _) in MASS_VALUES.items():
        row = alone[f"{host}.mass.example"]
        # The tolerance is the default: an error of at most 1e-6 of PageRank, which is at most 9.33.
        assert row["scaled_pagerank"] == pytest.approx(p, rel=1e-6, abs=0)
        assert row["trust"] == pytest.approx(t, rel=0, abs=1e-6 * p)
        assert (row["relative_mass_low"], row["relative_mass_high"]) == (None, None)


def test_encyclopaedia_example(scored) -> None:
    # Normalised, in percent (from memory, recomputed by a dense solve).
    percent = {"b": 38.44, "c": 34.29, "e": 8.09, "d": 3.91, "f": 3.91, "a": 3.28}
    percent |= dict.fromkeys("ghijk", 1.62)
    found = scaled(scored, "article")
    total = sum(found.values())
    assert {host: round(100 * p / total, 2) for host, p in found.items()} == percent


def test_langville_and_meyer_at_damping_090(crawl, scored) -> None:
    # The vector in the tests of the networkx package, alpha = .9.
    published = [0.03721197, 0.05395735, 0.04150565, 0.37508082, 0.20599833, 0.28624589]
    at_090 = crawl.run(scored.graph, solve__damping=0.9, solve__max_steps=500)
    found = scaled(at_090, "langville")
    total = sum(found.values())
    assert [found[host] / total for host in "123456"] == pytest.approx(published, rel=0, abs=5e-9)


def test_pagerank_is_scaled_pagerank_over_its_sum(scored) -> None:
    p = scored.column("scaled_pagerank")
    np.testing.assert_allclose(scored.column("pagerank"), p / math.fsum(p), rtol=1e-12, atol=0)


def test_trust_example(scored) -> None:
    """Converged trust of the 7 hosts, seeds 2 and 4, against a dense solve."""
    graph = trust_example()
    expected = dense_solve(graph.edges, graph.n, graph.vector({"2": 1, "4": 1}))
    found = [scored[f"{host}.trust.example"]["trust"] for host in graph.hosts]
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=0)
    # The published vector is that of 20 steps (from memory, recomputed), in units of 1 - c and half
    # a seed: as far from the limit as 20 steps at damping .85 leave it.
    published = [0, 0.180, 0.123, 0.151, 0.129, 0.055, 0.055]
    np.testing.assert_allclose(np.array(found) * 0.15 / 2, published, rtol=0, atol=0.85**20)


@pytest.mark.parametrize(
    ("name", "target", "value", "half_digit"),
    [
        # (1 + ck) / (1 - c²) with back-links, 1 + ck without; recomputed by a dense solve.
        ("back10", "t", 34.2342, 5e-5),
        ("back100", "t", 309.9099, 5e-5),
        ("oneway10", "t", 9.5, 5e-5),
        ("oneway100", "t", 86, 5e-5),
        # Alliances, published in units of 1/N: divided by 1 - c here; recomputed by a dense solve.
        ("pair", "t", 164.108 / 0.15, 5e-4 / 0.15),
        ("pair", "u", 177.892 / 0.15, 5e-4 / 0.15),
        ("apart", "t", 46.486 / 0.15, 5e-4 / 0.15),
        ("apart", "u", 138.378 / 0.15, 5e-4 / 0.15),
        ("both", "t", 92.432 / 0.15, 5e-4 / 0.15),
        ("both", "u", 92.432 / 0.15, 5e-4 / 0.15),
    ],
)
def test_farm_arithmetic(scored, name, target, value, half_digit) -> None:
    """Closed forms (common practice; Gyöngyi & Garcia-Molina, "Link Spam Alliances", VLDB 2005)."""
    assert scored[f"{target}.{name}.example"]["scaled_pagerank"] == pytest.approx(
        value, rel=0, abs=half_digit
    )


def test_one_way_boosters_do_the_work_of_fewer_optimal_ones(scored) -> None:
    one_way = scored["t.oneway412.example"]["scaled_pagerank"]
    optimal = scored["t.back113.example"]["scaled_pagerank"]
    # Half a booster's worth, c / (1 - c²) / 2, is as close as a whole number of boosters gets.
    assert abs(one_way - optimal) < 0.85 / (1 - 0.85**2) / 2


def test_a_farm_has_no_trust_and_reads_unknown(scored) -> None:
    row = scored["t.back10.example"]
    assert (row["trust"], row["relative_mass"], row["core_reached"]) == (0, 1, False)
    assert row["absolute_mass"] == row["scaled_pagerank"]
