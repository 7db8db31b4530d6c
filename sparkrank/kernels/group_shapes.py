"""What a group of candidates and their sources looks like: one word for how it is linked.

A *final* candidate hands nothing on: it is no strong source of a clearly higher candidate of the group, one
of 1.2 times its score.  What hands all that it has on and gets it back is 1/c = 1.18 times lower: final.  The
candidate of the highest score always is.  With amounts (scaled contributions) added up over all strong links
inside the group, the first rule that holds:

1. ring: a mean of closeness - T of 0.15 or more over boosters of one candidate alone: they link to one
   another, and so lead to it on longer ways, too.  A ring closed one by one has 0.37 of it, a star nothing.
2. alliance: two or more candidates, all of them final; they share boosters or support each other.
3. mixed: two or more final candidates, and others that hand on to them.
4. two_tier: others hand on to the one final candidate, or its sources have as much from hosts behind them as
   they start with (the target's link back is left out).
5. star_with_back_links: half or more comes from hosts that the target links back to.
6. star: everything else.

A word for links, never for who made them: friends, clubs and platforms are linked in the same ways.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

CIRCLING = 0.15
HALF = 0.5
CLEARLY_HIGHER = 1.2

STAR, STAR_WITH_BACK_LINKS, RING, TWO_TIER, ALLIANCE, MIXED = range(6)
SHAPE_NAMES = ("star", "star_with_back_links", "ring", "two_tier", "alliance", "mixed")
"""Words of the shapes, by number."""


class GroupSums(NamedTuple):
    """What the rules look at, of n groups; shapes (n,)."""

    candidates: NDArray[np.int64]
    final: NDArray[np.int64]
    given: NDArray[np.float64]
    """Amount over strong links inside the group; those below are parts of it (kernels.belonging)."""
    returned: NDArray[np.float64]
    started: NDArray[np.float64]
    inherited: NDArray[np.float64]
    given_to_one: NDArray[np.float64]
    """From boosters with one strong link."""
    circling: NDArray[np.float64]
    """Of these, what stands for longer ways."""


def hands_over(score: NDArray[np.float64], to_score: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Whether a strong link from one candidate to another of the group goes up, shape (m,)."""
    return to_score >= CLEARLY_HIGHER * score


def shapes(sums: GroupSums) -> NDArray[np.int8]:
    """The shape of each group, shape (n,)."""
    several = sums.final > 1
    allied = several & (sums.final == sums.candidates)
    some = sums.given > 0
    tiers = some & ((sums.candidates > 1) | (sums.inherited >= sums.started))
    found = np.select(
        [
            (sums.given_to_one > 0) & (sums.circling >= CIRCLING * sums.given_to_one),
            allied,
            several,
            tiers,
            some & (sums.returned >= HALF * sums.given),
        ],
        [RING, ALLIANCE, MIXED, TWO_TIER, STAR_WITH_BACK_LINKS],
        STAR,
    )
    return found.astype(np.int8)
