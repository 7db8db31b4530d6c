"""Connected components of an undirected graph by alternating stars, on flat arrays of edges.

Two steps take turns until the edges are stars around the least host of each component:

- large star: every host u ties its larger neighbours to the least of its neighbours and itself;
- small star: every host u ties itself and its smaller neighbours to the least of these.

Both keep components as they are, and both look at one host's edges alone.  So the hosts can be divided among
any number of tasks: a task needs the edges of its hosts, and hands each new edge to the tasks of its ends.

Kiveris, Lattanzi, Mirrokni, Rastogi & Vassilvitskii, "Connected Components in MapReduce and Beyond",
SoCC 2014 (from memory).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray


class Edges(NamedTuple):
    """Undirected edges, each once, by their larger end, then the smaller; shapes (m,)."""

    high: NDArray[np.int64]
    """The larger end, below 2^31."""
    low: NDArray[np.int64]


class Ends(NamedTuple):
    """Edges as seen from one end, by host, then neighbour, each once; shapes (m,)."""

    host: NDArray[np.int64]
    neighbour: NDArray[np.int64]


_END_BITS = 32
_END_MASK = (1 << _END_BITS) - 1


def _distinct(first: NDArray[np.int64], second: NDArray[np.int64]) -> tuple[NDArray[np.int64], ...]:
    keys = np.unique((first << _END_BITS) | second)
    return keys >> _END_BITS, keys & _END_MASK


def distinct_edges(one: NDArray[np.int64], other: NDArray[np.int64]) -> Edges:
    """Edges from pairs in any order; repeats count once, loops not at all."""
    apart = one != other
    one, other = one[apart], other[apart]
    return Edges(*_distinct(np.maximum(one, other), np.minimum(one, other)))


def distinct_ends(host: NDArray[np.int64], neighbour: NDArray[np.int64]) -> Ends:
    """Ends in any order, as several tasks may have made them; repeats count once."""
    return Ends(*_distinct(host, neighbour))


def both_ends(edges: Edges) -> Ends:
    """Each edge from both of its ends."""
    return distinct_ends(np.concatenate((edges.high, edges.low)), np.concatenate((edges.low, edges.high)))


def _least(host: NDArray[np.int64], neighbour: NDArray[np.int64]) -> NDArray[np.int64]:
    """The least neighbour of each row's host; rows are by host, then neighbour."""
    is_first = np.ones(len(host), dtype=np.bool_)
    np.not_equal(host[1:], host[:-1], out=is_first[1:])
    starts = np.flatnonzero(is_first)
    return np.repeat(neighbour[starts], np.diff(starts, append=len(host)))


def large_star(ends: Ends) -> Edges:
    """New edges from all edges of some hosts."""
    least = np.minimum(_least(*ends), ends.host)
    larger = ends.neighbour > ends.host
    return distinct_edges(ends.neighbour[larger], least[larger])


def small_star(edges: Edges) -> Edges:
    """New edges from the edges of some hosts to smaller ones."""
    least = _least(*edges)
    return distinct_edges(np.concatenate((edges.high, edges.low)), np.concatenate((least, least)))


def are_stars(ends: Ends) -> bool:
    """Whether each of the hosts has larger neighbours alone, or one neighbour, a smaller one.

    Where it holds of all hosts, the edges are stars around their least hosts.
    """
    host, neighbour = ends
    count = np.unique(host, return_counts=True)[1]
    count = np.repeat(count, count)
    return bool(np.all((neighbour > host) | (count == 1)))


def stars(edges: Edges) -> Edges:
    """The edges of the components' stars: every host but the least of a component, with the least."""
    while not are_stars(ends := both_ends(edges)):
        edges = small_star(large_star(ends))
    return edges


def labels(n: int, star_edges: Edges) -> NDArray[np.int64]:
    """The least host of each one's component, shape (n,); hosts without edges are their own."""
    found = np.arange(n)
    found[star_edges.high] = star_edges.low
    return found
