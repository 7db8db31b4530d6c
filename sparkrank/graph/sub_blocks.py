"""Edges from one phase into another → sections that a core's cache can hold.

The sources of a phase come with those of most out-links first.  The first sub-block has these: half of a
crawl's edges and more, from sources whose values stay in the cache and whose offsets fit 16 bits.  The
rest is cut into wide sub-blocks, since each row of each section costs a scattered addition.  A sub-block's
edges are cut again by rows, which costs no addition, so that what a multiplication gathers stays in the
cache, too.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.diagonals import Section, make_section

HOT_SOURCES = 1 << 16
"""Sources of most out-links, whose offsets fit 16 bits: 0.5 MB a column."""

# Sources of the other sub-blocks: 2 MB a column, a core's whole cache.
_WIDE_SOURCES = 1 << 18
# A sub-block of fewer edges costs more in numpy's calls than its narrowness saves.
_SUB_BLOCK_EDGES = 1 << 17
# Edges of a section: with 8 bytes each they are gathered inside the cache.
_SECTION_EDGES = 1 << 18


def cut_sections(
    destination: NDArray[np.int64],
    source: NDArray[np.int64],
    weights: NDArray[np.int64] | None,
    n_sources: int,
) -> Iterator[tuple[int, int, Section]]:
    """First source, number of sources and the section, by sub-block, then by destination.

    Parameters
    ----------
    destination, source : shape (m,), m > 0: positions in their phases, in any order.
    weights : shape (m,) or None.
    n_sources : hosts of the sources' phase.
    """
    starts = _sub_block_starts(source, n_sources)
    spans = np.diff(starts)
    offset_bits = int(spans.max() - 1).bit_length()
    row_bits = int(destination.max()).bit_length()
    block = np.zeros(1, dtype=np.int64)
    if len(starts) > 2:
        block = np.searchsorted(starts[1:-1], source, side="right")
    # Below 2^62: 28 bits a phase's rows, and not more than one bit above 28 for sub-block and offset.
    key = ((block << row_bits | destination) << offset_bits) | (source - starts[block])
    if weights is None:
        key.sort()
    else:
        order = np.argsort(key, kind="stable")
        key, weights = key[order], weights[order]
    offset = key & ((1 << offset_bits) - 1)
    key >>= offset_bits
    destination = key & ((1 << row_bits) - 1)
    bounds = np.searchsorted(key, np.arange(len(starts), dtype=np.int64) << row_bits).tolist()
    for number, (low, high) in enumerate(pairwise(bounds)):
        for part in _row_parts(destination, low, high):
            chosen = None if weights is None else weights[part]
            section = make_section(destination[part], offset[part], chosen)
            yield int(starts[number]), int(spans[number]), section


def _sub_block_starts(source: NDArray[np.int64], n_sources: int) -> NDArray[np.int64]:
    """Where sub-blocks begin, and the end of the last: a function of the number of edges alone."""
    hot = min(HOT_SOURCES, n_sources)
    n_hot_edges = int(np.count_nonzero(source < hot))
    n_rest_edges = len(source) - n_hot_edges
    rest = n_sources - hot
    if rest == 0 or min(n_hot_edges, n_rest_edges) < _SUB_BLOCK_EDGES:
        # Not worth a sub-block of its own, or nearly no edges beside it.
        hot, n_rest_edges, rest = 0, len(source), n_sources
    n_blocks = max(1, min(-(-rest // _WIDE_SOURCES), n_rest_edges // _SUB_BLOCK_EDGES))
    cuts = hot + np.arange(n_blocks + 1, dtype=np.int64) * rest // n_blocks
    return np.concatenate(([0], cuts)) if hot else cuts


def _row_parts(destination: NDArray[np.int64], low: int, high: int) -> Iterator[slice]:
    """Parts of whole rows; a row with more edges than a part should have is a part with what fits."""
    n_parts = -(-(high - low) // _SECTION_EDGES)
    first = low
    for part in range(1, n_parts + 1):
        end = high
        if part < n_parts:
            wanted = low + (high - low) * part // n_parts
            end = int(np.searchsorted(destination[low:high], destination[wanted])) + low
        if end > first:
            yield slice(first, end)
            first = end
