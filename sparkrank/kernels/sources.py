"""What the direct sources of candidates look like, from structure alone.

Three questions about a source u of a candidate x, in scaled units (a host without in-links scores 1):

- How much of what u passes on ends at x?  Its *closeness*: the share of walks from u that reach x.
- How much of u's own score comes from hosts outside of all this?  Its *outside support*.
- So what does u look like: *close* (part of the same set-up as x), an *open page* (a page where anyone may
  leave a link), or *independent* (out of x's reach)?

A source that looks close need not have the same owner; a small honest site looks like that, too.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

CLOSE_ENOUGH = 0.2
"""Closeness from which a source counts in full: a booster with four decoys still has it."""
OPEN_PAGE_LINKS = 10
"""Out-links of a page that links to whoever comes by; most sites' own choice is shorter."""

# A link to a host that would hardly notice its loss is no support of it.
_OWED = 0.01
_CLEARLY_HIGHER = 2.0

CLOSE, OPEN_PAGE, INDEPENDENT = 0, 1, 2
KIND_NAMES = ("close", "open_page", "independent")
"""Words of the kinds, by number."""


class DirectLinks(NamedTuple):
    """All links into n candidates; those of candidate i are ``[offsets[i], offsets[i + 1])``.

    Shapes (m,) but for ``offsets`` (n + 1,).  Degrees count hosts; hashes are compared, never looked up.
    """

    offsets: NDArray[np.int64]
    score: NDArray[np.float64]
    """p of the source."""
    transition: NDArray[np.float64]
    """T[u, x]: the link's share of the source's out-weight."""
    closeness: NDArray[np.float64]
    """g(u, x) / (c·g(x, x)), g as in kernels.backward; T where the paths were not followed."""
    returned: NDArray[np.bool_]
    """Whether the candidate links back."""
    followed: NDArray[np.bool_]
    """Whether the source's own in-links were read."""
    in_degree: NDArray[np.int64]
    out_degree: NDArray[np.int64]
    domain: NDArray[np.int64]
    suffix: NDArray[np.int64]
    candidates: NDArray[np.int64]
    """Candidates that the source links to, this one among them."""


class CandidateArrays(NamedTuple):
    """What is known of n candidates besides their links; shapes (n,)."""

    score: NDArray[np.float64]
    """p."""
    out_degree: NDArray[np.int64]
    domain: NDArray[np.int64]
    self_support: NDArray[np.float64]
    """g(x, x): 1 without a way back to itself."""
    circulating: NDArray[np.float64]
    """Score that reaches it over exactly two links from hosts v whose walks come here:
    the sum of p_v·r_2[v]·captive weight(closeness of v), the candidate itself among them with weight 1."""
    handed_on: NDArray[np.float64]
    """Share of its out-weight that goes to candidates of higher scores that have a hundredth or more of
    theirs from it: see ``hands_on``."""
    core_reached: NDArray[np.bool_]


def captive_weight(closeness: NDArray[np.float64]) -> NDArray[np.float64]:
    """How far a host counts as one whose links lead here, in [0, 1]: min(1, closeness / CLOSE_ENOUGH)."""
    return np.minimum(1.0, closeness / CLOSE_ENOUGH)


def closeness_of(
    origin: NDArray[np.float64],
    self_support: NDArray[np.float64],
    distance: NDArray[np.integer],
    damping: float,
) -> NDArray[np.float64]:
    """Share of walks from each host that reach the target, in [0, 1].

    g(w, x) = h(w)·g(x, x), h the damped chance to hit x; c^distance takes the least discount out of it.

    Parameters
    ----------
    origin : shape (m,), g(w, x).
    self_support : shape (m,), g(x, x) of each one's target.
    distance : shape (m,), links of the shortest path.
    """
    return np.minimum(1.0, origin / (self_support * damping**distance))


def hands_on(
    transition: NDArray[np.float64],
    score: NDArray[np.float64],
    to_score: NDArray[np.float64],
    damping: float,
) -> NDArray[np.float64]:
    """What a link from one candidate to another adds to ``handed_on``, shape (m,): its T, or 0 where the
    other's score is not clearly higher or owes it less than a hundredth.

    Clearly is twice: partners of an alliance or of a link exchange seldom differ by so much, and each is
    looked at in its own right; a tier of several hosts mostly differs from the next by more.
    """
    owed = damping * score * transition >= _OWED * to_score
    return np.where((to_score >= _CLEARLY_HIGHER * score) & owed, transition, 0.0)


def owners(offsets: NDArray[np.int64]) -> NDArray[np.int64]:
    """The candidate of each link, shape (m,)."""
    return np.repeat(np.arange(len(offsets) - 1), np.diff(offsets))


