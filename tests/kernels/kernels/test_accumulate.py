"""The multiplication, against scipy's sparse product, published vectors and a dense solve."""

import networkx as nx
import numpy as np
import pytest
import scipy.sparse
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from sparkrank.kernels.accumulate import accumulate
from sparkrank.kernels.diagonals import make_section
from sparkrank.kernels.edges import destinations, merge_duplicates, out_totals, pack_keys, sources
from tests.kernels.kernels.sections import N_SOURCES, SHAPES, Sorted, random_rows
from tests.reference import DAMPING, LANGVILLE_MEYER, dense_solve, langville_meyer, trust_example


def product(edges: Sorted, flow: NDArray[np.float64], out: NDArray[np.float64]) -> NDArray[np.float64]:
    """The same by scipy: out + A flow, A in compressed rows."""
    values = np.ones(len(edges.source)) if edges.weights is None else edges.weights.astype(np.float64)
    shape = (out.shape[1], flow.shape[1])
    matrix = scipy.sparse.csr_array((values, (edges.destination, edges.source)), shape=shape)
    return out + (matrix @ flow.T).T


def start(k: int, edges: Sorted, seed: int = 1) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Positive flow over six orders of magnitude, and an output that isn't empty."""
    rng = np.random.default_rng(seed)
    flow = 10.0 ** rng.uniform(-3, 3, (k, N_SOURCES))
    return flow, rng.uniform(0.1, 1.0, (k, int(edges.destination[-1]) + 3))


@pytest.mark.parametrize("k", [1, 4, 8])
@pytest.mark.parametrize("weighted", [False, True])
@pytest.mark.parametrize("shape", SHAPES)
def test_it_is_the_sparse_product(shape: str, weighted: bool, k: int) -> None:
    edges = SHAPES[shape](weighted)
    section = make_section(*edges)
    flow, out = start(k, edges)
    expected = product(edges, flow, out)
    again = out.copy()
    accumulate(section, flow, out)
    assert_allclose(out, expected, rtol=1e-13, atol=0)
    accumulate(section, flow, again)
    assert again.tobytes() == out.tobytes()


def test_a_column_does_not_depend_on_the_others() -> None:
    edges = SHAPES["crawl"](True)
    section = make_section(*edges)
    flow, out = start(4, edges)
    alone = out[2:3].copy()
    accumulate(section, flow, out)
    accumulate(section, flow[2:3], alone)
    assert alone.tobytes() == out[2:3].tobytes()


@given(
    st.lists(st.integers(1, 30), min_size=1, max_size=300),
    st.booleans(),
    st.integers(0, 2**31),
    st.floats(-8, 8),
)
def test_it_is_linear(lengths: list[int], weighted: bool, seed: int, factor: float) -> None:
    edges = random_rows(np.array(lengths), weighted=weighted, seed=seed)
    section = make_section(*edges)
    flow, out = start(3, edges, seed)
    # Column 2 is a combination of the others, in what flows and in what is there already.
    flow[2] = flow[0] + factor * flow[1]
    out[2] = out[0] + factor * out[1]
    size = out.copy()
    accumulate(section, flow, out)
    # The error of the sums is relative to what was added up, not to what a negative factor leaves.
    accumulate(section, np.abs(flow), size)
    scale = size[0] + abs(factor) * size[1]
    assert (np.abs(out[2] - (out[0] + factor * out[1])) <= 1e-13 * scale).all()


class Steps:
    """x → c·T'x + u by the kernels alone: keys, merged edges, one section, the multiplication."""

    def __init__(self, edges: list[tuple[int, int]], n: int, weights: list[int] | None = None) -> None:
        source, destination = np.array(edges, dtype=np.int64).T
        merged = merge_duplicates(
            pack_keys(np.zeros_like(source), destination, source),
            None if weights is None else np.array(weights, dtype=np.int64),
        )
        self.section = make_section(destinations(merged.keys), sources(merged.keys), merged.weights)
        self.out_weight = out_totals(sources(merged.keys), merged.weights, n)

    def run(
        self, first: NDArray[np.float64], u: NDArray[np.float64], steps: int, damping: float = DAMPING
    ) -> NDArray[np.float64]:
        """``steps`` steps from ``first``; shapes (k, n)."""
        flow_per_score = np.zeros(len(self.out_weight))
        np.divide(damping, self.out_weight, out=flow_per_score, where=self.out_weight > 0)
        x = first
        for _ in range(steps):
            flow, x = x * flow_per_score, u.copy()
            accumulate(self.section, flow, x)
        return x


def test_the_trust_example_after_20_steps() -> None:
    """Edges and values from memory, recomputed; four and three digits; inverse PageRank runs on the
    transposed graph."""
    graph = trust_example()
    backwards = [(v, u) for u, v in graph.edges]
    uniform = np.full((1, graph.n), 1 / graph.n)
    inverse = Steps(backwards, graph.n).run(uniform, (1 - DAMPING) * uniform, 20)[0]
    assert inverse.round(4).tolist() == [0.0792, 0.1359, 0.0792, 0.0949, 0.0865, 0.0551, 0.0214]

    seeds = graph.vector({"2": 0.5, "4": 0.5})[np.newaxis]
    trust = Steps(graph.edges, graph.n).run(seeds, (1 - DAMPING) * seeds, 20)[0]
    assert trust.round(3).tolist() == [0, 0.180, 0.123, 0.151, 0.129, 0.055, 0.055]


def test_the_vector_of_langville_and_meyer() -> None:
    graph = langville_meyer()
    ones = np.ones((1, graph.n))
    p = Steps(graph.edges, graph.n).run(ones, ones, 400, 0.9)[0]
    assert_allclose(p / p.sum(), LANGVILLE_MEYER, rtol=0, atol=1e-8)


@pytest.mark.parametrize("weighted", [False, True])
def test_many_steps_are_the_dense_solve(weighted: bool) -> None:
    """A few hubs, duplicate edges, hosts without out-links; three columns at once."""
    n = 250
    graph = nx.barabasi_albert_graph(n, 3, seed=4)
    rng = np.random.default_rng(4)
    edges = [(u, v) for u, v in graph.edges if v % 5] + [(v, u) for u, v in graph.edges]
    edges = [(u, v) for u, v in edges if u % 7]
    edges += edges[:50] if weighted else []
    weights = rng.integers(1, 50, len(edges)).tolist() if weighted else None
    u = np.stack([np.ones(n), rng.random(n), np.arange(n) % 11 == 0]).astype(np.float64)
    rows = [(*edge, weight) for edge, weight in zip(edges, weights or [1] * len(edges), strict=True)]
    steps = Steps(edges, n, weights)
    assert int((steps.out_weight == 0).sum()) > n // 10
    assert_allclose(steps.run(u, u, 300), dense_solve(rows, n, u), rtol=1e-12, atol=0)
