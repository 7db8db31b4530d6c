"""The last labels of many canonical hosts, without splitting any.

Public suffixes count labels from the right.  The positions of all dots, ascending, hold the labels of
every host: the k-th dot from a host's end is k places before the first dot of the next host.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_DOT, _BRACKET, _ZERO = b".[0"


class LastLabels:
    """Where the last labels of hosts begin.

    Parameters
    ----------
    data : shape (n_bytes,), canonical hosts one after the other; what lies outside ``offsets`` is ignored.
    offsets : shape (n + 1,), not decreasing: host i is ``data[offsets[i]:offsets[i + 1]]``.
    """

    n_labels: NDArray[np.int64]
    """Shape (n,): labels of a name; 0 for an address, a host with an empty label and an empty string."""

    def __init__(self, data: NDArray[np.uint8], offsets: NDArray[np.int64]) -> None:
        self._start, self._stop = offsets[:-1], offsets[1:]
        first = offsets[0]
        self._dots = first + np.flatnonzero(data[first : offsets[-1]] == _DOT)
        # The dots of host i are self._dots[self._low[i]:self._low[i + 1]].
        self._low = np.searchsorted(self._dots, offsets)
        dots = np.diff(self._low)
        self.n_labels = np.where(self._are_names(data), dots + 1, 0)

    def begin(self, count: NDArray[np.int64] | int) -> NDArray[np.int64]:
        """Positions in ``data``, shape (n,), where the last ``count`` labels (at least 1) of each host begin.

        Where a host has no more than those it is the host's own start.
        """
        if len(self._dots) == 0:
            return self._start
        at = self._low[1:] - count
        return np.where(at >= self._low[:-1], self._dots[np.maximum(at, 0)] + 1, self._start)

    def _are_names(self, data: NDArray[np.uint8]) -> NDArray[np.bool_]:
        names = self._stop > self._start
        if len(data) == 0:
            return names
        last = len(data) - 1
        first_byte = data[np.minimum(self._start, last)]
        last_byte = data[np.maximum(self._stop - 1, 0)]
        names &= (first_byte != _BRACKET) & (first_byte != _DOT) & (last_byte != _DOT)
        # A canonical host whose last label is a number of up to three digits is an IPv4 address.
        begin = self.begin(1)
        digits = self._stop - begin <= 3
        for position in (begin, self._stop - 2, self._stop - 1):
            octet = data[np.clip(position, begin, last)]
            digits &= (octet - np.uint8(_ZERO)) < 10
        names &= ~digits
        # Of two dots side by side the first ends its host if the second is not in it, too.
        doubled = np.flatnonzero(np.diff(self._dots) == 1)
        names[np.searchsorted(self._low, doubled, side="right") - 1] = False
        return names
