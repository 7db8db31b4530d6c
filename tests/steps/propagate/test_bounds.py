"""A graph too large for the driver, with scores over five orders of magnitude: the bound of every host."""

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from sparkrank.errors import NotConverged
from tests.steps.graphs import Scored, make_crawl, sparse_solve, tasks_in_process

# By number: leaves, most of them linking to the hub; the hub and a few hosts that link back to it; rings,
# a tight middle and pages that end there.
LEAVES, RING_LEAVES, FEW, MIDDLE, PAGES = 250_000, 1_000, 10, 400, 50_000
RINGS = (31, 37, 41, 43, 47)
HUB = LEAVES
RING_FIRST = HUB + 1 + FEW
MIDDLE_FIRST = RING_FIRST + sum(RINGS)
PAGES_FIRST = MIDDLE_FIRST + MIDDLE
N = PAGES_FIRST + PAGES


def large_edges() -> np.ndarray:
    """Distinct edges by number, shape (m, 2).

    The hub iterates, but gives its back-links little.  The rings, each with its own length and its leaves
    in its own places, have so many slow modes that no step nor mixture comes near the answer at once.
    """
    rng = np.random.default_rng(3)
    leaves = np.arange(LEAVES)
    few, ring_leaves = np.arange(HUB + 1, RING_FIRST), np.arange(RING_LEAVES)
    firsts = RING_FIRST + np.concatenate(([0], np.cumsum(RINGS)[:-1]))
    rings = [
        (first + np.arange(n), first + (np.arange(n) + 1) % n) for first, n in zip(firsts, RINGS, strict=True)
    ]
    pages = PAGES_FIRST + np.arange(PAGES)
    parts = [
        (leaves[RING_LEAVES:], np.full(LEAVES - RING_LEAVES, HUB)),
        (ring_leaves, rng.integers(RING_FIRST, MIDDLE_FIRST, RING_LEAVES)),
        *rings,
        (np.full(FEW, HUB), few),
        (few, np.full(FEW, HUB)),
        (np.full(5000, HUB), pages[:5000]),
        (few, MIDDLE_FIRST + np.arange(FEW)),
        (MIDDLE_FIRST + rng.integers(0, MIDDLE, 1600), MIDDLE_FIRST + rng.integers(0, MIDDLE, 1600)),
        (MIDDLE_FIRST + rng.integers(0, MIDDLE, PAGES), pages),
    ]
    edges = np.unique(np.concatenate([np.column_stack(part) for part in parts]), axis=0)
    return edges[edges[:, 0] != edges[:, 1]]


@pytest.fixture(scope="module")
def large(spark, tmp_path_factory: pytest.TempPathFactory):
    """The crawl, its graph built by Spark tasks, and its exact scores: columns p and two slices."""
    edges = large_edges()
    names = pa.array([f"h{i:06d}.example" for i in range(N)])
    table = pa.table({"src": names.take(pa.array(edges[:, 0])), "dst": names.take(pa.array(edges[:, 1]))})
    members = {"leaves": np.arange(5, 5000, 50), "rings": np.arange(RING_FIRST, MIDDLE_FIRST, 4)}
    core = [(f"h{i:06d}.example", name) for name, numbers in members.items() for i in numbers]
    crawl = make_crawl(spark, tmp_path_factory.mktemp("large"), table, core, solve__max_steps=400)
    graph = crawl.build()
    start = np.zeros((3, N))
    start[0] = 1
    for row, numbers in enumerate(members.values(), start=1):
        start[row, numbers] = 0.85 * N / len(core)
    pairs = dict.fromkeys(map(tuple, edges.tolist()), 1.0)
    return crawl, graph, np.array([sparse_solve(N, pairs, column) for column in start])


def test_nothing_that_grows_with_the_graph_comes_to_the_driver(spark, large, tmp_path) -> None:
    """More than 300,000 hosts where all results of a job together may have 1 MB."""
    crawl, graph, _ = large
    assert spark.conf.get("spark.driver.maxResultSize") == "1m"
    assert graph.n_hosts == N > 300_000
    with pytest.raises(NotConverged):
        crawl.solve(graph, run__work=tmp_path, solve__max_steps=2)


@pytest.mark.parametrize("tolerance", [1e-3, 1e-6])
def test_every_host_is_within_the_bound_of_its_column(large, tolerance, tmp_path) -> None:
    """|p - p̂| <= bound·p and |t - t̂| <= bound·p for every host, small and large."""
    crawl, graph, (p, *slices) = large
    assert p.max() / p.min() > 1e5
    with tasks_in_process():
        solved = crawl.solve(graph, solve__tolerance=tolerance)
        folder = tmp_path / "scores"
        crawl.scores(solved).write.parquet(str(folder))
    found = Scored(graph=graph, solved=solved, table=pq.read_table(folder).sort_by("host"))
    facts = solved.column_facts()
    bounds = [column["error_bound"] for column in facts]
    assert max(bounds) <= tolerance
    rounding = 1e-12  # of the reference and of the solve
    error = np.abs(found.column("scaled_pagerank") - p)
    assert (error <= (bounds[0] + rounding) * p).all()
    trust_error = np.abs(found.column("trust") - sum(slices))
    assert (trust_error <= (sum(bounds[1:]) + rounding) * p).all()
    # The program was not handed the answer: the errors are there, and the bounds no wider than need be.
    assert (error / p).max() > 0.05 * bounds[0]
    assert (trust_error / p).max() > 0.05 * sum(bounds[1:])
    # In units in which all PageRank without leaks would sum to 1.
    scale = (1 - 0.85) / N
    assert error.sum() * scale <= facts[0]["l1_bound"] + rounding
    assert trust_error.sum() * scale <= sum(column["l1_bound"] for column in facts[1:]) + rounding
    relative_error = np.abs(found.column("relative_mass") - (1 - sum(slices) / p))
    allowed = sum(bounds[1:]) + sum(slices) / p * bounds[0] + rounding
    # To first order in the bounds, as the product of two of them is far smaller.
    assert (relative_error <= allowed * (1 + 2 * tolerance)).all()
