"""One sub-block of edges in jagged diagonal storage.

A section holds the edges from one range of sources into one phase of a destination stripe.  Its
destinations ("rows") are sorted by falling number of in-links; the i-th in-links of all rows that
have one lie side by side and form the i-th diagonal.  A multiplication is then a few long gathers and
contiguous additions per section instead of one short sum per destination, which in numpy costs more
than the edges themselves.  Rows longer than the last diagonal worth its call ("long rows") keep their
in-links together and are summed as runs.

Storage: Saad, "Krylov subspace methods on supercomputers", SIAM J. Sci. Stat. Comput. 1989 (from
memory).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

# A diagonal of fewer rows costs more in numpy's calls than it saves over summing runs.
MIN_DIAGONAL_ROWS = 256


class Section(NamedTuple):
    """Edges of one sub-block.  Sources are offsets into the section's source range."""

    sources: NDArray[np.integer]
    """shape (m,): the diagonals one after the other, then the long rows one after the other."""
    weights: NDArray[np.integer] | None
    """shape (m,), same order; None where every edge weighs 1."""
    rows: NDArray[np.integer]
    """shape (r,): destinations in the order of the diagonals, then those of the long rows."""
    diagonals: NDArray[np.int64]
    """shape (d,): rows of each diagonal, falling."""
    long_starts: NDArray[np.int64]
    """shape (l,): where each long row begins, counted from the first long row."""


def make_section(
    destination: NDArray[np.int64], source: NDArray[np.int64], weights: NDArray[np.int64] | None
) -> Section:
    """Packs edges that are sorted by (destination, source).

    Parameters
    ----------
    destination, source : shape (m,), m > 0; offsets into the destination and source range.
    weights : shape (m,) or None.
    """
    m = len(destination)
    is_start = np.empty(m, dtype=np.bool_)
    is_start[0] = True
    np.not_equal(destination[1:], destination[:-1], out=is_start[1:])
    starts = np.flatnonzero(is_start)
    lengths = np.diff(starts, append=m)
    n_diagonals = _worthwhile_diagonals(lengths)
    is_short = lengths <= n_diagonals
    short = np.flatnonzero(is_short)
    short = short[np.argsort(-lengths[short], kind="stable")]
    long = np.flatnonzero(~is_short)
    diagonals = _rows_per_diagonal(lengths[short], n_diagonals)
    pieces = [starts[short[:rows]] + i for i, rows in enumerate(diagonals)]
    pieces.append(np.flatnonzero(np.repeat(~is_short, lengths)))
    order = np.concatenate(pieces)
    long_starts = np.zeros(len(long), dtype=np.int64)
    np.cumsum(lengths[long][:-1], out=long_starts[1:])
    return Section(
        sources=_narrow(source[order]),
        weights=None if weights is None else weights[order],
        rows=_narrow(destination[starts[np.concatenate((short, long))]]),
        diagonals=diagonals,
        long_starts=long_starts,
    )


def section_edges(section: Section) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Destination and source offset of every edge, in storage order: the inverse of packing."""
    n_short = int(section.diagonals[0]) if len(section.diagonals) else 0
    rows = section.rows.astype(np.int64)
    n_long_edges = len(section.sources) - int(section.diagonals.sum())
    long_lengths = np.diff(section.long_starts, append=n_long_edges)
    pieces = [rows[:count] for count in section.diagonals]
    pieces.append(np.repeat(rows[n_short:], long_lengths))
    return np.concatenate(pieces), section.sources.astype(np.int64)


def _worthwhile_diagonals(lengths: NDArray[np.int64]) -> int:
    """The largest length that at least MIN_DIAGONAL_ROWS rows reach."""
    if len(lengths) < MIN_DIAGONAL_ROWS:
        return 0
    return int(np.partition(lengths, len(lengths) - MIN_DIAGONAL_ROWS)[len(lengths) - MIN_DIAGONAL_ROWS])


def _rows_per_diagonal(falling: NDArray[np.int64], n_diagonals: int) -> NDArray[np.int64]:
    if len(falling) == 0:
        return np.zeros(0, dtype=np.int64)
    longest = min(n_diagonals, int(falling[0]))
    return np.searchsorted(-falling, -np.arange(1, longest + 1), side="right").astype(np.int64)


def _narrow(values: NDArray[np.int64]) -> NDArray[np.integer]:
    """The same values in 16 bits where they fit, else in 32."""
    return values.astype(np.uint16 if values.max(initial=0) <= 0xFFFF else np.uint32)
