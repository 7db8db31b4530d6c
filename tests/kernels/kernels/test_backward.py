"""Contributions to a score by backward steps, against a dense solve and farm arithmetic.

Farm values: common practice in the trade; also Gyöngyi & Garcia-Molina, "Link Spam Alliances", VLDB 2005
(from memory, recomputed).
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from sparkrank.kernels.backward import Residuals, add_up, follow, pair_keys, split_keys, worth_following
from tests.reference import DAMPING, dense_solve, transition


def origins(edges, n: int, targets: list[int], least: float, steps: int = 400):
    """g of every host and target, and what lies behind hosts not followed: shapes (n, k) and (k,)."""
    p = dense_solve(edges, n, np.ones(n))
    links = sorted({(v, u) for u, v in edges})
    sources = np.array([u for _, u in links], dtype=np.int64)
    in_degree = np.bincount([v for v, _ in links], minlength=n)
    offsets = np.concatenate(([0], np.cumsum(in_degree)))
    share = DAMPING / np.maximum(1, np.bincount(sources, minlength=n))
    found, lost = np.zeros((n, len(targets))), np.zeros(len(targets))
    now = Residuals(np.arange(len(targets)), np.array(targets), np.ones(len(targets)))
    for _ in range(steps):
        found[now.host, now.target] += now.value
        behind = (p[now.host] - 1) * now.value
        chosen = worth_following(behind, p[np.array(targets)][now.target], in_degree[now.host], least)
        lost += np.bincount(now.target, np.where(chosen, 0, behind), minlength=len(targets))
        now = Residuals(*(column[chosen] for column in now))
        at, link = follow(now, now.host, offsets)
        host = sources[link]
        now, _ = add_up(now.target[at], host, now.value[at] * share[host])
    return p, found, lost


@st.composite
def graphs(draw):
    n = draw(st.integers(2, 12))
    host = st.integers(0, n - 1)
    edges = draw(st.lists(st.tuples(host, host).filter(lambda e: e[0] != e[1]), min_size=1, unique=True))
    return n, edges


@given(graphs())
def test_followed_to_the_end_they_are_the_dense_inverse(graph) -> None:
    n, edges = graph
    _, found, _ = origins(edges, n, list(range(n)), 0.0)
    assert_allclose(found, np.linalg.inv(np.eye(n) - DAMPING * transition(edges, n)), rtol=1e-9, atol=1e-15)


@given(graphs(), st.floats(1e-4, 0.3))
def test_what_was_not_followed_is_exactly_what_is_missing(graph, least) -> None:
    n, edges = graph
    p, found, lost = origins(edges, n, list(range(n)), least)
    assert_allclose(found.sum(axis=0) + lost, p, rtol=1e-9)
    true = np.linalg.inv(np.eye(n) - DAMPING * transition(edges, n))
    # LAPACK leaves 1e-17 where the answer is 0.
    assert (found <= true * (1 + 1e-9) + 1e-15).all()


@given(graphs(), st.integers(1, 50))
def test_a_step_reads_no_more_links_than_the_share_allows(graph, most) -> None:
    n, edges = graph
    p = dense_solve(edges, n, np.ones(n))
    in_degree = np.bincount([v for _, v in set(edges)], minlength=n)
    for target in range(n):
        r = np.zeros(n)
        r[target] = 1
        for _ in range(5):
            r = DAMPING * transition(edges, n) @ r
            behind = (p - 1) * r
            chosen = worth_following(behind, np.full(n, p[target]), in_degree, 1 / most)
            assert in_degree[chosen].sum() <= most


@pytest.mark.parametrize(("k", "back_links", "published"), [(100, True, 309.9099), (100, False, 86.0)])
def test_origins_of_a_farm(k, back_links, published) -> None:
    """All of the target's score is the boosters' start and its own, (1 + ck)/(1 - c²) with back-links."""
    edges = [(booster, 0) for booster in range(1, k + 1)]
    edges += [(0, booster) for booster in range(1, k + 1)] if back_links else []
    p, found, _ = origins(edges, k + 1, [0], 0.0)
    circling = 1 / (1 - DAMPING**2) if back_links else 1.0
    assert_allclose(found[0, 0], circling, rtol=1e-12)
    assert_allclose(found[1:, 0], DAMPING * circling, rtol=1e-12)
    assert round(found[:, 0].sum(), 4) == published
    assert_allclose(p[0], published, rtol=1e-6)


def test_pairs_are_added_in_the_order_given() -> None:
    target = np.array([1, 0, 1, 0, 1])
    host = np.array([5, 7, 5, 7, 2])
    value = np.array([1.0, 1e16, 2.0, -1e16, 4.0])
    added, first = add_up(target, host, value)
    assert list(zip(*(column.tolist() for column in added), strict=True)) == [
        (0, 7, 0.0),
        (1, 2, 4.0),
        (1, 5, 3.0),
    ]
    assert first.tolist() == [1, 4, 0]
    none, _ = add_up(*(np.zeros(0, dtype) for dtype in (np.int64, np.int64, np.float64)))
    assert [len(column) for column in none] == [0, 0, 0]


def test_keys_of_pairs_are_in_their_order() -> None:
    target, host = np.array([0, 0, 1, 2**30]), np.array([3, 2**32 - 1, 0, 9])
    keys = pair_keys(target, host)
    assert (np.diff(keys) > 0).all()
    assert [column.tolist() for column in split_keys(keys)] == [target.tolist(), host.tolist()]
