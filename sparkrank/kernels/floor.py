"""The detection floor: the smallest farm of each shape whose target passes both thresholds.

In scaled units a target's score in an otherwise empty neighbourhood is gain · (own + feed).  ``own`` grows
with the boosters, ``gain`` is what goes around, ``feed`` is what arrives from outside; trust is
gain · (trust that arrives from outside).  So with more boosters score and relative mass only grow, and the
smallest size is found by bisection.

Star, star with back-links and alliance: common practice in the trade, no single source; also Gyöngyi &
Garcia-Molina, "Link Spam Alliances", VLDB 2005 (from memory).  Ring and two-tier follow by adding up a
tier's equations.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict, dataclass
from typing import Any

CORE_LINK_OUT_LINKS = 10
"""Out-links of the core member whose one link is abused: an ordinary page."""

LARGEST_FARM = 1_000_000
"""Boosters up to which a floor is looked for: larger farms are beyond what anybody has reported."""


@dataclass(frozen=True, kw_only=True)
class FarmShape:
    """How boosters are laid out, and what that makes of them.

    ``least`` boosters make the shape.  ``own(k, c)`` and ``gain(c)`` are of the target that is looked at:
    of several, the one with more boosters, which is also the one that the core member links to.
    """

    meaning: str
    least: int
    own: Callable[[int, float], float]
    gain: Callable[[float], float]


@dataclass(frozen=True, kw_only=True)
class ShapeFloor:
    """Least boosters of a listed farm; None where no farm of up to ``LARGEST_FARM`` would be listed."""

    boosters: int | None
    boosters_with_core_link: int | None


@dataclass(frozen=True, kw_only=True)
class DetectionFloor:
    """The floor of every shape, and the thresholds and the core for which it holds."""

    min_scaled_pagerank: float
    min_relative_mass: float
    damping: float
    core_start: float
    """J, the trust an average core member starts from, scaled."""
    shapes: dict[str, ShapeFloor]

    def as_dict(self) -> dict[str, Any]:
        """Of JSON types only."""
        limits = {"core_link_out_links": CORE_LINK_OUT_LINKS, "largest_farm": LARGEST_FARM}
        return asdict(self) | limits


def _back_and_forth(damping: float) -> float:
    return 1.0 / (1.0 - damping**2)


def _around_a_ring(damping: float) -> float:
    # B = k + c·B/2 + c·x over all boosters, x = own + feed + c·B/2.
    return 1.0 / (1.0 - damping**2 / (2.0 - damping))


def inner_boosters(boosters: int) -> int:
    """Of a two-tier farm: those that link to the target.  The others link to these."""
    return max(1, boosters // 4)


def _two_tiers(k: int, c: float) -> float:
    inner = inner_boosters(k)
    return 1.0 + c * inner + c**2 * (k - inner)


def _two_targets(k: int, c: float) -> float:
    other = k // 2
    return 1.0 + c * (k - other) + c * (1.0 + c * other)


SHAPES = {
    "star": FarmShape(
        meaning="boosters link to the target alone",
        least=1,
        own=lambda k, c: 1.0 + c * k,
        gain=lambda c: 1.0,
    ),
    "star_with_back_links": FarmShape(
        meaning="the target links back to them",
        least=1,
        own=lambda k, c: 1.0 + c * k,
        gain=_back_and_forth,
    ),
    "ring": FarmShape(
        meaning="boosters link to the next and to the target, which links back to one or more",
        least=2,
        own=lambda k, c: 1.0 + c * k / (2.0 - c),
        gain=_around_a_ring,
    ),
    "two_tier": FarmShape(
        meaning="a quarter (one at least) links to the target, which links back; the others link to those",
        least=2,
        own=_two_tiers,
        gain=_back_and_forth,
    ),
    "alliance": FarmShape(
        meaning="two targets that link to each other, each with half of the boosters",
        least=2,
        own=_two_targets,
        gain=_back_and_forth,
    ),
}
"""The shapes by name."""


def target_score(shape: str, boosters: int, damping: float, feed: float = 0.0) -> float:
    """Scaled PageRank of the target of a farm of this shape that ``feed`` reaches from outside."""
    farm = SHAPES[shape]
    return farm.gain(damping) * (farm.own(boosters, damping) + feed)


def target_trust(shape: str, damping: float, feed: float) -> float:
    """Scaled trust of the target that ``feed`` of trust reaches from outside: of no booster."""
    return SHAPES[shape].gain(damping) * feed


def detection_floor(
    *, min_scaled_pagerank: float, min_relative_mass: float, damping: float, core_start: float
) -> DetectionFloor:
    """The floor at thresholds rho and tau, without and with one link from a core member to the target.

    The member has ``CORE_LINK_OUT_LINKS`` out-links and no in-links: it hands on c/10 of PageRank and
    c·J/10 of trust, with J = ``core_start``.
    """

    def listed(shape: str, boosters: int, links: int) -> bool:
        feed = links * damping / CORE_LINK_OUT_LINKS
        score = target_score(shape, boosters, damping, feed)
        trust = target_trust(shape, damping, feed * core_start)
        return score >= min_scaled_pagerank and 1.0 - trust / score >= min_relative_mass

    def least(shape: str, links: int) -> int | None:
        return _first(lambda boosters: listed(shape, boosters, links), SHAPES[shape].least, LARGEST_FARM)

    return DetectionFloor(
        min_scaled_pagerank=min_scaled_pagerank,
        min_relative_mass=min_relative_mass,
        damping=damping,
        core_start=core_start,
        shapes={
            shape: ShapeFloor(boosters=least(shape, 0), boosters_with_core_link=least(shape, 1))
            for shape in SHAPES
        },
    )


def _first(holds: Callable[[int], bool], low: int, high: int) -> int | None:
    """The least number from ``low`` to ``high`` from which on ``holds`` is true; None where it never is."""
    if not holds(high):
        return None
    while low < high:
        middle = (low + high) // 2
        low, high = (low, middle) if holds(middle) else (middle + 1, high)
    return low
