"""Ranges of hashed ids: which stripe a host belongs to."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def stripe_of(ids: NDArray[np.int64], n_stripes: int) -> NDArray[np.int64]:
    """The stripe of each id, 0 … n_stripes - 1; rising with the id.

    The upper 32 bits, counted from the smallest id, scaled to the number of stripes.
    """
    upper = (ids >> 32) + (1 << 31)
    upper *= n_stripes
    upper >>= 32
    return upper
