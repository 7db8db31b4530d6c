"""Absolute and relative spam mass, and how far the relative one depends on single slices of the core.

With scaled PageRank p and trust t, absolute mass is p - t and relative mass 1 - t/p (Gyöngyi, Berkhin,
Garcia-Molina & Pedersen, "Link Spam Detection Based on Mass Estimation", VLDB 2006; from memory).
Known spam gives a lower bound of the absolute mass; it raises, it never lowers.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray


class Masses(NamedTuple):
    """Shapes (n,), scaled units; ``low`` and ``high`` are None with fewer than two slices."""

    trust: NDArray[np.float64]
    absolute: NDArray[np.float64]
    relative: NDArray[np.float64]
    low: NDArray[np.float64] | None
    high: NDArray[np.float64] | None


def spam_mass(
    pagerank: NDArray[np.float64],
    slice_trust: NDArray[np.float64],
    slice_shares: tuple[float, ...],
    known_spam_mass: NDArray[np.float64] | None,
) -> Masses:
    """Masses of n hosts.

    Parameters
    ----------
    pagerank : shape (n,), scaled, > 0.
    slice_trust : shape (m, n), scaled; trust that starts from each slice.
    slice_shares : share of the good share that starts from each slice, adding up to 1.
    known_spam_mass : shape (n,) scaled, or None without a list.

    Notes
    -----
    Without slice i the others take its share over, so the trust is the rest divided by their shares:
    linearity, no further solve.  ``low`` and ``high`` range over the whole core and each core without
    one slice.
    """
    m = len(slice_trust)
    trust = _left_sum(slice_trust, len(pagerank))
    absolute, relative = _masses(pagerank, trust, known_spam_mass)
    if m < 2:
        return Masses(trust, absolute, relative, None, None)
    low, high = relative.copy(), relative.copy()
    for i in range(m):
        # Summed anew, not subtracted: where the others give nothing, nothing is left, not a rounding.
        rest = _left_sum(np.delete(slice_trust, i, axis=0), len(pagerank))
        # So are their shares: beside a slice of nearly everything, 1 - share has no digits left.
        rest_share = sum(slice_shares[:i]) + sum(slice_shares[i + 1 :])
        _, without = _masses(pagerank, rest / rest_share, known_spam_mass)
        np.minimum(low, without, out=low)
        np.maximum(high, without, out=high)
    return Masses(trust, absolute, relative, low, high)


def _left_sum(rows: NDArray[np.float64], n: int) -> NDArray[np.float64]:
    total = np.zeros(n)
    for row in rows:
        total += row
    return total


def _masses(
    pagerank: NDArray[np.float64], trust: NDArray[np.float64], known: NDArray[np.float64] | None
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    absolute = pagerank - trust
    if known is None:
        return absolute, 1.0 - trust / pagerank
    np.maximum(absolute, known, out=absolute)
    return absolute, absolute / pagerank
