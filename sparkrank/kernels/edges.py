"""The edges of one tile as packed 64-bit keys.

A tile holds the edges from a group of source stripes into one destination stripe.  A key is
(source stripe in the group, destination, source), so that sorted keys are grouped by source stripe,
then by destination, then by source; duplicates are neighbours.  One ``np.sort`` of int64 is several
times faster than an ``argsort`` with gathers.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

_HOST_BITS = 28  # hosts a stripe
_STRIPE_BITS = 63 - 2 * _HOST_BITS  # stripes a group; the sign bit stays clear
MAX_STRIPE_HOSTS = 1 << _HOST_BITS
MAX_GROUP_STRIPES = 1 << _STRIPE_BITS
_HOST_MASK = MAX_STRIPE_HOSTS - 1


class Edges(NamedTuple):
    """Distinct edges of one tile, sorted; shapes (m,)."""

    keys: NDArray[np.int64]
    weights: NDArray[np.int64] | None
    """Page links of each edge; None where every edge weighs 1."""


def pack_keys(
    stripe: NDArray[np.int64] | int, destination: NDArray[np.int64] | int, source: NDArray[np.int64] | int
) -> NDArray[np.int64]:
    """Keys of edges from (source stripe in the group, source in the stripe) to destination.

    Keys of parts, with 0 for what is left out, add up.
    """
    return np.asarray((stripe << (2 * _HOST_BITS)) | (destination << _HOST_BITS) | source)


def destinations(keys: NDArray[np.int64]) -> NDArray[np.int64]:
    """Destination of each key, its position in the destination stripe."""
    return (keys >> _HOST_BITS) & _HOST_MASK


def sources(keys: NDArray[np.int64]) -> NDArray[np.int64]:
    """Source of each key, its position in its source stripe."""
    return keys & _HOST_MASK


def split_by_stripe(keys: NDArray[np.int64], n_stripes: int) -> NDArray[np.int64]:
    """Where the keys of each source stripe of the group begin: shape (n_stripes + 1,)."""
    firsts = np.arange(n_stripes, dtype=np.int64) << (2 * _HOST_BITS)
    # The end is no key to search for: behind MAX_GROUP_STRIPES it would need the sign bit.
    return np.append(np.searchsorted(keys, firsts), len(keys))


def merge_duplicates(keys: NDArray[np.int64], weights: NDArray[np.int64] | None) -> Edges:
    """Sorts edges and merges those of the same pair; weights add up.

    ``keys`` may be changed in place.
    """
    if len(keys) == 0:
        return Edges(keys, weights)
    if weights is None:
        keys.sort()
        return Edges(keys[_run_starts(keys)], None)
    order = np.argsort(keys, kind="stable")
    keys = keys[order]
    starts = np.flatnonzero(_run_starts(keys))
    return Edges(keys[starts], np.add.reduceat(weights[order], starts))


def out_totals(
    source: NDArray[np.int64], weights: NDArray[np.int64] | None, n_hosts: int
) -> NDArray[np.int64]:
    """Total edge weight out of each host of one stripe within the tile: shape (n_hosts,)."""
    if weights is None:
        return np.bincount(source, minlength=n_hosts).astype(np.int64, copy=False)
    # Not bincount: it would add the weights as float64.
    totals = np.zeros(n_hosts, dtype=np.int64)
    np.add.at(totals, source, weights)
    return totals


def _run_starts(values: NDArray[np.int64]) -> NDArray[np.bool_]:
    starts = np.empty(len(values), dtype=np.bool_)
    starts[0] = True
    np.not_equal(values[1:], values[:-1], out=starts[1:])
    return starts
