"""Whose teleport makes up a host's score: paths followed backwards from the host.

In scaled units p = sum over d of (cT')^d 1, so g(u, x) = [(I - cT)^-1]_ux is what u's own teleport gives
x over all paths, and the sum over u of g(u, x) is p_x.  Step by step:

    r_0 = e_x;   g += r_d;   r_{d+1}[w] = sum over links w -> u of c·T[w, u]·r_d[u]

What has not been followed is known exactly without following it: p_w·r_d[w] is all that reaches x through
w from there on, r_d[w] of it w's own teleport.  A host is followed only if what lies behind it,
(p_w - 1)·r_d[w], is worth the reading of its in-links; so no step reads more than 1/worth links a target.

Andersen, Borgs, Chayes, Hopcroft, Mirrokni & Teng, "Local computation of PageRank contributions", 2007
(from memory); the threshold a link is ours, and p makes the remainder exact.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.rows import ranges

_HOST_BITS = 32
_HOST_MASK = (1 << _HOST_BITS) - 1


class Residuals(NamedTuple):
    """r of some (target, host) pairs, sorted by target, then host, each pair once; shapes (m,)."""

    target: NDArray[np.int64]
    """Number of the target."""
    host: NDArray[np.int64]
    """Position of the host, below 2^32."""
    value: NDArray[np.float64]


def pair_keys(target: NDArray[np.integer], host: NDArray[np.integer]) -> NDArray[np.int64]:
    """One number a pair, in the order of the pairs."""
    return (target.astype(np.int64) << _HOST_BITS) | host.astype(np.int64)


def split_keys(keys: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Target and host of each key."""
    return keys >> _HOST_BITS, keys & _HOST_MASK


def add_up(
    target: NDArray[np.integer], host: NDArray[np.integer], value: NDArray[np.float64]
) -> tuple[Residuals, NDArray[np.int64]]:
    """Adds up what comes for the same pair, in the order given; and where each pair came first.

    All shapes (n,); the second result has the shape of the residuals.
    """
    keys = pair_keys(target, host)
    order = np.argsort(keys, kind="stable")
    keys = keys[order]
    is_first = np.ones(len(keys), dtype=np.bool_)
    np.not_equal(keys[1:], keys[:-1], out=is_first[1:])
    starts = np.flatnonzero(is_first)
    sums = np.add.reduceat(value[order], starts) if len(starts) else np.zeros(0)
    return Residuals(*split_keys(keys[starts]), sums), order[starts]


def worth_following(
    behind: NDArray[np.float64],
    target_score: NDArray[np.float64],
    in_links: NDArray[np.integer],
    least_share_a_link: float,
) -> NDArray[np.bool_]:
    """Which hosts' in-links are read next: where an average in-link brings enough of the target's score.

    Parameters
    ----------
    behind : shape (m,), (p_w - 1)·r: what comes through the host but not from it.
    target_score : shape (m,), p of each pair's target.
    in_links : shape (m,), in-links of the host.
    """
    return (in_links > 0) & (behind >= least_share_a_link * in_links * target_score)


def follow(
    residuals: Residuals,
    slot: NDArray[np.int64],
    offsets: NDArray[np.int64],
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Follows every residual along the in-links of its host.

    Parameters
    ----------
    slot : shape (m,), where the in-links of each residual's host are: row ``slot[i]`` of ``offsets``.
    offsets : shape (rows + 1,), in-links of row j are ``[offsets[j], offsets[j + 1])`` of a list.

    Returns
    -------
    residual : shape (n,), index of the residual that is followed.
    link : shape (n,), index into the list of in-links.
    """
    counts = np.diff(offsets)[slot]
    residual = np.repeat(np.arange(len(residuals.target)), counts)
    return residual, np.repeat(offsets[:-1][slot], counts) + ranges(counts)
