"""What speaks against a core speaks against every candidate."""

import pytest

from sparkrank.evidence.cautions import (
    FEW_SLICES,
    NOT_REACHED,
    THIN_CORE,
    CoreStrength,
    core_strength,
)
from tests.steps.evidence.test_candidates import candidates, score


def test_what_speaks_against_the_core_is_on_every_candidate() -> None:
    weak = CoreStrength(start=1e5, hidden_boosters=1000.0, slices=1)
    rows = [score("one.test"), score("two.test", core_reached=False)]
    found = candidates(rows, strength=weak)
    assert {row["host"]: row["cautions"] for row in found} == {
        "one.test": [FEW_SLICES, THIN_CORE],
        "two.test": [NOT_REACHED, FEW_SLICES, THIN_CORE],
    }


@pytest.mark.parametrize(
    ("hidden", "slices", "cautions"),
    [
        (999.9, 2, []),
        (1000.0, 2, [THIN_CORE]),
        (None, 2, []),
        (0.0, 1, [FEW_SLICES]),
        (None, 0, [FEW_SLICES]),
    ],
)
def test_boundaries_of_a_weak_core(hidden, slices, cautions) -> None:
    assert CoreStrength(start=1.0, hidden_boosters=hidden, slices=slices).cautions == cautions


def strength(n_hosts: int, n_core: int, min_relative_mass: float = 0.5) -> CoreStrength:
    return core_strength(
        good_share=0.85,
        n_hosts=n_hosts,
        n_core=n_core,
        slices=2,
        damping=0.85,
        min_relative_mass=min_relative_mass,
    )


def test_the_farm_that_a_core_link_hides() -> None:
    """k = (cJ / (d(1 - tau)) - 1) / c with d = 10: the method's own examples (recomputed by hand)."""
    small = strength(80_000, 1_000)
    assert small.start == pytest.approx(68, rel=1e-12)
    assert small.hidden_boosters == pytest.approx(12, abs=0.5)
    large = strength(335_000_000, 5_000)
    assert large.hidden_boosters == pytest.approx(11_400, rel=2e-3)
    assert (small.cautions, large.cautions) == ([], [THIN_CORE])
    # A thousand boosters are reached at J = 851 · 5 / .85, with one member at N = 5889.3.
    assert (strength(5889, 1).cautions, strength(5890, 1).cautions) == ([], [THIN_CORE])
    # No farm is over a threshold of 1.
    assert strength(10**9, 1, min_relative_mass=1.0).hidden_boosters is None
