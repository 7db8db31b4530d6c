"""Farm arithmetic: closed forms against dense solves of the farms, and the figures the forms are known by.

Closed forms: common practice in the trade, no single source; also Gyöngyi & Garcia-Molina, "Link Spam
Alliances", VLDB 2005 (from memory, recomputed).
"""

import math

import numpy as np
import pytest
from numpy.testing import assert_allclose

from sparkrank.kernels.farms import (
    boosters_hidden_by_core_link,
    core_member_start,
    farm_score,
    optimal_boosters,
)
from tests.reference import DAMPING, dense_solve

BOTH = (True, False)


def farm(k: int, back_links: bool, *, target: int = 0, first: int = 1) -> list[tuple[int, int]]:
    """k boosters from position ``first`` on, and their target."""
    boosters = range(first, first + k)
    edges = [(booster, target) for booster in boosters]
    return edges + [(target, booster) for booster in boosters] if back_links else edges


# From memory, recomputed; four digits after the point.
@pytest.mark.parametrize(
    ("k", "back_links", "published"),
    [(10, True, 34.2342), (100, True, 309.9099), (10, False, 9.5), (100, False, 86.0)],
)
def test_score_of_a_single_farm(k: int, back_links: bool, published: float) -> None:
    assert round(farm_score(k, DAMPING, back_links=back_links), 4) == published
    solved = dense_solve(farm(k, back_links), k + 1, np.ones(k + 1))[0]
    assert_allclose(farm_score(k, DAMPING, back_links=back_links), solved, rtol=1e-12)


@pytest.mark.parametrize("damping", [0.1, 0.5, 0.85, 0.99])
@pytest.mark.parametrize("k", [1, 2, 37])
def test_score_for_any_damping(k: int, damping: float) -> None:
    for back_links in BOTH:
        solved = dense_solve(farm(k, back_links), k + 1, np.ones(k + 1), damping)[0]
        assert_allclose(farm_score(k, damping, back_links=back_links), solved, rtol=1e-11)


def test_the_feed_from_outside_is_multiplied() -> None:
    """λ/(1 - c²) on top: an outside host that links to the target alone brings λ = c in scaled units."""
    k = 20
    edges = [*farm(k, True), (k + 1, 0)]
    solved = dense_solve(edges, k + 2, np.ones(k + 2))[0]
    gained = solved - farm_score(k, DAMPING, back_links=True)
    assert_allclose(gained, DAMPING / (1 - DAMPING**2), rtol=1e-12)


def test_optimal_boosters_of_an_observed_farm() -> None:
    # 412 one-way boosters do the work of 113 (recomputed).
    boosters = optimal_boosters(farm_score(412, DAMPING, back_links=False), DAMPING)
    assert boosters is not None
    assert int(boosters) == 113
    for k in (0, 1, 113, 5_000):
        turned = optimal_boosters(farm_score(k, DAMPING, back_links=True), DAMPING)
        assert turned is not None
        assert_allclose(turned, k, rtol=1e-12, atol=1e-12)


def test_what_needs_no_farm_has_none() -> None:
    floor = 1 / (1 - DAMPING**2)
    assert optimal_boosters(floor * 0.999, DAMPING) is None
    assert optimal_boosters(1.0, DAMPING) is None
    assert optimal_boosters(-5.0, DAMPING) is None
    assert optimal_boosters(floor * 1.001, DAMPING) is not None


def test_what_a_core_member_starts_from() -> None:
    # γ = .85 of 335 M hosts over 5,000 members; the formula of J by hand.
    assert_allclose(core_member_start(0.85, 335_000_000, 5_000), 56_950.0, rtol=1e-13)
    assert_allclose(core_member_start(0.25, 12, 3), 1.0, rtol=1e-13)


def test_how_large_a_farm_one_core_link_hides() -> None:
    # d = 10, τ = .5: 12 boosters at J = 67, 11,400 at N = 335 M with a core of 5,000 (recomputed).
    small = boosters_hidden_by_core_link(67, 10, DAMPING, 0.5)
    assert small is not None
    assert int(small) == 12
    large = boosters_hidden_by_core_link(core_member_start(0.85, 335_000_000, 5_000), 10, DAMPING, 0.5)
    assert large is not None
    assert round(large, -2) == 11_400


@pytest.mark.parametrize("threshold", [-1.0, 0.0, 0.5, 0.98])
def test_the_hidden_farm_by_a_dense_solve(threshold: float) -> None:
    """The farm of that size sits at the threshold; the form leaves out the member's own PageRank."""
    start, out_links = 67.0, 10
    hidden = boosters_hidden_by_core_link(start, out_links, DAMPING, threshold)
    assert hidden is not None

    def relative_mass(k: int) -> float:
        """Of a target with k back-linked boosters, one link from a core member of ``out_links``."""
        member, n = k + 1, k + 1 + out_links
        edges = [*farm(k, True), (member, 0), *((member, other) for other in range(k + 2, n))]
        core = np.zeros(n)
        core[member] = start
        p, t = dense_solve(edges, n, np.stack([np.ones(n), core]))
        return float(1 - t[0] / p[0])

    assert relative_mass(math.floor(hidden - 1 / out_links)) < threshold
    assert relative_mass(math.ceil(hidden)) > threshold


def test_no_farm_is_over_a_threshold_of_one_and_a_weak_link_hides_none() -> None:
    assert boosters_hidden_by_core_link(67, 10, DAMPING, 1.0) is None
    assert boosters_hidden_by_core_link(1.0, 1_000, DAMPING, 0.5) == 0.0


def test_alliances() -> None:
    """k = 100 and m = 300 boosters, in units of 1/N: scaled values times 1 - c; three digits."""
    k, m = 100, 300
    n = k + m + 2
    boosters = [*farm(k, False, target=0, first=2), *farm(m, False, target=1, first=2 + k)]
    unit = 1 - DAMPING
    together = unit * dense_solve([*boosters, (0, 1), (1, 0)], n, np.ones(n))
    assert together[:2].round(3).tolist() == [164.108, 177.892]
    apart = [unit * farm_score(size, DAMPING, back_links=True) for size in (k, m)]
    assert [round(score, 3) for score in apart] == [46.486, 138.378]
    shared = [(b, t) for b in range(2, n) for t in (0, 1)]
    both = unit * dense_solve([*shared, *((t, b) for b, t in shared)], n, np.ones(n))
    assert both[:2].round(3).tolist() == [92.432, 92.432]
