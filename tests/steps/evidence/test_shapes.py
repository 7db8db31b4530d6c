"""Measures of a candidate's support: what the kernels get, against the same from a dense inverse."""

import networkx as nx
import numpy as np
import pytest

from sparkrank.kernels.reasons import CAUTIONS, REASONS, marks
from sparkrank.kernels.shape import priority, shape_columns
from sparkrank.kernels.sources import (
    KIND_NAMES,
    CandidateArrays,
    DirectLinks,
    captive_weight,
    closeness_of,
    hands_on,
    kind_sums,
    outside_support,
    source_kinds,
)
from tests.steps.evidence.supports import EXACT, gather, rows_of
from tests.steps.evidence.test_support import transition
from tests.steps.webs import DAMPING, GOOD_SHARE


@pytest.fixture(scope="module")
def measured(web_crawl, even_scored, tmp_path_factory):
    """Every host but core members, every path followed: rows of both work tables."""
    found = gather(web_crawl, even_scored, tmp_path_factory.mktemp("measured"), **EXACT)
    return rows_of(found.support), {row["host"]: row for row in rows_of(found.measures)}


class Dense:
    """Inputs of the kernels for all hosts but core members, from dense matrices."""

    def __init__(self, web, scored) -> None:
        n = len(web.hosts)
        t = transition(web, False)
        self.given = np.linalg.inv(np.eye(n) - DAMPING * t)
        self.p = self.given.sum(axis=0)
        self.graph = web.graph(weighted=False)
        members = {web.at[host] for host, _, _ in web.members}
        self.hosts = [i for i in range(n) if i not in members]
        links = [(k, u) for k, x in enumerate(self.hosts) for u in sorted(self.graph.predecessors(x))]
        of, u = (np.array(column, dtype=np.int64) for column in zip(*links, strict=True))
        x = np.array(self.hosts)[of]
        own = self.given[self.hosts, self.hosts]
        distance = {
            k: nx.single_source_shortest_path_length(self.graph.reverse(), v)
            for k, v in enumerate(self.hosts)
        }
        self.distance = distance
        out = np.array([self.graph.out_degree(i) for i in range(n)])
        into = np.array([self.graph.in_degree(i) for i in range(n)])
        names = {name: hash_of(scored.table[name].to_pylist()) for name in ("domain", "suffix")}
        candidates = np.array([sum(v in set(self.hosts) for v in self.graph.successors(i)) for i in range(n)])
        self.links = DirectLinks(
            offsets=np.searchsorted(of, np.arange(len(self.hosts) + 1)),
            score=self.p[u],
            transition=t[u, x],
            closeness=np.maximum(
                closeness_of(self.given[u, x], own[of], np.ones(len(u), int), DAMPING), t[u, x]
            ),
            returned=t[x, u] > 0,
            followed=into[u] > 0,
            in_degree=into[u],
            out_degree=out[u],
            domain=names["domain"][u],
            suffix=names["suffix"][u],
            candidates=candidates[u],
        )
        two = (DAMPING * t) @ (DAMPING * t)
        circulating = np.zeros(len(self.hosts))
        handed = np.zeros(len(self.hosts))
        for k, v in enumerate(self.hosts):
            for w, steps in distance[k].items():
                close = closeness_of(self.given[[w], v], own[[k]], np.array([steps]), DAMPING)
                weight = 1.0 if steps == 0 else captive_weight(close)[0]
                circulating[k] += self.p[w] * two[w, v] * weight
            for y in self.hosts:
                if t[v, y] > 0:
                    handed[k] += hands_on(t[[v], y], self.p[[v]], self.p[[y]], DAMPING)[0]
        reached = scored.column("core_reached")
        self.arrays = CandidateArrays(
            score=self.p[self.hosts],
            out_degree=out[self.hosts],
            domain=names["domain"][self.hosts],
            self_support=own,
            circulating=circulating,
            handed_on=handed,
            core_reached=reached[self.hosts],
        )


def hash_of(names) -> np.ndarray:
    return np.unique(np.array(names), return_inverse=True)[1].astype(np.int64)


@pytest.fixture(scope="module")
def dense(web, even_scored) -> Dense:
    return Dense(web, even_scored)


