"""The detection floor against dense solves of farms one booster below it and at it.

The floors at a least scaled PageRank of 10, 3 boosters with back-links and 11 without, are known figures
(from memory, recomputed).
"""

import itertools
import json

import numpy as np
import pytest
from numpy.testing import assert_allclose

from sparkrank.kernels.farms import core_member_start, farm_score
from sparkrank.kernels.floor import (
    CORE_LINK_OUT_LINKS,
    LARGEST_FARM,
    SHAPES,
    DetectionFloor,
    detection_floor,
    target_score,
    target_trust,
)
from tests.reference import DAMPING, dense_solve

SMALL_CORE = core_member_start(0.85, 80_000, 1_000)


def star(k: int) -> list[tuple[int, int]]:
    return [(b, 0) for b in range(1, k + 1)]


def back_star(k: int) -> list[tuple[int, int]]:
    return star(k) + [(0, b) for b in range(1, k + 1)]


def ring(k: int, returned: int = 1) -> list[tuple[int, int]]:
    around = [(b, b % k + 1) for b in range(1, k + 1)]
    return star(k) + around + [(0, b) for b in range(1, returned + 1)]


def two_tier(k: int) -> list[tuple[int, int]]:
    inner = max(1, k // 4)
    return back_star(inner) + [(b, 1 + b % inner) for b in range(inner + 1, k + 1)]


def alliance(k: int) -> list[tuple[int, int]]:
    """The targets are 0 and k + 1; odd boosters are the first one's."""
    other = k + 1
    return [(0, other), (other, 0), *((b, 0 if b % 2 else other) for b in range(1, k + 1))]


FARMS = {
    "star": star,
    "star_with_back_links": back_star,
    "ring": ring,
    "two_tier": two_tier,
    "alliance": alliance,
}


def solved(shape: str, k: int, *, start: float | None, damping: float = DAMPING) -> tuple[float, float]:
    """Score and relative mass of target 0, solved densely; ``start`` is J of the member that links to it."""
    edges, n = FARMS[shape](k), k + 2
    core = np.zeros(n)
    if start is not None:
        member = n
        n += 1 + (CORE_LINK_OUT_LINKS - 1)
        edges = [*edges, (member, 0), *((member, other) for other in range(member + 1, n))]
        core = np.zeros(n)
        core[member] = start
    p, t = dense_solve(edges, n, np.stack([np.ones(n), core]), damping)
    return float(p[0]), float(1 - t[0] / p[0])


def floor(rho: float = 10.0, tau: float = 0.5, start: float = SMALL_CORE, **other: float) -> DetectionFloor:
    damping = other.get("damping", DAMPING)
    return detection_floor(min_scaled_pagerank=rho, min_relative_mass=tau, damping=damping, core_start=start)


def test_there_is_a_dense_farm_of_every_shape() -> None:
    assert FARMS.keys() == SHAPES.keys()


@pytest.mark.parametrize("damping", [0.3, 0.85, 0.99])
@pytest.mark.parametrize("k", [2, 3, 4, 7, 30])
@pytest.mark.parametrize("shape", FARMS)
def test_scores_and_trust_of_targets(shape: str, k: int, damping: float) -> None:
    p, _ = solved(shape, k, start=None, damping=damping)
    assert_allclose(target_score(shape, k, damping), p, rtol=1e-11, atol=0)
    p, relative_mass = solved(shape, k, start=67.0, damping=damping)
    feed = damping / CORE_LINK_OUT_LINKS
    assert_allclose(target_score(shape, k, damping, feed), p, rtol=1e-11, atol=0)
    trust = target_trust(shape, damping, 67.0 * feed)
    assert_allclose(trust, p * (1 - relative_mass), rtol=1e-9, atol=0)


@pytest.mark.parametrize("returned", [1, 2, 6])
def test_a_ring_scores_alike_however_many_boosters_its_target_links_back_to(returned: int) -> None:
    p = dense_solve(ring(6, returned), 7, np.ones(7))[0]
    assert_allclose(target_score("ring", 6, DAMPING), p, rtol=1e-12, atol=0)


def test_stars_are_those_of_the_closed_forms_and_alliances_known() -> None:
    for shape, back_links in (("star", False), ("star_with_back_links", True)):
        single = farm_score(37, DAMPING, back_links=back_links)
        assert_allclose(target_score(shape, 37, DAMPING), single, rtol=1e-13, atol=0)
    # Two targets of 200 boosters each, in units of 1/N, by hand: (1 - c)(1 + 200c)/(1 - c).
    assert_allclose((1 - DAMPING) * target_score("alliance", 400, DAMPING), 171.0, rtol=1e-12, atol=0)


def test_known_floors_of_the_default_score() -> None:
    shapes = floor(tau=-1e6).shapes
    assert (shapes["star"].boosters, shapes["star_with_back_links"].boosters) == (11, 3)
    # With a threshold of mass that all pass, a core link only adds to the score.
    for shape in shapes.values():
        assert shape.boosters is not None
        assert shape.boosters_with_core_link is not None
        assert shape.boosters - 1 <= shape.boosters_with_core_link <= shape.boosters


THRESHOLDS = [(10.0, 0.5), (10.0, 0.9), (25.0, -3.0), (40.0, 0.98), (3.3, 0.0)]


@pytest.mark.parametrize("start", [5.0, SMALL_CORE])
@pytest.mark.parametrize("thresholds", THRESHOLDS)
@pytest.mark.parametrize("shape", FARMS)
def test_one_booster_less_is_not_listed(shape: str, thresholds: tuple[float, float], start: float) -> None:
    rho, tau = thresholds
    found = floor(rho, tau, start).shapes[shape]
    for size, link in ((found.boosters, None), (found.boosters_with_core_link, start)):
        assert size is not None
        p, relative_mass = solved(shape, size, start=link)
        assert p >= rho
        assert relative_mass >= tau
        if size > SHAPES[shape].least:
            p, relative_mass = solved(shape, size - 1, start=link)
            assert p < rho or relative_mass < tau


@pytest.mark.parametrize("shape", FARMS)
def test_with_every_booster_score_and_mass_grow(shape: str) -> None:
    sizes = range(SHAPES[shape].least, 40)
    found = [solved(shape, k, start=SMALL_CORE) for k in sizes]
    assert all(b[0] > a[0] and b[1] > a[1] for a, b in itertools.pairwise(found))


def test_one_link_from_a_thin_core_hides_thousands() -> None:
    """335 M hosts, a core of 5,000: 11,400 back-linked boosters stay hidden (recomputed)."""
    found = floor(start=core_member_start(0.85, 335_000_000, 5_000)).shapes["star_with_back_links"]
    assert found.boosters == 3
    assert found.boosters_with_core_link is not None
    assert round(found.boosters_with_core_link, -2) == 11_400


def test_where_no_size_is_listed_there_is_no_floor() -> None:
    # Whatever a core link reaches is below a relative mass of 1; without one everything is at 1.
    all_mass = floor(tau=1.0).shapes
    assert all(shape.boosters_with_core_link is None for shape in all_mass.values())
    assert all(shape.boosters is not None for shape in all_mass.values())
    largest = target_score("star", LARGEST_FARM, DAMPING)
    assert floor(rho=largest).shapes["star"].boosters == LARGEST_FARM
    assert floor(rho=np.nextafter(largest, np.inf)).shapes["star"].boosters is None


def test_a_shape_has_its_least_boosters() -> None:
    found = floor(rho=0.0, tau=-1e6).shapes
    assert {name: shape.boosters for name, shape in found.items()} == {
        "star": 1,
        "star_with_back_links": 1,
        "ring": 2,
        "two_tier": 2,
        "alliance": 2,
    }


def test_as_json() -> None:
    found = floor()
    told = json.loads(json.dumps(found.as_dict(), allow_nan=False))
    assert told["shapes"]["star"] == {
        "boosters": 11,
        "boosters_with_core_link": found.shapes["star"].boosters_with_core_link,
    }
    assert (told["core_start"], told["core_link_out_links"]) == (SMALL_CORE, 10)
    assert (told["min_scaled_pagerank"], told["min_relative_mass"]) == (10.0, 0.5)
