"""What the benchmarks that compare designs multiply and solve is right, on graphs small enough to check."""

import dataclasses
import sys
from pathlib import Path

import numpy as np
import pytest

# The benchmarks are scripts, not part of the installed package.
sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "benchmarks"))

from crawl_graph import CrawlSettings
from iterations import WAYS
from layouts import crawl_links, iterated, layouts
from locality import check_products
from trial_graphs import DAMPING, GOOD_SHARE, make_system


@pytest.fixture(scope="module")
def graph() -> tuple[np.ndarray, np.ndarray]:
    """60 hosts: random links, a pair and a ring that link only to themselves, hosts without out-links."""
    random = np.random.default_rng(4)
    src, dst = random.integers(0, 30, 150), random.integers(0, 40, 150)
    ring = 40 + np.arange(7)
    pieces = [(src, dst), (ring, np.roll(ring, -1)), ([50, 51, 3, 5], [51, 50, 50, 42]), ([59], [58])]
    return tuple(np.concatenate(ends).astype(np.int64) for ends in zip(*pieces, strict=True))


def _dense(src, dst, slices) -> np.ndarray:
    """All hosts' PageRank and trust by numpy's dense solve, in scaled units: shape (n, k)."""
    n = int(max(src.max(), dst.max())) + 1
    links = np.zeros((n, n))
    links[src, dst] = 1.0
    np.fill_diagonal(links, 0.0)
    out = links.sum(axis=1, keepdims=True)
    transitions = np.divide(links, out, out=np.zeros_like(links), where=out > 0)
    start = np.zeros((n, 1 + len(slices)))
    start[:, 0] = 1.0
    for at, members in enumerate(slices, 1):
        start[members, at] = GOOD_SHARE * n / sum(map(len, slices))
    return np.linalg.solve(np.eye(n) - DAMPING * transitions.T, start)


@pytest.mark.parametrize("name", WAYS)
def test_every_way_keeps_its_bound_on_hosts_that_iterate(name, graph):
    slices = [np.array([1, 7]), np.array([43])]
    system = make_system(*graph, slices)
    assert 20 < system.n_hosts < 60
    expected = _dense(*graph, slices)[system.hosts]
    for tolerance in (1e-3, 1e-9):
        outcome = WAYS[name](system, tolerance)
        assert outcome.bound <= tolerance
        error = np.abs(outcome.values - expected) / expected[:, :1]
        assert error.max() <= outcome.bound * (1 + 1e-6)
        assert outcome.edge_passes <= outcome.steps


def test_layouts_multiply_alike_and_a_wrong_one_is_noticed(monkeypatch):
    # So small a graph would be a single section.
    monkeypatch.setattr("layouts._EVEN_SOURCES", 200)
    monkeypatch.setattr("layouts._LARGEST_SECTION", 300)
    links = crawl_links(CrawlSettings(edges=40_000), local=0.3, suffix=0.3)
    core = iterated(links)
    found = layouts(links, core, n_stripes=3)
    check_products(found, core)
    right, cut_again = found["hash, even blocks"], found["hash, even blocks, cut by rows"]
    assert len({first for _, first, _, _ in right.sections}) > 3
    assert len(cut_again.sections) > len(right.sections)
    # Cut between rows: none is added in more parts.
    assert cut_again.facts()["additions_an_edge"] == right.facts()["additions_an_edge"]
    wrong = dataclasses.replace(right, place=np.roll(right.place, 1))
    with pytest.raises(ValueError, match="wrong: the product is not that of the plain sum"):
        check_products({"wrong": wrong}, core)


def test_figures_of_a_layout_are_those_of_its_edges():
    links = crawl_links(CrawlSettings(edges=40_000), local=0.3, suffix=0.3)
    core = iterated(links)
    for layout in layouts(links, core, n_stripes=3).values():
        stripe = np.searchsorted(layout.starts, layout.place, side="right") - 1
        into = np.bincount(stripe[core.destination], minlength=3)
        same = np.mean(stripe[core.destination] == stripe[core.source])
        facts = layout.facts()
        assert facts["edges"] == len(core.source)
        assert facts["within_stripe"] == pytest.approx(same, rel=1e-12, abs=0)
        assert facts["busiest_stripe"] == pytest.approx(into.max() / into.mean(), rel=1e-12, abs=0)