def test_the_kernels_get_what_a_dense_inverse_gives(web, measured, dense) -> None:
    _, rows = measured
    shape = shape_columns(dense.links, dense.arrays, DAMPING)
    kinds = source_kinds(dense.links, dense.arrays, outside_support(dense.links, dense.arrays, DAMPING))
    expected = {
        "priority": priority(shape, dense.arrays),
        "handed_on_share": dense.arrays.handed_on,
        **shape._asdict(),
        **kind_sums(dense.links, dense.arrays, kinds, DAMPING)._asdict(),
    }
    for name, values in expected.items():
        found = [rows[web.hosts[x]][name] for x in dense.hosts]
        found = np.array([np.nan if value is None else value for value in found], dtype=np.float64)
        np.testing.assert_allclose(found, values, rtol=1e-6, atol=1e-8, err_msg=name)


def test_reasons_and_cautions_are_those_of_the_shape(web, measured, dense) -> None:
    _, rows = measured
    shape = shape_columns(dense.links, dense.arrays, DAMPING)
    kinds = source_kinds(dense.links, dense.arrays, outside_support(dense.links, dense.arrays, DAMPING))
    found = marks(shape, dense.arrays, kind_sums(dense.links, dense.arrays, kinds, DAMPING))
    for k, x in enumerate(dense.hosts):
        row = rows[web.hosts[x]]
        assert row["reasons"] == [
            text for text, holds in zip(REASONS, found.reasons[k], strict=True) if holds
        ]
        assert row["look_alikes"] == [
            text for text, holds in zip(CAUTIONS, found.cautions[k], strict=True) if holds
        ]
    assert len(rows["target.example"]["reasons"]) == 3


def test_kinds_of_sources_are_beside_the_links(web, measured, dense) -> None:
    support, _ = measured
    kinds = source_kinds(dense.links, dense.arrays, outside_support(dense.links, dense.arrays, DAMPING))
    names = {}
    for k, x in enumerate(dense.hosts):
        sources = sorted(dense.graph.predecessors(x))
        part = kinds[dense.links.offsets[k] : dense.links.offsets[k + 1]]
        names |= {
            (web.hosts[x], web.hosts[u]): KIND_NAMES[kind] for u, kind in zip(sources, part, strict=True)
        }
    direct = [row for row in support if row["kind"] == "direct"]
    assert all(row["looks_like"] == names[row["host"], row["source"]] for row in direct)
    assert len({row["looks_like"] for row in direct}) >= 2
    assert all(row["looks_like"] is None for row in support if row["kind"] == "origin")


def test_shares_by_distance_and_length(web, measured, dense) -> None:
    _, rows = measured
    t = transition(web, False)
    for k, x in enumerate(dense.hosts):
        row, distance, p = rows[web.hosts[x]], dense.distance[k], dense.p[x]
        at = [sum(steps == d for steps in distance.values()) for d in range(4)]
        for d in (1, 2, 3):
            near = sum(dense.given[w, x] for w, steps in distance.items() if steps <= d)
            assert row[f"share_within_{d}"] == pytest.approx(near / p, rel=1e-8)
            assert row[f"supporters_at_{d}"] == at[d]
        within = np.cumsum(at)
        assert row["supporter_growth"] == pytest.approx((within[1:] / within[:-1]).min(), rel=1e-12)
        # Truncated PageRank: only what arrives over more than three links.
        r, short = np.eye(len(t))[x], 1.0
        for _ in range(3):
            r = DAMPING * t @ r
            short += r.sum()
        assert row["long_path_share"] == pytest.approx(1 - short / p, rel=1e-7, abs=1e-9)


def test_the_core_member_that_a_trust_hangs_on(web, measured, dense) -> None:
    _, rows = measured
    trust = web.solve(web.trust_start(), weighted=False)
    start = web.trust_start()
    assert start.sum() == pytest.approx(GOOD_SHARE * len(web.hosts), rel=1e-12)
    for x in dense.hosts:
        largest = rows[web.hosts[x]]["largest_core_member_trust_share"]
        if trust[x] < 1e-9:
            assert largest is None
        else:
            assert largest == pytest.approx((start * dense.given[:, x]).max() / trust[x], rel=1e-6)
