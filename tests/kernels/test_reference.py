"""The tests' own dense solve, held against published vectors and general graph libraries."""

import igraph
import networkx as nx
import numpy as np
import pytest
from numpy.testing import assert_allclose

from tests.reference import (
    DAMPING,
    LANGVILLE_MEYER,
    dense_solve,
    encyclopaedia,
    langville_meyer,
    mass_example,
    transition,
)


def random_edges(seed: int, n: int, m: int) -> list[tuple[int, int]]:
    """Distinct edges without self-links; about a quarter of the hosts have no out-links."""
    rng = np.random.default_rng(seed)
    sources, targets = rng.integers(0, n - n // 4, m), rng.integers(0, n, m)
    return sorted({(u, v) for u, v in zip(sources.tolist(), targets.tolist(), strict=True) if u != v})


def test_vector_of_langville_and_meyer() -> None:
    graph = langville_meyer()
    p = dense_solve(graph.edges, graph.n, np.ones(graph.n), 0.9)
    assert_allclose(p / p.sum(), LANGVILLE_MEYER, rtol=0, atol=1e-8)


def test_vector_of_the_encyclopaedia() -> None:
    # From memory, two digits of a percentage; recomputed here.
    published = {"A": 3.28, "B": 38.44, "C": 34.29, "D": 3.91, "E": 8.09, "F": 3.91}
    published |= dict.fromkeys("GHIJK", 1.62)
    graph = encyclopaedia()
    p = dense_solve(graph.edges, graph.n, np.ones(graph.n))
    percent = dict(zip(graph.hosts, (100 * p / p.sum()).round(2).tolist(), strict=True))
    assert percent == published


@pytest.mark.parametrize("seed", range(4))
def test_normalised_it_is_the_pagerank_of_graph_libraries(seed: int) -> None:
    """Dividing by the sum puts the leaked mass back in proportion to the teleport: the usual PageRank."""
    n = 60
    edges = random_edges(seed, n, 150)
    graph = nx.DiGraph(edges)
    graph.add_nodes_from(range(n))
    uniform = dense_solve(edges, n, np.ones(n))
    theirs = nx.pagerank(graph, DAMPING, tol=1e-15, max_iter=1000)
    assert_allclose(uniform / uniform.sum(), [theirs[v] for v in range(n)], rtol=1e-10, atol=0)

    seeds = range(seed, seed + 3)
    reset = np.zeros(n)
    reset[seeds] = [1, 2, 3]
    personal = dense_solve(edges, n, reset)
    other = igraph.Graph(n, edges, directed=True).personalized_pagerank(damping=DAMPING, reset=reset.tolist())
    reached = sorted(set(seeds).union(*(nx.descendants(graph, s) for s in seeds)))
    assert 10 < len(reached) < n
    assert_allclose((personal / personal.sum())[reached], np.array(other)[reached], rtol=1e-8, atol=0)
    assert np.delete(personal, reached).max() < 1e-15


def test_weights_share_the_flow_as_networkx_shares_it() -> None:
    rng = np.random.default_rng(5)
    weighted = [(u, v, float(rng.integers(1, 20))) for u, v in random_edges(5, 40, 160)]
    graph = nx.DiGraph()
    graph.add_nodes_from(range(40))
    graph.add_weighted_edges_from(weighted)
    p = dense_solve(weighted, 40, np.ones(40))
    theirs = nx.pagerank(graph, DAMPING, tol=1e-15, max_iter=1000)
    assert_allclose(p / p.sum(), [theirs[v] for v in range(40)], rtol=1e-10, atol=0)


def test_a_host_without_in_links_scores_one_and_equal_pairs_add_up() -> None:
    graph = mass_example()
    p = dense_solve(graph.edges, graph.n, np.ones(graph.n))
    assert [p[graph.at[host]] for host in ("g1", "s1", "s6")] == [1.0, 1.0, 1.0]
    assert transition([(0, 1), (0, 1), (0, 2)], 3)[0].tolist() == [0, 2 / 3, 1 / 3]
