"""Spam mass: the 12-host example, known spam, and masses without one slice against separate solves."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_allclose

from sparkrank.kernels.mass import spam_mass
from tests.reference import dense_solve, mass_example

EXAMPLE = mass_example()
# The core {g0, g1, g3} with 1/12 each: γ = .25, so every member starts from 1.
CORE = EXAMPLE.vector(dict.fromkeys(["g0", "g1", "g3"], 1.0))
SPAM = EXAMPLE.vector(dict.fromkeys(["x", *(f"s{i}" for i in range(7))], 1.0))
P = dense_solve(EXAMPLE.edges, EXAMPLE.n, np.ones(EXAMPLE.n))

# Gyöngyi, Berkhin, Garcia-Molina & Pedersen 2006, table of section 3: from memory, recomputed.
# host: scaled PageRank, scaled trust, true mass, estimated mass, true and estimated relative mass.
PUBLISHED = {
    "x": (9.33, 2.295, 6.185, 7.035, 0.6629, 0.7540),
    "g0": (2.7, 1.85, 0.85, 0.85, 0.3148, 0.3148),
    "g1": (1, 1, 0, 0, 0, 0),
    "g3": (1, 1, 0, 0, 0, 0),
    "g2": (2.7, 0.85, 0.85, 1.85, 0.3148, 0.6852),
    "s0": (4.4, 0, 4.4, 4.4, 1, 1),
    **{f"s{i}": (1, 0, 1, 1, 1, 1) for i in range(1, 7)},
}


def solve(start: np.ndarray) -> np.ndarray:
    return dense_solve(EXAMPLE.edges, EXAMPLE.n, start)


def test_the_12_host_example() -> None:
    estimated = spam_mass(P, solve(CORE)[np.newaxis], (1.0,), None)
    assert estimated.low is None
    assert estimated.high is None
    # True mass is what starts from all spam: PageRank less what starts from every good host.
    true = spam_mass(P, solve(1.0 - SPAM)[np.newaxis], (1.0,), None)
    assert_allclose(true.absolute, solve(SPAM), rtol=1e-13)
    columns = (P, estimated.trust, true.absolute, estimated.absolute, true.relative, estimated.relative)
    for host, published in PUBLISHED.items():
        values = [column[EXAMPLE.at[host]] for column in columns]
        assert_allclose(values, published, rtol=0, atol=5e-5, err_msg=host)
    unknown = [EXAMPLE.at[f"s{i}"] for i in range(7)]
    assert (estimated.relative[unknown] == 1.0).all()


def test_known_spam_is_a_lower_bound_and_never_an_average() -> None:
    x, trust = EXAMPLE.at["x"], solve(CORE)[np.newaxis]
    known = solve(EXAMPLE.vector({"s0": 1.0, "s5": 1.0}))
    without = spam_mass(P, trust, (1.0,), None)
    masses = spam_mass(P, trust, (1.0,), known)
    # An average with the known part would clear x: .461 (from memory, recomputed).
    assert round((without.relative[x] + known[x] / P[x]) / 2, 3) == 0.461
    assert_allclose(masses.relative[x], 0.7540, rtol=0, atol=5e-5)
    assert_allclose(masses.relative, without.relative, rtol=1e-13, atol=1e-15)


def test_known_spam_raises_where_it_knows_more() -> None:
    """A core that weighs three times as much explains x away; its known boosters do not let it."""
    x, trust = EXAMPLE.at["x"], solve(3 * CORE)[np.newaxis]
    known = solve(EXAMPLE.vector(dict.fromkeys(["s0", "s1", "s2", "s3", "s4", "s5"], 1.0)))
    without = spam_mass(P, trust, (1.0,), None)
    masses = spam_mass(P, trust, (1.0,), known)
    assert_allclose(without.relative[x], 1 - 3 * 2.295 / 9.33, rtol=1e-13)
    # By hand: s0 passes on .85 · 4.4, g0 .85 · .85 of s5.
    assert_allclose(masses.absolute[x], 0.85 * 4.4 + 0.85 * 0.85, rtol=1e-13)
    assert_allclose(masses.relative[x], (0.85 * 4.4 + 0.85 * 0.85) / 9.33, rtol=1e-13)
    # Nothing known is a bound, too: with a list no mass is negative, not even a core member's.
    g1 = EXAMPLE.at["g1"]
    assert (masses.absolute[g1], masses.relative[g1]) == (0.0, 0.0)
    assert without.relative[g1] == -2.0


def random_case(seed: int) -> tuple[list[tuple[int, int]], int, list[np.ndarray], float]:
    """Edges, hosts, the start of each slice and γN."""
    rng = np.random.default_rng(seed)
    n, good = 80, 0.85 * 80
    edges = sorted({(int(u), int(v)) for u, v in rng.integers(0, n, (300, 2)) if u != v})
    members = rng.choice(n, 12, replace=False)
    weights = rng.uniform(0.2, 5.0, 12)
    slices = []
    for chosen in np.split(np.arange(12), [2, 5]):
        start = np.zeros(n)
        start[members[chosen]] = good * weights[chosen] / weights.sum()
        slices.append(start)
    return edges, n, slices, good


@pytest.mark.parametrize("with_known_spam", [False, True])
@pytest.mark.parametrize("seed", range(3))
def test_leaving_a_slice_out_is_a_solve_of_its_own(seed: int, with_known_spam: bool) -> None:
    edges, n, slices, good = random_case(seed)
    p = dense_solve(edges, n, np.ones(n))
    known = dense_solve(edges, n, np.arange(n) % 9 == seed) if with_known_spam else np.zeros(n)
    cores = [np.sum(slices, axis=0)]
    for i in range(3):
        rest = np.sum([start for j, start in enumerate(slices) if j != i], axis=0)
        cores.append(rest * good / rest.sum())
    absolute = p - dense_solve(edges, n, cores)
    if with_known_spam:
        absolute = np.maximum(absolute, known)
    relative = absolute / p

    shares = tuple(float(start.sum() / good) for start in slices)
    columns = dense_solve(edges, n, slices)
    masses = spam_mass(p, columns, shares, known if with_known_spam else None)
    assert_allclose(masses.relative, relative[0], rtol=1e-11, atol=1e-13)
    assert_allclose(masses.low, relative.min(axis=0), rtol=1e-11, atol=1e-13)
    assert_allclose(masses.high, relative.max(axis=0), rtol=1e-11, atol=1e-13)
    assert (masses.high > masses.low).any()


POSITIVE = st.floats(1.0, 1e6)


@given(
    arrays(np.float64, 5, elements=POSITIVE),
    arrays(np.float64, (3, 5), elements=st.floats(0.0, 1e6)),
    arrays(np.float64, 5, elements=st.floats(0.0, 1.0)),
    st.lists(st.integers(1, 100), min_size=3, max_size=3),
)
def test_the_range_holds_the_mass_and_known_spam_never_lowers(
    p: np.ndarray, trust: np.ndarray, known_share: np.ndarray, weights: list[int]
) -> None:
    shares = tuple(weight / sum(weights) for weight in weights)
    plain = spam_mass(p, trust, shares, None)
    known = spam_mass(p, trust, shares, known_share * p)
    for masses in (plain, known):
        assert masses.low is not None
        assert masses.high is not None
        assert (masses.low <= masses.relative).all()
        assert (masses.relative <= masses.high).all()
        assert (masses.high <= 1.0).all()
    assert (known.absolute >= plain.absolute).all()
    assert (known.absolute >= known_share * p).all()
    # Two ways of writing the same quotient: as close as their rounding.
    assert (known.relative >= plain.relative - 1e-15 * (1 + trust.sum(axis=0) / p)).all()


def test_the_range_holds_the_mass_where_only_rounding_tells_the_cores_apart() -> None:
    """Slices that reach every host in proportion to their shares: any core gives the same mass."""
    shares = (0.1, 0.2, 0.7)
    rate = np.random.default_rng(6).uniform(0.1, 1.0, 1_000)
    masses = spam_mass(np.ones(1_000), np.outer(shares, rate), shares, None)
    assert masses.low is not None
    assert masses.high is not None
    assert (masses.low <= masses.relative).all()
    assert (masses.relative <= masses.high).all()
    assert_allclose(masses.low, masses.high, rtol=0, atol=1e-15)


def test_one_slice_that_is_nearly_the_whole_core_can_still_be_left_out() -> None:
    """The rest is scaled by its own share, which 1 minus the large one no longer resolves."""
    trust = np.array([[3.0, 0.0], [2e-20, 0.0]])
    masses = spam_mass(np.array([4.0, 1.0]), trust, (1.0, 1e-20), None)
    assert masses.low is not None
    assert masses.high is not None
    assert_allclose(masses.high, [0.5, 1.0], rtol=1e-13)
    assert_allclose(masses.low, [0.25, 1.0], rtol=1e-13)
