"""Connected components by alternating stars, against networkx."""

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels.components import (
    Edges,
    are_stars,
    both_ends,
    distinct_edges,
    distinct_ends,
    labels,
    large_star,
    small_star,
    stars,
)


@st.composite
def graphs(draw):
    n = draw(st.integers(1, 40))
    host = st.integers(0, n - 1)
    return n, draw(st.lists(st.tuples(host, host), max_size=60))


def edges_of(pairs) -> Edges:
    one, other = np.array(pairs, dtype=np.int64).reshape(-1, 2).T
    return distinct_edges(one, other)


def least_of(n: int, pairs) -> list[int]:
    """The least host of each one's component, by networkx."""
    graph = nx.Graph(pairs)
    graph.add_nodes_from(range(n))
    least = {host: min(part) for part in nx.connected_components(graph) for host in part}
    return [least[host] for host in range(n)]


def stars_by_parts(edges: Edges, n_parts: int) -> Edges:
    """The same steps with hosts divided among parts, each of which sees the edges of its hosts alone."""

    def join(parts):
        return [np.concatenate(columns) for columns in zip(*parts, strict=True)]

    ends = both_ends(edges)
    while True:
        divided = [
            distinct_ends(*(values[ends.host % n_parts == part] for values in ends))
            for part in range(n_parts)
        ]
        if all(are_stars(one) for one in divided):
            upward = ends.neighbour < ends.host
            return Edges(ends.host[upward], ends.neighbour[upward])
        high, low = join([large_star(one) for one in divided])
        new = [
            small_star(distinct_edges(high[high % n_parts == part], low[high % n_parts == part]))
            for part in range(n_parts)
        ]
        ends = both_ends(Edges(*join(new)))


@given(graphs())
def test_labels_are_those_of_networkx(graph) -> None:
    n, pairs = graph
    assert labels(n, stars(edges_of(pairs))).tolist() == least_of(n, pairs)


@given(graphs(), st.integers(2, 7))
def test_any_number_of_parts_finds_the_same(graph, n_parts) -> None:
    n, pairs = graph
    assert labels(n, stars_by_parts(edges_of(pairs), n_parts)).tolist() == least_of(n, pairs)


@given(graphs())
def test_each_step_keeps_components(graph) -> None:
    n, pairs = graph
    edges = edges_of(pairs)
    for made in (large_star(both_ends(edges)), small_star(edges)):
        assert least_of(n, list(zip(*made, strict=True))) == least_of(n, pairs)
        assert (made.low < made.high).all()


@pytest.mark.parametrize("seed", range(3))
def test_long_paths_end_in_few_turns(seed) -> None:
    """A path in random order, the worst there is: log² n turns are promised, about log n seen."""
    n = 4096
    path = np.random.default_rng(seed).permutation(n)
    edges, turns = distinct_edges(path[1:], path[:-1]), 0
    while not are_stars(ends := both_ends(edges)):
        edges, turns = small_star(large_star(ends)), turns + 1
    assert labels(n, edges).tolist() == [0] * n
    assert 1 < turns <= 12


def test_loops_and_repeats_are_no_edges() -> None:
    assert edges_of([(3, 3), (1, 2), (2, 1), (1, 2)]) == (np.array([2]), np.array([1]))
    assert labels(3, stars(edges_of([]))).tolist() == [0, 1, 2]
