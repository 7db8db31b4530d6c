"""What sources look like: against absorbing chains, plain loops, and farms whose values are known."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from sparkrank.kernels.sources import (
    CLOSE,
    INDEPENDENT,
    OPEN_PAGE,
    captive_weight,
    closeness_of,
    contributions,
    hands_on,
    kind_sums,
    outside_support,
    source_kinds,
)
from tests.kernels.kernels.supports import DAMPING, gathered, random_edges, transitions


def star(k: int, *, back_links: bool, first: int = 1) -> list[tuple[int, int]]:
    """Boosters ``first`` on of target 0."""
    edges = [(booster, 0) for booster in range(first, first + k)]
    return edges + [(0, booster) for booster in range(first, first + k)] if back_links else edges


@pytest.mark.parametrize("seed", range(4))
def test_closeness_is_the_chance_to_arrive_without_the_least_discount(seed: int) -> None:
    """Outside oracle: the damped chance to hit x is a linear system in which x absorbs."""
    n, x = 14, 3
    matrix = transitions(n, random_edges(n, 40, seed))
    gives = np.linalg.inv(np.eye(n) - DAMPING * matrix)
    others = np.delete(np.arange(n), x)
    hit = np.linalg.solve(
        np.eye(n - 1) - DAMPING * matrix[np.ix_(others, others)], DAMPING * matrix[others, x]
    )
    steps = np.ones(n - 1, dtype=np.int64)
    found = closeness_of(gives[others, x], np.full(n - 1, gives[x, x]), steps, DAMPING)
    assert_allclose(found, np.minimum(1.0, hit / DAMPING), rtol=1e-12, atol=0)
    assert np.any(found > 0)


def test_captive_weight_is_full_from_a_fifth_of_the_walks_on() -> None:
    assert_array_equal(captive_weight(np.array([0.0, 0.1, 0.2, 1.0])), [0.0, 0.5, 1.0, 1.0])


@pytest.mark.parametrize("back_links", [False, True])
def test_boosters_have_nothing_from_outside(back_links: bool) -> None:
    support = gathered(13, star(12, back_links=back_links), [0])
    assert np.all(outside_support(support.links, support.candidates, DAMPING) <= 1e-9)


def test_links_from_sites_that_lead_elsewhere_are_outside_support() -> None:
    """Each booster has a tenth of a host of score 1, half of whose fifth counts as coming here."""
    edges = star(10, back_links=False) + [(11, host) for host in range(1, 11)]
    edges += [(12, host) for host in range(13, 33)] + [(12, host) for host in range(1, 11)]
    support = gathered(33, edges, [0])
    found = outside_support(support.links, support.candidates, DAMPING)
    # Host 11's walks all come here; a third of host 12's do, more than the fifth that counts in full.
    assert np.all(found <= 1e-9)
    edges += [(12, host) for host in range(33, 133)]
    support = gathered(133, edges, [0])
    found = outside_support(support.links, support.candidates, DAMPING)
    # Now 10 of 130 links: (1/13)/(1/5) of what it gives counts as coming here, the rest as outside.
    assert_allclose(found, DAMPING / 130 * (1 - 5 / 13), rtol=1e-9, atol=0)


@pytest.mark.parametrize("seed", range(5))
def test_outside_support_is_right_for_the_sum_over_sources(seed: int) -> None:
    """The sum of r_1·e is what plain loops over all ways of two links find coming from outside."""
    candidates = [0, 1, 2, 3]
    support = gathered(24, random_edges(24, 70, seed), candidates)
    found = outside_support(support.links, support.candidates, DAMPING)
    of = np.repeat(np.arange(4), np.diff(support.links.offsets))
    checked = 0
    for place, x in enumerate(candidates):
        outside, unreturned = 0.0, 0.0
        for u in support.sources[of == place].tolist():
            passed = DAMPING * support.transition[u, x]
            for v in np.flatnonzero(support.transition[:, u]).tolist():
                given = passed * DAMPING * support.score[v] * support.transition[v, u]
                outside += given * (1 - captive_weight(support.closeness[[v], place])[0])
                unreturned += given if v != x else 0.0
        here = DAMPING * support.links.transition[of == place] * found[of == place]
        if unreturned > 0:
            assert_allclose(here.sum(), min(outside, unreturned), rtol=1e-9, atol=1e-12)
            checked += outside > 0
    assert checked > 0


def test_sources_that_were_not_followed_say_nothing_of_the_others() -> None:
    edges = [*star(5, back_links=False), (6, 5), *((6, host) for host in range(7, 14))]
    support = gathered(14, edges, [0])
    followed = np.array([True, True, True, True, False])
    found = outside_support(support.links._replace(followed=followed), support.candidates, DAMPING)
    assert_array_equal(found, 0.0)


def test_kinds() -> None:
    """A booster, a guest book of a liked site, a site's own choice, a sub-host with support of its own."""
    book = [(20 + i, 2) for i in range(6)] + [(2, 40 + i) for i in range(11)] + [(2, 0)]
    choice = [(20 + i, 3) for i in range(6)] + [(3, 40 + i) for i in range(6)] + [(3, 0)]
    elsewhere = [(20 + i, 60 + i + j) for i in range(6) for j in range(9)]
    support = gathered(80, [(1, 0), *book, *choice, *elsewhere], [0])
    outside = outside_support(support.links, support.candidates, DAMPING)
    assert_array_equal(support.sources, [1, 2, 3])
    assert_array_equal(
        source_kinds(support.links, support.candidates, outside), [CLOSE, OPEN_PAGE, INDEPENDENT]
    )
    # The same domain makes a source close, much support from outside makes it independent again.
    domains = np.arange(80)
    domains[2] = 0
    support = gathered(80, [(1, 0), *book, *choice, *elsewhere], [0], domains.tolist())
    for outside_of_2, kind in ((0.5, CLOSE), (1.0, INDEPENDENT)):
        outside[1] = outside_of_2
        assert source_kinds(support.links, support.candidates, outside)[1] == kind


