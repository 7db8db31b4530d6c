"""Distinct 64-bit keys in the order in which they are first met, looked up many at a time.

A hash table with open addressing and linear probing (Knuth, The Art of Computer Programming, volume 3,
section 6.4, algorithm L; from memory): every pass takes all keys that are not placed yet one slot further.
The keys must be uniform, as fingerprints are: their upper bits are the slot.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_FIRST_BITS = 16
# Keys a pass: their temporaries stay in the processor's cache.
_KEYS_A_PASS = 1 << 15

_Keys = NDArray[np.uint64]
_Longs = NDArray[np.int64]


class KeyTable:
    """Numbers distinct keys from 0; up to 2^31 of them."""

    def __init__(self, expected: int = 0) -> None:
        """``expected`` keys fit without the table having to grow."""
        self.count = 0
        self._make(max(_FIRST_BITS, (2 * expected).bit_length()))

    def number(self, keys: _Keys) -> tuple[NDArray[np.int32], _Longs]:
        """The number of every key, and where the new ones are met.

        Parameters
        ----------
        keys : shape (n,), uniform and not 0; repeated as they may be.

        Returns
        -------
        numbers : shape (n,)
        new : shape (m,), positions in ``keys``, in the order of the m numbers that are new.
        """
        numbers = np.empty(len(keys), dtype=np.int32)
        new = [np.zeros(0, dtype=np.int64)]
        for first in range(0, len(keys), _KEYS_A_PASS):
            part = keys[first : first + _KEYS_A_PASS]
            if 2 * (self.count + len(part)) > 1 << self._bits:
                self._grow(self.count + len(part))
            numbers[first : first + len(part)], met = self._number(part)
            new += [rows + first for rows in met]
        return numbers, np.concatenate(new)

    def _make(self, bits: int) -> None:
        self._bits = bits
        # A slot is a key, 0 where it is free, and beside it in the same cache line the key's number.
        self._slots = np.zeros(2 << bits, dtype=np.uint64)

    def _first_slots(self, keys: _Keys) -> _Longs:
        return ((keys >> np.uint64(64 - self._bits)) << np.uint64(1)).view(np.int64)

    def _number(self, keys: _Keys) -> tuple[_Keys, list[_Longs]]:
        table, last = self._slots, len(self._slots) - 1
        slots = self._first_slots(keys)
        there = table.take(slots)
        numbers = table.take(slots + 1)
        rows = np.flatnonzero(there != keys)
        slots, wanted, there = slots[rows], keys[rows], there[rows]
        new = []
        while len(rows):
            free = np.flatnonzero(there == 0)
            if len(free):
                new.append(rows[free[self._claim(slots[free], wanted[free])]])
                there = table[slots]
            is_found = there == wanted
            numbers[rows[is_found]] = table[slots[is_found] + 1]
            # Who lost a free slot to another key, or met one, goes on to the next slot.
            still = np.flatnonzero(~is_found)
            rows, wanted, slots = rows[still], wanted[still], (slots[still] + 2) & last
            there = table[slots]
        return numbers, new

    def _claim(self, slots: _Longs, keys: _Keys) -> _Longs:
        """Gives each free slot to one of the keys that want it; which ones got it."""
        claims = np.arange(len(slots), dtype=np.uint64)
        self._slots[slots + 1] = claims
        winners = np.flatnonzero(self._slots[slots + 1] == claims)
        won = slots[winners]
        self._slots[won] = keys[winners]
        self._slots[won + 1] = np.arange(self.count, self.count + len(won), dtype=np.uint64)
        self.count += len(won)
        return winners

    def _grow(self, n_keys: int) -> None:
        old = self._slots.reshape(-1, 2)
        old = old[old[:, 0] != 0]
        # At most a quarter full, so that it need not grow again soon.
        self._make((4 * n_keys - 1).bit_length())
        keys, numbers = old[:, 0].copy(), old[:, 1].copy()
        slots = self._first_slots(keys)
        while len(keys):
            free = self._slots[slots] == 0
            self._slots[slots[free]] = keys[free]
            is_placed = self._slots[slots] == keys
            self._slots[slots[is_placed] + 1] = numbers[is_placed]
            keys, numbers = keys[~is_placed], numbers[~is_placed]
            slots = (slots[~is_placed] + 2) & (len(self._slots) - 1)
