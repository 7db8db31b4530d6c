"""Reduced rank extrapolation: a better state from the last few plain steps.

From states x_0 … x_{m+1} of a linear iteration, the combination of x_1 … x_{m+1} with weights that sum
to 1 and make the combined residual smallest.  It takes out the few slow modes that make a plain
iteration crawl, such as pairs of hosts that link only to each other.  Any state is a fair start for
the next plain step, whose change bounds the error as ever.

Sidi, "Vector extrapolation methods with applications to solution of large systems of equations and to
PageRank computations", Computers and Mathematics with Applications 2008 (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

# Added to the diagonal of the scaled normal equations: above their rounding, below what matters.
_RIDGE = 1e-13
# Pieces of all residuals of a column together fit a core's cache.
_PIECE_HOSTS = 1 << 13


def residual_products(residuals: Sequence[NDArray[np.float64]]) -> NDArray[np.float64]:
    """Products of all pairs of residuals, a column at a time.

    Parameters
    ----------
    residuals : m arrays of shape (k, n).

    Returns
    -------
    shape (k, m, m), symmetric.
    """
    m, (k, n) = len(residuals), residuals[0].shape
    products = np.zeros((k, m, m))
    for j in range(k):
        for first in range(0, n, _PIECE_HOSTS):
            pieces = [residual[j, first : first + _PIECE_HOSTS] for residual in residuals]
            for a in range(m):
                for b in range(a + 1):
                    # A sum of products, not a dot: BLAS may add in another order on another machine.
                    products[j, a, b] += np.add.reduce(pieces[a] * pieces[b])
    for a in range(m):
        products[:, :a, a] = products[:, a, :a]
    return products


def extrapolation_weights(products: Sequence[Sequence[float]]) -> list[float]:
    """Weights that sum to 1 and minimise the combined residual, from its (m, m) products.

    The last state alone where a residual is zero, or where the equations have no sound solution.
    """
    m = len(products)
    last = [0.0] * (m - 1) + [1.0]
    scale = [math.sqrt(products[i][i]) for i in range(m)]
    if not all(0.0 < value < math.inf for value in scale):
        return last
    matrix = [[products[i][j] / (scale[i] * scale[j]) for j in range(m)] for i in range(m)]
    for i in range(m):
        matrix[i][i] += _RIDGE
    solved = _solve_positive(matrix, [1.0 / value for value in scale])
    if solved is None:
        return last
    weights = [value / factor for value, factor in zip(solved, scale, strict=True)]
    total = math.fsum(weights)
    if not math.isfinite(total) or total == 0.0:
        return last
    return [weight / total for weight in weights]


def combine(states: Sequence[NDArray[np.float64]], weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """Weighted sum of m states of shape (k, n) with weights (m, k): shape (k, n)."""
    total: NDArray[np.float64] = weights[0][:, None] * states[0]
    for state, weight in zip(states[1:], weights[1:], strict=True):
        total += weight[:, None] * state
    return total


def _solve_positive(matrix: list[list[float]], right: list[float]) -> list[float] | None:
    """Solves a small symmetric positive definite system by Cholesky; None where it is not definite.

    In plain Python, so that every machine gets the same bits.
    """
    m = len(matrix)
    lower = [[0.0] * m for _ in range(m)]
    for i in range(m):
        for j in range(i + 1):
            rest = matrix[i][j] - sum(lower[i][k] * lower[j][k] for k in range(j))
            if i == j:
                if not rest > 0.0:
                    return None
                lower[i][i] = math.sqrt(rest)
            else:
                lower[i][j] = rest / lower[j][j]
    solved = list(right)
    for i in range(m):
        solved[i] = (solved[i] - sum(lower[i][k] * solved[k] for k in range(i))) / lower[i][i]
    for i in reversed(range(m)):
        solved[i] = (solved[i] - sum(lower[k][i] * solved[k] for k in range(i + 1, m))) / lower[i][i]
    return solved
