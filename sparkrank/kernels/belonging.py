"""Which hosts belong together, from the direct links of candidates.

A link is *strong* if its source gives a large part of what it has to the candidate and looks close
(kernels.sources): a tenth of its out-weight or more.  So no host has more than ten strong links, and a
directory has none, however many candidates it links to; nor have members of the good core.  A candidate whose
strong links bring less than a quarter of what its in-links give has none: they are not what its score is made
of.  So it is with a group: where its members, who are in no other, bring its candidates less, it is none.

What holds two candidates together is one of two things:

- one is a strong source of the other and gives it a hundredth or more of what its in-links give;
- strong sources of both give a quarter or more of what in-links give, to each of the two.

One shared booster, or a popular host that the sources of many link to, holds nothing together.  A source that
is no candidate belongs to the one candidate to which it gives the largest part of what it has.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.rows import ranges
from sparkrank.kernels.sources import (
    CLOSE,
    CandidateArrays,
    DirectLinks,
    add_by_candidate,
    contributions,
    owners,
)

LEAST_HANDED = 0.1
"""Part of a source's out-weight from which its link is strong: a booster with nine decoys still has it."""
LEAST_STRONG = 0.25
"""Part of what in-links give that strong links bring at least, or they count for nothing: everybody has some
small sources, and a farm's decoys are among them."""
LEAST_OWED = 0.01
"""Part that one candidate gives another at least, or the other would hardly notice its loss."""
LEAST_SHARED = 0.25
"""Part that comes from sources that two candidates share, for each of them: by chance it is far less."""


class StrongLinks(NamedTuple):
    """Strong links; shapes (m,).  Amounts are scaled contributions, c·p_u·T[u, x]."""

    target: NDArray[np.int64]
    """Number of the candidate."""
    source: NDArray[np.int64]
    """Number of the source among all hosts."""
    transition: NDArray[np.float64]
    given: NDArray[np.float64]
    of_all: NDArray[np.float64]
    """given, by what all in-links of the candidate give."""
    returned: NDArray[np.float64]
    """given where the candidate links back, else 0; as those below, a part of given."""
    circling: NDArray[np.float64]
    """given times closeness - T: for walks of its source that arrive here on longer ways."""
    started: NDArray[np.float64]
    """The part that the source starts with, 1 of its score."""
    inherited: NDArray[np.float64]
    """The part that it has from in-links other than the candidate's own link back."""


class SharedSources(NamedTuple):
    """Pairs of candidates that a source has strong links to; shapes (m,)."""

    first: NDArray[np.int64]
    second: NDArray[np.int64]
    """Above the first."""
    source: NDArray[np.int64]
    of_first: NDArray[np.float64]
    """What the source gives the first, by what all of its in-links give."""
    of_second: NDArray[np.float64]


def strong_links(
    links: DirectLinks,
    source: NDArray[np.int64],
    is_core: NDArray[np.bool_],
    kinds: NDArray[np.int8],
    candidates: CandidateArrays,
    damping: float,
) -> StrongLinks:
    """The strong ones of all links into n candidates, which are numbered from 0.

    Parameters
    ----------
    source : shape (m,), number of each link's source.
    is_core : shape (m,), whether it is a member of the good core: reviewed, and a booster of nobody.
    kinds : shape (m,), what each looks like (kernels.sources).
    """
    of = owners(links.offsets)
    given = contributions(links, damping)
    total = add_by_candidate(links, given)
    strong = (kinds == CLOSE) & (links.transition >= LEAST_HANDED) & ~is_core
    enough = add_by_candidate(links, np.where(strong, given, 0.0)) >= LEAST_STRONG * total
    at = np.flatnonzero(strong & enough[of])
    of, given, score = of[at], given[at], links.score[at]
    returned = links.returned[at]
    back = np.where(returned, damping * candidates.score[of] / np.maximum(candidates.out_degree[of], 1), 0.0)
    longer = np.maximum(links.closeness[at] - links.transition[at], 0.0)
    return StrongLinks(
        target=of,
        source=source[at],
        transition=links.transition[at],
        given=given,
        of_all=given / total[of],
        returned=np.where(returned, given, 0.0),
        circling=given * longer,
        started=given / score,
        inherited=given * np.maximum(score - 1.0 - back, 0.0) / score,
    )


class Homes(NamedTuple):
    """Where sources belong; shapes (n,)."""

    source: NDArray[np.int64]
    """Each once, rising."""
    home: NDArray[np.int64]
    """The candidate to which it gives the largest part of what it has; where parts are equal the one that
    owes it most, then the first."""
    links: NDArray[np.int64]
    """Its strong links."""


def homes(links: StrongLinks) -> Homes:
    """Where the sources of strong links belong; all links of a source must be there."""
    order = np.lexsort((links.target, -links.of_all, -links.transition, links.source))
    source = links.source[order]
    is_first = np.ones(len(source), dtype=np.bool_)
    np.not_equal(source[1:], source[:-1], out=is_first[1:])
    starts = np.flatnonzero(is_first)
    counts = np.diff(starts, append=len(source))
    return Homes(source[starts], links.target[order][starts], counts)


def shared_sources(links: StrongLinks) -> SharedSources:
    """Every pair of strong links of one source: at most 45 a source, since it has ten links at most."""
    order = np.lexsort((links.target, links.source))
    source, target, of_all = links.source[order], links.target[order], links.of_all[order]
    last = np.searchsorted(source, source, side="right")
    after = last - np.arange(len(source)) - 1
    one = np.repeat(np.arange(len(source)), after)
    other = one + 1 + ranges(after)
    return SharedSources(target[one], target[other], source[one], of_all[one], of_all[other])


def held_by_sources(shared: SharedSources) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Pairs of candidates that share enough; all sources of a pair must be there.  Sums go by source."""
    order = np.lexsort((shared.source, shared.second, shared.first))
    first, second = shared.first[order], shared.second[order]
    is_first = np.ones(len(first), dtype=np.bool_)
    is_first[1:] = (first[1:] != first[:-1]) | (second[1:] != second[:-1])
    starts = np.flatnonzero(is_first)
    if len(starts) == 0:
        return first, second
    least = np.minimum(
        np.add.reduceat(shared.of_first[order], starts), np.add.reduceat(shared.of_second[order], starts)
    )
    held = starts[least >= LEAST_SHARED]
    return first[held], second[held]


def held_by_links(links: StrongLinks, own: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Source and target, as candidates, of strong links between candidates that the target owes enough to.

    ``own`` is the number of each link's source as a candidate, -1 where it is none: shape (m,).
    """
    held = np.flatnonzero((own >= 0) & (links.of_all >= LEAST_OWED))
    return own[held], links.target[held]
