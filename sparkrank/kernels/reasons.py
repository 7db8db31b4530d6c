"""What put a candidate where it is in the order, and what else its shape may be, as marks for fixed texts.

The texts are fixed, without numbers, so that they can be filtered by; each is written once, here.  None says
who somebody is: a reason is a fact about links, a caution names an honest place that looks the same.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.shape import ShapeColumns
from sparkrank.kernels.sources import CandidateArrays, KindSums

REASONS = (
    "nearly all of its score comes from hosts whose links lead back here, little from elsewhere",
    "it links back to most of its support",
    "most of its support comes from hosts that support other candidates, too",
    "most of its support comes from one registrable domain that is not its own",
    "links of the kind that anyone may leave on a page add to its support",
    "its sources are alike: about as many links out, as many in",
    "next to no host with support of its own links here",
    "most of its support comes from hosts that nobody else supports",
)
"""In the order in which they are told: what holds of most farms and says little more comes last."""
MOST_REASONS = 3

CAUTIONS = (
    "its own domain carries much of its score: may be a platform, a portal or one owner's sub-hosts",
    "many small hosts link here without a link in return: may be credited in their footers, or simply liked",
    "its sources also link to each other: may be the page of a hobby ring or a club",
    "it links to many hosts, some of which link back: may be a directory or a portal",
    "hosts with support of their own link here, too: may be an honest place with many small friends",
)

_MOST = 0.5
_NEARLY_ALL = 0.9
_NEXT_TO_NO_BREADTH = 1.0
_SOME_PAGES = 0.02
_OWN_DOMAIN = 0.3
_HARDLY_RETURNED = 0.1
_MANY_DOMAINS = 0.1
_CIRCLING = 0.15
_MANY_LINKS = 20
_SOME_BREADTH = 3.0


class Marks(NamedTuple):
    """Which texts hold for each candidate; the second index is the text's place."""

    reasons: NDArray[np.bool_]
    """(n, len(REASONS)), at most MOST_REASONS a row: the first that hold."""
    cautions: NDArray[np.bool_]
    """(n, len(CAUTIONS))."""


def marks(shape: ShapeColumns, candidates: CandidateArrays, kinds: KindSums) -> Marks:
    """Reasons and cautions of n candidates.

    A candidate low in the order may have no reason at all: none is made up.
    """
    hold = np.stack(
        [
            shape.bound_share >= _NEARLY_ALL,
            shape.returned_share >= _MOST,
            shape.mutual_target_share >= _MOST,
            # One strong source has one domain without any design.
            (shape.domain_concentration >= _MOST)
            & (shape.own_domain_share < _OWN_DOMAIN)
            & (shape.source_variety >= _MOST),
            kinds.open_page_share >= _SOME_PAGES,
            shape.alike_sources * shape.source_variety >= _MOST,
            (shape.independent_breadth < _NEXT_TO_NO_BREADTH) & (shape.bound_share > 0),
            shape.unsupported_share >= _NEARLY_ALL,
        ],
        axis=1,
    )
    first = np.cumsum(hold, axis=1) <= MOST_REASONS
    cautions = np.stack(
        [
            shape.own_domain_share >= _OWN_DOMAIN,
            (shape.returned_share < _HARDLY_RETURNED)
            & (shape.domain_concentration < _MANY_DOMAINS)
            & (shape.bound_share > 0),
            shape.circling_share >= _CIRCLING,
            (candidates.out_degree >= _MANY_LINKS) & (shape.returned_share >= _HARDLY_RETURNED),
            shape.independent_breadth >= _SOME_BREADTH,
        ],
        axis=1,
    )
    return Marks(reasons=hold & first, cautions=cautions)
