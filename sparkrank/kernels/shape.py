"""The shape of a candidate's support, and the order in which to look at candidates.

The question behind the order: how much of this score would be left if the hosts that exist for it were
gone, and how many hosts with a standing of their own speak for it?

    priority = s · (V·H)^(1/2) · (1 - d/5) · (1 - 4h/5) · r · log10(1 + M/(1/2 + I))

- M, the *bound amount* (scaled): what comes from hosts whose walks lead here, but for what those
  have from outside: the sum of m·c·T[u, x]·(p_u - e_u); m captive weight, e outside support.
- s, M's share of all that in-links contribute.
- I, the *breadth of independent support*: sources count by their *standing* e/(e + 1/10), from 0 for a host
  that nobody else supports to 1, and one link among d others counts 1/√d.
- V, the *variety* of sources, and H, how *alike* they are.  Draw two by contribution: V is the chance that
  they are two, low for what one strong source hands on; H that they have about as many out-links and about
  as many in-links, or are the same.  What is made has many sources of one kind.
- d, the share from the candidate's own domain: an owner's sub-hosts may well support each other.
- h, what the candidate hands on to higher candidates: they come first, it is looked at with them.
- r, 1 where the core reaches, else 0.85: what it does not reach is unknown, and whole honest communities are.

All but the logarithm are in [0, 1].  Becchetti, Castillo, Donato, Leonardi & Baeza-Yates, "Link-based
characterization and detection of web spam", AIRWeb 2006, and Andersen et al., "Robust PageRank and locally
computable spam detection features", AIRWeb 2008 (both from memory) gave the idea of looking at who supports
whom at which distance; the formula is ours.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.sources import (
    CandidateArrays,
    DirectLinks,
    add_by_candidate,
    captive_weight,
    contributions,
    outside_support,
    owners,
)

HALF_STANDING = 0.1
"""Outside support that makes half a standing: what one of nine links of a host without in-links brings."""
LEAST_BREADTH = 0.5
"""Independent support where there is none: the first host that speaks for a candidate weighs most."""
OWN_DOMAIN_LOSS = 0.2
"""What support from the own domain alone costs; little, since farms share domains, too."""
HANDED_ON_LOSS = 0.8
"""What handing all on to a clearly higher candidate costs: it is that one's review that decides."""
NOT_REACHED = 0.85
"""Unknown is not spam; nor is it proof of the contrary, and new farms are unreached as well."""
_MOST_DOUBLINGS = 64


class ShapeColumns(NamedTuple):
    """One value a candidate; shares are of what its in-links contribute, in [0, 1], 0 without in-links."""

    exclusive_share: NDArray[np.float64]
    """Mean of T[u, x]: 1 where all sources link here alone."""
    returned_share: NDArray[np.float64]
    """From sources that it links back to."""
    domain_concentration: NDArray[np.float64]
    """Herfindahl index of contributions over registrable domains: 1 where all sources have one."""
    suffix_concentration: NDArray[np.float64]
    """The same over public suffixes."""
    own_domain_share: NDArray[np.float64]
    unsupported_share: NDArray[np.float64]
    """Mean of 1 - standing: 1 where nobody else supports the sources."""
    mutual_target_share: NDArray[np.float64]
    """From sources that link to another candidate, too."""
    circling_share: NDArray[np.float64]
    """Mean of closeness - T: what comes here on longer ways, as in rings."""
    source_variety: NDArray[np.float64]
    alike_sources: NDArray[np.float64]
    bound_amount: NDArray[np.float64]
    bound_share: NDArray[np.float64]
    bound_sources: NDArray[np.float64]
    independent_breadth: NDArray[np.float64]


def concentration(
    links: DirectLinks, weights: NDArray[np.float64], key: NDArray[np.int64]
) -> NDArray[np.float64]:
    """Herfindahl index of the weights over equal keys, by candidate, shape (n,); 0 where they add up to 0."""
    of = owners(links.offsets)
    order = np.lexsort((key, of))
    of, key = of[order], key[order]
    is_first = np.ones(len(of), dtype=np.bool_)
    is_first[1:] = (of[1:] != of[:-1]) | (key[1:] != key[:-1])
    starts = np.flatnonzero(is_first)
    n = len(links.offsets) - 1
    if len(starts) == 0:
        return np.zeros(n)
    sums = np.add.reduceat(weights[order], starts)
    squares = np.bincount(of[starts], weights=sums**2, minlength=n)
    total = np.bincount(of[starts], weights=sums, minlength=n)
    return np.divide(squares, total**2, out=np.zeros(n), where=total > 0)


def degree_class(links: DirectLinks) -> NDArray[np.int64]:
    """Sources with about as many out-links and about as many in-links are of one class, shape (m,).

    A class is a doubling: 1, 2 and 3, 4 to 7 out-links and so on; none, 1 and 2, 3 to 6 in-links and so on.
    """
    # The binary exponent, not a logarithm: whole numbers to the last bit.
    outward = np.frexp(np.maximum(links.out_degree, 1).astype(np.float64))[1]
    inward = np.frexp(links.in_degree + 1.0)[1]
    classes: NDArray[np.int64] = outward.astype(np.int64) * _MOST_DOUBLINGS + inward
    return classes


def shape_columns(links: DirectLinks, candidates: CandidateArrays, damping: float) -> ShapeColumns:
    """Shape columns of n candidates from all their direct links."""
    given = contributions(links, damping)
    total = add_by_candidate(links, given)

    def share(weight: NDArray[np.float64] | NDArray[np.bool_]) -> NDArray[np.float64]:
        part = add_by_candidate(links, given * weight)
        return np.divide(part, total, out=np.zeros(len(total)), where=total > 0)

    support = outside_support(links, candidates, damping)
    captive = captive_weight(np.maximum(links.closeness, links.transition))
    own_part = np.divide(links.score - support, links.score)
    standing = support / (support + HALF_STANDING)
    testimony = 1.0 / np.sqrt(np.maximum(links.out_degree, 1))
    return ShapeColumns(
        exclusive_share=share(links.transition),
        returned_share=share(links.returned),
        domain_concentration=concentration(links, given, links.domain),
        suffix_concentration=concentration(links, given, links.suffix),
        own_domain_share=share(links.domain == candidates.domain[owners(links.offsets)]),
        unsupported_share=share(1.0 - standing),
        mutual_target_share=share(links.candidates > 1),
        circling_share=share(np.maximum(links.closeness - links.transition, 0.0)),
        source_variety=np.where(total > 0, 1.0 - concentration(links, given, np.arange(len(given))), 0.0),
        alike_sources=concentration(links, given, degree_class(links)),
        bound_amount=add_by_candidate(links, given * captive * own_part),
        bound_share=share(captive * own_part),
        bound_sources=add_by_candidate(links, captive * (1.0 - standing)),
        independent_breadth=add_by_candidate(links, standing * testimony),
    )


def priority(shape: ShapeColumns, candidates: CandidateArrays) -> NDArray[np.float64]:
    """What candidates are ordered by, shape (n,); at least 0.  The formula is the module's."""
    many_of_a_kind = np.sqrt(shape.source_variety * shape.alike_sources)
    domain = 1.0 - OWN_DOMAIN_LOSS * shape.own_domain_share
    first = 1.0 - HANDED_ON_LOSS * candidates.handed_on
    known = np.where(candidates.core_reached, 1.0, NOT_REACHED)
    amount = np.log10(1.0 + shape.bound_amount / (LEAST_BREADTH + shape.independent_breadth))
    return shape.bound_share * many_of_a_kind * domain * first * known * amount
