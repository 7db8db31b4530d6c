"""Links from the nearest core member, held against networkx."""

import itertools

import networkx as nx
import pytest

from sparkrank.graph.plan import GridPlan
from tests.steps.graphs import GRID, make_crawl

ONE = GridPlan(stripes=1, build_groups=1, solve_groups=1)


def test_distances_of_the_web_of_many_shapes(web, scored) -> None:
    graph = web.graph(weighted=False)
    members = {web.at[host] for host, _, _ in web.members}
    lengths = nx.multi_source_dijkstra_path_length(graph, members, weight=None)
    expected = [lengths.get(i) for i in range(len(web.hosts))]
    assert scored.table["core_distance"].to_pylist() == expected
    assert {None, 0, 1, 5} < set(expected)


def test_a_distance_is_null_where_the_core_does_not_reach(scored) -> None:
    reached = scored.table["core_reached"].to_pylist()
    assert [d is not None for d in scored.table["core_distance"].to_pylist()] == reached


@pytest.mark.parametrize("plan", [ONE, GRID])
def test_chains_longer_than_one_sum_tells_apart(spark, tmp_path, plan) -> None:
    """A ring of 70, tails of 5 behind each host of it, and a longer and a shorter way into it."""
    ring = [f"r{i:02d}" for i in range(70)]
    edges = [*itertools.pairwise([*ring, ring[0]])]
    for host in ring:
        tail = [host, *(f"{host}-{i}" for i in range(5))]
        edges += itertools.pairwise(tail)
    # Members feed the ring through peeled hosts: three links to one place, one to another behind it.
    edges += itertools.pairwise(["member", "a", "b", ring[10]])
    edges += [("other", ring[14]), ("stray", "b")]
    rows = [tuple(f"{host}.example" for host in edge) for edge in edges]
    core = [("member.example", "x"), ("other.example", "y")]
    # Many links on one edge are still one step.
    rows = [(*row, 1 + 1000 * (i % 3)) for i, row in enumerate(rows)]
    crawl = make_crawl(spark, tmp_path, rows, core)
    scored = crawl.run(plan=plan, solve__tolerance=0.02, graph__weighting="links")
    graph = nx.DiGraph((u, v) for u, v, _ in rows)
    lengths = nx.multi_source_dijkstra_path_length(graph, {host for host, _ in core}, weight=None)
    found = dict(zip(scored.hosts, scored.table["core_distance"].to_pylist(), strict=True))
    assert found == {host: lengths.get(host) for host in graph}
    assert max(lengths.values()) > 62
    assert found["stray.example"] is None