def add_by_candidate(links: DirectLinks, values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Sums over each candidate's links, shape (n,), from left to right."""
    n = len(links.offsets) - 1
    return np.asarray(np.bincount(owners(links.offsets), weights=values, minlength=n), dtype=np.float64)


def contributions(links: DirectLinks, damping: float) -> NDArray[np.float64]:
    """c·p_u·T[u, x], shape (m,)."""
    return damping * links.score * links.transition


def outside_support(links: DirectLinks, candidates: CandidateArrays, damping: float) -> NDArray[np.float64]:
    """e: score that each source has from hosts whose walks do not come here, shape (m,).

    A source has p_u - 1 from its in-links.  What the candidate itself returns to it is known exactly; of
    the rest, the candidate's sources all get the same part from outside, the one that is right for their
    sum:

        outside = (behind - circulating) / (behind - returned)

    with sums of r_1[u] = c·T[u, x] times p_u - 1, and times what is returned, over the sources whose
    in-links were read.
    """
    of = owners(links.offsets)
    inherited = np.maximum(links.score - 1.0, 0.0)
    out_degree = np.maximum(candidates.out_degree, 1)
    back = np.where(links.returned, (damping * candidates.score / out_degree)[of], 0.0)
    rest = inherited - np.minimum(back, inherited)
    passed = np.where(links.followed, damping * links.transition, 0.0)
    behind = add_by_candidate(links, passed * inherited)
    unexplained = add_by_candidate(links, passed * rest)
    # Where next to nothing lies behind the sources, what rounding leaves of it says nothing.
    some = unexplained > 1e-9 * candidates.score
    share = np.divide(behind - candidates.circulating, unexplained, out=np.zeros(len(behind)), where=some)
    outside: NDArray[np.float64] = np.clip(share, 0.0, 1.0)[of] * rest
    return outside


def source_kinds(
    links: DirectLinks, candidates: CandidateArrays, support: NDArray[np.float64]
) -> NDArray[np.int8]:
    """What each source looks like: CLOSE, OPEN_PAGE or INDEPENDENT, shape (m,).

    - close: a fifth of its walks come here, or it shares the candidate's domain; and it has less from
      outside than the 1 that every host has of itself;
    - open page: not close; somebody links to it; it links to ten hosts or more, none of which is of its
      own domain's making here: another domain, and the link is not returned;
    - independent: every other.

    ``support`` is the sources' outside support.
    """
    of = owners(links.offsets)
    same_domain = links.domain == candidates.domain[of]
    close = ((links.closeness >= CLOSE_ENOUGH) | same_domain) & (support < 1.0)
    open_page = (links.in_degree > 0) & (links.out_degree >= OPEN_PAGE_LINKS)
    open_page &= ~same_domain & ~links.returned
    kinds = np.where(close, CLOSE, np.where(open_page, OPEN_PAGE, INDEPENDENT))
    return kinds.astype(np.int8)


class KindSums(NamedTuple):
    """Sums over each candidate's sources by kind; shapes (n,)."""

    close_share: NDArray[np.float64]
    """Share of what in-links contribute; the three add up to 1, and are 0 without in-links."""
    open_page_share: NDArray[np.float64]
    independent_share: NDArray[np.float64]
    outside_feed: NDArray[np.float64]
    """Scaled contributions of sources that are not close."""
    close_sources: NDArray[np.int64]
    """Number of close sources: the boosters, if it is a farm."""
    optimal_boosters: NDArray[np.float64]
    """Boosters of the back-linked farm that would do as much without the feed; NaN where none would."""


def kind_sums(
    links: DirectLinks, candidates: CandidateArrays, kinds: NDArray[np.int8], damping: float
) -> KindSums:
    """Sums by kind, and farm arithmetic on them.

    Without the feed f the score is p - g(x, x)·f, since what arrives goes round as everything does; the
    farm of that score has ((p - g(x, x)·f)·(1 - c²) - 1)/c boosters (see kernels.farms).
    """
    given = contributions(links, damping)
    total = add_by_candidate(links, given)
    sums = [add_by_candidate(links, np.where(kinds == kind, given, 0.0)) for kind in range(3)]
    shares = [np.divide(part, total, out=np.zeros(len(total)), where=total > 0) for part in sums]
    feed = sums[OPEN_PAGE] + sums[INDEPENDENT]
    left = candidates.score - candidates.self_support * feed
    boosters = (left * (1.0 - damping**2) - 1.0) / damping
    return KindSums(
        close_share=shares[CLOSE],
        open_page_share=shares[OPEN_PAGE],
        independent_share=shares[INDEPENDENT],
        outside_feed=feed,
        close_sources=add_by_candidate(links, (kinds == CLOSE).astype(np.float64)).astype(np.int64),
        optimal_boosters=np.where(boosters >= 0, boosters, np.nan),
    )