@pytest.mark.parametrize("k", [10, 100])
def test_an_optimal_farm_has_as_many_optimal_boosters_as_boosters_whatever_feeds_it(k: int) -> None:
    """Farm arithmetic: p = (λ + 1 + ck)/(1 - c²); the feed's share is taken out with all that it causes."""
    feeds = [(k + 1, 0)] + [(k + 1, k + 2 + i) for i in range(12)]
    support = gathered(k + 14, star(k, back_links=True) + feeds, [0])
    outside = outside_support(support.links, support.candidates, DAMPING)
    kinds = source_kinds(support.links, support.candidates, outside)
    found = kind_sums(support.links, support.candidates, kinds, DAMPING)
    assert_allclose(support.candidates.score, (DAMPING / 13 + 1 + DAMPING * k) / (1 - DAMPING**2), rtol=1e-12)
    assert_allclose(found.outside_feed, DAMPING / 13, rtol=1e-9, atol=0)
    assert found.close_sources == k
    assert_allclose(found.optimal_boosters, k, rtol=1e-9, atol=0)


def test_kind_sums_of_a_candidate_without_links_and_of_one_that_lives_on_its_feed() -> None:
    edges = [(u, 1) for u in range(2, 6)] + [
        (u, 6 + 10 * (u - 2) + i) for u in range(2, 6) for i in range(10)
    ]
    support = gathered(46, edges, [0, 1])
    kinds = np.full(4, INDEPENDENT, dtype=np.int8)
    found = kind_sums(support.links, support.candidates, kinds, DAMPING)
    assert_array_equal(found.close_share, [0, 0])
    assert_array_equal(found.independent_share, [0, 1])
    assert_array_equal(found.close_sources, [0, 0])
    assert_allclose(found.outside_feed, [0, contributions(support.links, DAMPING).sum()], rtol=1e-12)
    assert np.all(np.isnan(found.optimal_boosters))


def test_a_link_hands_on_what_a_higher_candidate_owes_to_it() -> None:
    """To one of twice its score; to one not quite; to a giant that would hardly notice."""
    found = hands_on(np.array([0.5, 0.5, 0.5]), np.full(3, 20.0), np.array([40.0, 39.0, 900.0]), DAMPING)
    assert_array_equal(found, [0.5, 0.0, 0.0])
