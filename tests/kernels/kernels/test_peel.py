"""Peel rounds, against networkx subgraphs that lose their sinks or sources one round at a time."""

from itertools import pairwise

import networkx as nx
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels.peel import first_sinks, first_sources, marked, next_round, phase_of

Edges = list[tuple[int, int]]


def peel(edges: Edges, n: int, rounds: int) -> tuple[np.ndarray, int, int]:
    """Codes, source rounds and sink rounds by the kernels, at most ``rounds`` from each side."""
    source, destination = np.array(edges, dtype=np.int64).reshape(-1, 2).T
    codes = first_sinks(np.zeros(n, np.int8), np.bincount(source, minlength=n))
    for done in range(1, rounds):
        codes = next_round(codes, marked(source, codes[destination], n), -(done + 1))
    codes = first_sources(codes, np.bincount(destination, minlength=n))
    for done in range(1, rounds):
        codes = next_round(codes, marked(destination, codes[source], n), done + 1)
    return codes, max(0, int(codes.max(initial=0))), max(0, -int(codes.min(initial=0)))


def reference(edges: Edges, n: int, rounds: int) -> list[int]:
    """The same by taking nodes out of a graph."""
    graph = nx.DiGraph(edges)
    graph.add_nodes_from(range(n))
    codes = [0] * n
    for sign, degree in ((-1, "out_degree"), (1, "in_degree")):
        for number in range(1, rounds + 1):
            gone = [host for host, links in getattr(graph, degree)() if links == 0]
            graph.remove_nodes_from(gone)
            for host in gone:
                codes[host] = sign * number
    return codes


def check(edges: Edges, n: int, rounds: int) -> np.ndarray:
    codes, source_rounds, sink_rounds = peel(edges, n, rounds)
    assert codes.dtype == np.int8
    assert codes.tolist() == reference(edges, n, rounds)
    phase = phase_of(codes, source_rounds, sink_rounds)
    assert phase.dtype == np.int8
    core = source_rounds
    assert ((phase == core) == (codes == 0)).all()
    # Each host is computed once, from hosts that are done: only the core feeds itself.
    for u, v in edges:
        assert phase[u] < phase[v] or phase[u] == phase[v] == core
    return codes


@given(
    st.lists(st.tuples(st.integers(0, 14), st.integers(0, 14)).filter(lambda e: e[0] != e[1]), max_size=30),
    st.integers(1, 5),
)
def test_small_graphs(edges: Edges, rounds: int) -> None:
    check(sorted(set(edges)), 15, rounds)


@pytest.mark.parametrize("rounds", [1, 2, 3, 20])
@pytest.mark.parametrize("seed", range(3))
def test_a_core_with_chains_into_it_and_out_of_it(seed: int, rounds: int) -> None:
    """Chains of length 1 to 6 at random hosts of a strongly knit core, with shortcuts between them."""
    rng = np.random.default_rng(seed)
    edges = {(u, (u + 1) % 40) for u in range(40)}
    edges |= {(int(u), int(v)) for u, v in rng.integers(0, 40, (60, 2)) if u != v}
    n = 40
    for length in range(1, 7):
        for outward in (True, False):
            chain = [int(rng.integers(40)), *range(n, n + length)]
            links = [*pairwise(chain), (chain[0], chain[-1])]
            edges |= set(links if outward else [(v, u) for u, v in links])
            n += length
    codes = check(sorted(edges), n, rounds)
    assert (codes[:40] == 0).all()
    if rounds >= 6:
        assert (codes[40:] != 0).all()
        assert sorted(set(codes.tolist())) == list(range(-6, 7))
    else:
        # The rounds that a chain has too many of go on iterating.
        assert (codes[40:] == 0).any()


def test_a_graph_without_a_cycle_leaves_no_core_and_an_isolated_host_is_a_sink() -> None:
    codes = check([(0, 1), (1, 2)], 4, 3)
    assert codes.tolist() == [-3, -2, -1, -1]


def test_marks_name_the_hosts_tied_to_one_still_iterating() -> None:
    ends, codes = np.array([3, 1, 1, 0]), np.array([0, -1, 0, 2], dtype=np.int8)
    assert marked(ends, codes, 5).tolist() == [False, True, False, True, False]


def test_order_of_the_phases() -> None:
    codes = np.array([0, 1, 2, 3, -1, -2], dtype=np.int8)
    assert phase_of(codes, 3, 2).tolist() == [3, 0, 1, 2, 5, 4]
    assert phase_of(np.array([0, -1], dtype=np.int8), 0, 1).tolist() == [0, 1]
    assert phase_of(np.array([0, 1], dtype=np.int8), 1, 0).tolist() == [1, 0]
