"""The multiplication: pull, out[j, v] += sum over edges u -> v of weight(u, v) * flow[j, u].

``flow`` is the state already divided by the out-weight and multiplied by the damping, so that one
step of  x = c * T' x + (1 - c) * v  is: out = (1 - c) * v, then one call a section.  Columns are
contiguous; each source range fits the core's cache.  Sums have a fixed order: sections as stored,
diagonals as stored, one addition a row and section.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.diagonals import Section


def accumulate(section: Section, flow: NDArray[np.float64], out: NDArray[np.float64]) -> None:
    """Adds one section's contributions to ``out``.

    Parameters
    ----------
    section : edges of one sub-block.
    flow : shape (k, n_sources), the section's source range.
    out : shape (k, n_rows), the destination range; changed in place.
    """
    # numpy gathers by machine words only: widen the stored offsets once for all columns.
    sources = section.sources.astype(np.intp)
    rows = section.rows.astype(np.intp)
    n_short = int(section.diagonals[0]) if len(section.diagonals) else 0
    first_long = int(section.diagonals.sum())
    gathered = np.empty(len(sources), dtype=np.float64)
    for j in range(len(out)):
        # "clip" skips numpy's second pass over the offsets; they are in range by construction.
        flow[j].take(sources, out=gathered, mode="clip")
        if section.weights is not None:
            np.multiply(gathered, section.weights, out=gathered)
        if n_short:
            _add_at(out[j], rows[:n_short], _sum_diagonals(gathered, section.diagonals))
        if len(section.long_starts):
            _add_at(out[j], rows[n_short:], np.add.reduceat(gathered[first_long:], section.long_starts))


def _sum_diagonals(gathered: NDArray[np.float64], diagonals: NDArray[np.int64]) -> NDArray[np.float64]:
    """Row sums, added up in place in the first diagonal: shape (rows of the first diagonal,)."""
    sums = gathered[: diagonals[0]]
    start = int(diagonals[0])
    for count in diagonals[1:].tolist():
        sums[:count] += gathered[start : start + count]
        start += count
    return sums


def _add_at(column: NDArray[np.float64], rows: NDArray[np.intp], sums: NDArray[np.float64]) -> None:
    """Adds the sums to their rows, each row once."""
    there = column.take(rows, mode="clip")
    there += sums
    column[rows] = there
