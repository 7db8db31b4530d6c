"""Positions of hashed ids in a sorted array.

Host ids are uniform 64-bit hashes, so the position of an id is known up to a few places from its
value alone: a table over equal id ranges replaces the binary search.  Ids forged to crowd one range
fall back to the binary search; the answer is the same.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

# Beyond this many ids in one range the linear walk would lose to a binary search.  Uniform hashes
# put about one id in a range and, at 10^9 ids, hardly ever more than a dozen.
_MAX_CROWDED = 32


def find_ids(sorted_ids: NDArray[np.int64], wanted: NDArray[np.int64]) -> NDArray[np.int64]:
    """Position of each wanted id.

    Parameters
    ----------
    sorted_ids : shape (n,), strictly increasing.
    wanted : shape (m,), any order.

    Returns
    -------
    shape (m,): position in ``sorted_ids``, -1 where the id is not there.
    """
    n = len(sorted_ids)
    if n == 0 or len(wanted) == 0:
        return np.full(len(wanted), -1, dtype=np.int64)
    position = _by_ranges(sorted_ids, wanted)
    if position is None:
        position = np.searchsorted(sorted_ids, wanted)
    np.minimum(position, n - 1, out=position)
    position[sorted_ids[position] != wanted] = -1
    return position


def _by_ranges(sorted_ids: NDArray[np.int64], wanted: NDArray[np.int64]) -> NDArray[np.int64] | None:
    """First position with an id not below the wanted one, or None when the ids crowd."""
    low, high = int(sorted_ids[0]), int(sorted_ids[-1])
    # n to 2n ranges of 2**shift ids each cover [low, high].
    shift = max(0, (high - low).bit_length() - len(sorted_ids).bit_length())
    n_ranges = ((high - low) >> shift) + 1
    in_range = np.bincount(_range_of(sorted_ids, low, shift), minlength=n_ranges)
    if in_range.max() > _MAX_CROWDED:
        return None
    first = np.zeros(n_ranges + 1, dtype=np.int64)
    np.cumsum(in_range, out=first[1:])
    inside = np.clip(wanted, low, high)
    position = first[_range_of(inside, low, shift)]
    # Walk on where the id at the position is still too small; the range bounds the walk.
    walking = np.flatnonzero(sorted_ids[position] < inside)
    while len(walking):
        position[walking] += 1
        walking = walking[sorted_ids[position[walking]] < inside[walking]]
    return position


def _range_of(ids: NDArray[np.int64], low: int, shift: int) -> NDArray[np.int64]:
    # The difference of two int64 fits uint64; wrapping subtraction gives it exactly.
    offset = ids.view(np.uint64) - np.uint64(low % 2**64)
    return (offset >> np.uint64(shift)).view(np.int64)
