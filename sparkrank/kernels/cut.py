"""One piece out of each of many byte strings."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def cut(
    data: NDArray[np.uint8], offsets: NDArray[np.int64], begin: NDArray[np.int64], end: NDArray[np.int64]
) -> NDArray[np.uint8]:
    """The bytes from ``begin`` to ``end`` of each string, one piece after the other.

    Parameters
    ----------
    data : shape (n_bytes,), the strings one after the other; what lies outside ``offsets`` is ignored.
    offsets : shape (n + 1,), not decreasing: string i is ``data[offsets[i]:offsets[i + 1]]``.
    begin, end : shape (n,), positions in ``data``: ``offsets[i] <= begin[i] <= end[i] <= offsets[i + 1]``.

    Returns
    -------
    shape ((end - begin).sum(),); a view of ``data`` where every piece is the whole string.
    """
    used = data[offsets[0] : offsets[-1]]
    before, after = begin - offsets[:-1], offsets[1:] - end
    if not before.any() and not after.any():
        return used
    lengths = end - begin
    stops = np.cumsum(lengths)
    # Byte j of all pieces, in piece i, comes from j plus the distance of the piece's begin from its place.
    positions = np.repeat(begin - (stops - lengths), lengths)
    positions += np.arange(len(positions))
    return data.take(positions)
