"""The edges of chosen rows of a section: the inverse of its storage, for a few destinations.

The multiplication reads a section whole; whoever asks who links to a few hosts reads only their edges.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.diagonals import Section


def row_edges(section: Section, rows: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Where the edges of some rows are stored.

    Parameters
    ----------
    rows : shape (n,), indices into ``section.rows``, any order.

    Returns
    -------
    counts : shape (n,), edges of each row.
    places : shape (counts.sum(),), indices into ``section.sources``, row after row as asked for.
    """
    n_short = int(section.diagonals[0]) if len(section.diagonals) else 0
    firsts = np.zeros(len(section.diagonals) + 1, dtype=np.int64)
    np.cumsum(section.diagonals, out=firsts[1:])
    n_long_edges = len(section.sources) - int(firsts[-1])
    is_short = rows < n_short
    long_row = np.where(is_short, 0, rows - n_short)
    # A short row is part of the diagonals that have more rows than its number.
    counts = np.searchsorted(-section.diagonals, -rows, side="left")
    begins = np.zeros(len(rows), dtype=np.int64)
    if len(section.long_starts):
        lengths = np.diff(section.long_starts, append=n_long_edges)
        counts = np.where(is_short, counts, lengths[long_row])
        begins = firsts[-1] + section.long_starts[long_row]
    counts = counts.astype(np.int64)
    within = ranges(counts)
    row = np.repeat(np.arange(len(rows)), counts)
    short = firsts[np.minimum(within, len(firsts) - 1)] + rows[row]
    return counts, np.where(is_short[row], short, begins[row] + within)


def ranges(counts: NDArray[np.int64]) -> NDArray[np.int64]:
    """0, 1, … counts[i] - 1 for each i, one after the other: shape (counts.sum(),)."""
    ends = np.cumsum(counts)
    return np.arange(int(ends[-1]) if len(ends) else 0) - np.repeat(ends - counts, counts)
