"""Edges of one sub-block in the shapes that its storage tells apart."""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.diagonals import MIN_DIAGONAL_ROWS

N_SOURCES = 5_000


class Sorted(NamedTuple):
    """Distinct edges sorted by (destination, source); shapes (m,)."""

    destination: NDArray[np.int64]
    source: NDArray[np.int64]
    weights: NDArray[np.int64] | None


def random_rows(
    lengths: NDArray[np.int64], *, weighted: bool = False, seed: int = 0, n_sources: int = N_SOURCES
) -> Sorted:
    """A row of each length, at destinations with gaps between them, from random distinct sources."""
    rng = np.random.default_rng(seed)
    rows = np.cumsum(rng.integers(1, 4, len(lengths)))
    source = np.concatenate([np.sort(rng.choice(n_sources, length, replace=False)) for length in lengths])
    weights = rng.integers(1, 1_000, len(source)) if weighted else None
    return Sorted(np.repeat(rows, lengths), source, weights)


def _mixed(weighted: bool) -> Sorted:
    """Most rows short, a few of thousands of in-links: the shape of a crawl."""
    rng = np.random.default_rng(3)
    lengths = np.minimum(rng.zipf(1.8, 3_000), 400)
    lengths[rng.choice(3_000, 5, replace=False)] = [2_000, 3_000, 4_000, 4_999, N_SOURCES]
    return random_rows(lengths, weighted=weighted)


def _hubs_beside_a_crowd(weighted: bool) -> Sorted:
    """One row fewer than a diagonal is worth, all of them long, then one somewhat shorter."""
    lengths = np.concatenate(([300] * (MIN_DIAGONAL_ROWS - 1), [40], [1] * 500))
    return random_rows(lengths, weighted=weighted)


def _equal(n_rows: int, length: int) -> Callable[[bool], Sorted]:
    return lambda weighted: random_rows(np.full(n_rows, length), weighted=weighted)


SHAPES: dict[str, Callable[[bool], Sorted]] = {
    "one edge": _equal(1, 1),
    "one long row": _equal(1, 4_000),
    "one row less than a diagonal": _equal(MIN_DIAGONAL_ROWS - 1, 3),
    "exactly a diagonal": _equal(MIN_DIAGONAL_ROWS, 3),
    "one row more than a diagonal": _equal(MIN_DIAGONAL_ROWS + 1, 3),
    "single in-links": _equal(2_000, 1),
    "falling lengths": lambda weighted: random_rows(np.arange(1, 300), weighted=weighted),
    "hubs beside a crowd": _hubs_beside_a_crowd,
    "crawl": _mixed,
}
