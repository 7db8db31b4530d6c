"""Contributions to a score, by link and by origin, against dense and sparse direct solves."""

import networkx as nx
import numpy as np
import pytest

from sparkrank.graph.plan import GridPlan
from tests.steps.evidence.supports import EXACT, assert_same_rows, gather, rows_of
from tests.steps.graphs import GRID
from tests.steps.webs import DAMPING

TARGETS = ["hub.example", "target.example", "m7.example", "ring0.example", "sink2.example", "leaf3.example"]
WIDE = GridPlan(stripes=6, build_groups=3, solve_groups=1)


def transition(web, weighted: bool) -> np.ndarray:
    """T[u, v], dense."""
    n = len(web.hosts)
    weight = np.zeros((n, n))
    for (u, v), value in web.edges(weighted=weighted).items():
        weight[u, v] = value
    total = weight.sum(axis=1, keepdims=True)
    return np.divide(weight, total, out=np.zeros_like(weight), where=total > 0)


@pytest.fixture(scope="module")
def exact(web, web_crawl, links_scored, tmp_path_factory):
    """Everything followed to the end, edges weighing what they have of links."""
    folder = tmp_path_factory.mktemp("exact")
    found = gather(web_crawl, links_scored, folder, TARGETS, **EXACT)
    return rows_of(found.support), {row["host"]: row for row in rows_of(found.measures)}


def key_of(row):
    return row["host"], row["kind"], row["source"]


def by_pair(rows, kind):
    return {(row["host"], row["source"]): row for row in rows if row["kind"] == kind}


def test_origins_are_those_of_a_dense_solve(web, exact) -> None:
    rows, _ = exact
    n = len(web.hosts)
    given = np.linalg.inv(np.eye(n) - DAMPING * transition(web, True))
    found = by_pair(rows, "origin")
    p = given.sum(axis=0)
    for target in TARGETS:
        x = web.at[target]
        expected = given[:, x]
        sources = {source: row for (host, source), row in found.items() if host == target}
        listed = sum(row["share"] for row in sources.values())
        assert listed >= 0.95 - 1e-9
        assert sources[target]["distance"] == 0
        for source, row in sources.items():
            assert row["contribution"] == pytest.approx(expected[web.at[source]], rel=1e-6, abs=1e-12)
            assert row["share"] == pytest.approx(row["contribution"] / p[x], rel=1e-9)
            assert row["unexplained_share"] == pytest.approx(1 - listed, abs=1e-9)
        # The largest are there, in their order.
        assert min(row["contribution"] for row in sources.values()) >= np.sort(expected)[-len(sources)] * (
            1 - 1e-6
        )


def test_direct_links_are_those_of_the_graph(web, exact) -> None:
    rows, _ = exact
    t = transition(web, True)
    p = web.solve(np.ones(len(web.hosts)), weighted=True)
    found = by_pair(rows, "direct")
    graph = web.graph(weighted=True)
    for target in TARGETS:
        x = web.at[target]
        sources = {web.at[source]: row for (host, source), row in found.items() if host == target}
        assert set(sources) <= set(graph.predecessors(x))
        for u, row in sources.items():
            assert row["contribution"] == pytest.approx(DAMPING * p[u] * t[u, x], rel=1e-9)
            assert row["link_returned"] == graph.has_edge(x, u)
            assert row["distance"] == 1
            assert row["source_scaled_pagerank"] == pytest.approx(p[u], rel=1e-9)
            assert row["source_in_degree"] == graph.in_degree(u)
        # Own start, listed links and the rest make up the whole.
        whole = sum(row["contribution"] for row in sources.values()) / p[x] + 1 / p[x]
        if sources:
            rest = next(iter(sources.values()))["unexplained_share"]
            assert whole + rest == pytest.approx(1, rel=1e-9)
    assert {row["link_returned"] for row in found.values()} == {True, False}


def test_distances_are_shortest_paths(web, exact) -> None:
    rows, _ = exact
    graph = web.graph(weighted=False).reverse()
    for target in TARGETS:
        lengths = nx.single_source_shortest_path_length(graph, web.at[target])
        for (host, source), row in by_pair(rows, "origin").items():
            if host == target:
                assert row["distance"] == lengths[web.at[source]]


def test_nothing_is_left_where_every_path_is_followed(exact) -> None:
    _, measures = exact
    assert set(measures) == set(TARGETS)
    assert all(row["origin_error_share"] < 1e-9 for row in measures.values())


@pytest.mark.parametrize("followed", [3, 30, 300])
def test_the_error_stated_bounds_every_origin(web, web_crawl, even_scored, tmp_path, followed) -> None:
    """Below the true contribution, and short of it by no more than what lies behind hosts not followed."""
    given = {**EXACT, "followed_links": followed, "max_steps": 6}
    found = gather(web_crawl, even_scored, tmp_path, **given)
    n = len(web.hosts)
    true = np.linalg.inv(np.eye(n) - DAMPING * transition(web, False))
    p = true.sum(axis=0)
    measures = {row["host"]: row for row in rows_of(found.measures)}
    assert set(measures) == {host for host in web.hosts if not even_scored[host]["is_core"]}
    total = dict.fromkeys(measures, 0.0)
    for (host, source), row in by_pair(rows_of(found.support), "origin").items():
        x, short = web.at[host], true[web.at[source], web.at[host]] - row["contribution"]
        assert -1e-9 * p[x] <= short <= (measures[host]["origin_error_share"] + 1e-9) * p[x]
        total[host] += row["contribution"]
    for host, row in measures.items():
        x = web.at[host]
        assert total[host] / p[x] + row["origin_unexplained_share"] == pytest.approx(1, rel=1e-9)
        assert row["origin_unexplained_share"] >= row["origin_error_share"] - 1e-9
    assert max(row["origin_error_share"] for row in measures.values()) > 0.01


@pytest.mark.parametrize("chunk", [1 << 21, 40])
@pytest.mark.parametrize("plan", [GRID, WIDE])
def test_the_same_rows_for_any_number_of_stripes_and_chunks(
    web_crawl, even_scored, tmp_path, monkeypatch, plan, chunk
) -> None:
    settings = {"followed_links": 200, "listed_sources": 20}
    one = gather(web_crawl, even_scored, tmp_path / "one", **settings)
    scored = web_crawl.run(plan=plan)
    for module in ("paths", "sources"):
        monkeypatch.setattr(f"sparkrank.evidence.{module}.CHUNK_LINKS", chunk)
    monkeypatch.setattr("sparkrank.evidence.support._GROUP_TARGETS", 8)
    other = gather(web_crawl, scored, tmp_path / "other", files=3, **settings)
    assert (one.groups, one.links) == (1, other.links)
    assert other.groups > 50
    assert_same_rows(rows_of(one.measures), rows_of(other.measures))
    # Published rows are sorted by their key; the work files are by group.
    assert_same_rows(*(sorted(rows_of(files.support), key=key_of) for files in (one, other)))


def test_no_target_is_no_file(web_crawl, even_scored, tmp_path) -> None:
    found = gather(web_crawl, even_scored, tmp_path, ["nowhere.example"])
    assert (found.targets, found.support, found.measures) == (0, [], [])
