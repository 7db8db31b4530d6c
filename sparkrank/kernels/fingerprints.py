"""Keyed fingerprints of many byte strings at once: equal strings, equal fingerprints.

They tell the distinct values of an edge table's columns apart without sorting or comparing strings.  The
keys are random and stay secret, so that nobody can write two values that are taken for one; by chance
any two values are with a probability of about 2^-64.  Fingerprints are good for one table of distinct
values and never stored: what is stored must not depend on the keys.

Every string is read as 64-bit words: its first eight bytes, the next eight and so on, and its last eight,
which may overlap the word before.  Each word goes through two keyed multiplications, with a shift between
them, so that no difference of words survives in a way that the next word could undo.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

N_KEYS = 3

# Strings a pass: temporaries of one pass stay in the processor's cache.
_STRINGS_A_PASS = 1 << 14
_WORD_BYTES = 8

_Words = NDArray[np.uint64]


def fingerprints(data: NDArray[np.uint8], offsets: NDArray[np.int64], keys: _Words) -> _Words:
    """A fingerprint of each byte string; never 0.

    Parameters
    ----------
    data : shape (n_bytes,), the strings one after the other; what lies outside ``offsets`` is ignored.
    offsets : shape (n + 1,), not decreasing: string i is ``data[offsets[i]:offsets[i + 1]]``.
    keys : shape (N_KEYS,), random.

    Returns
    -------
    shape (n,)
    """
    n = len(offsets) - 1
    found = np.empty(n, dtype=np.uint64)
    # The multiplications lose nothing only by odd numbers.
    factors = (keys[0] | np.uint64(1), keys[1] | np.uint64(1))
    for first in range(0, n, _STRINGS_A_PASS):
        bounds = offsets[first : min(first + _STRINGS_A_PASS, n) + 1]
        used = data[bounds[0] : bounds[-1]]
        # A word can be read wherever a string has a byte, beyond the last string's end, too.
        padded = np.zeros(len(used) + _WORD_BYTES, dtype=np.uint8)
        padded[:-_WORD_BYTES] = used
        words = np.ndarray((len(used) + 1,), dtype="<u8", buffer=padded, strides=(1,))
        starts = bounds[:-1] - bounds[0]
        found[first : first + len(starts)] = _pass(words, starts, np.diff(bounds), factors, keys[2])
    found[found == 0] = 1
    return found


def _pass(
    words: _Words,
    starts: NDArray[np.int64],
    lengths: NDArray[np.int64],
    factors: tuple[np.uint64, np.uint64],
    start_key: np.uint64,
) -> _Words:
    state = lengths.astype(np.uint64)
    state *= factors[0]
    state += start_key
    first = words[starts]
    short = np.flatnonzero(lengths < _WORD_BYTES)
    if len(short):
        # Of a short string's word only its own bytes count.
        first[short] &= ~(~np.uint64(0) << (lengths[short].view(np.uint64) * np.uint64(8)))
    state ^= first
    _mix(state, factors)
    longest = int(lengths.max(initial=0))
    for at in range(_WORD_BYTES, longest - _WORD_BYTES, _WORD_BYTES):
        has_more = np.flatnonzero(lengths > at + _WORD_BYTES)
        part = state[has_more]
        part ^= words[starts[has_more] + at]
        _mix(part, factors)
        state[has_more] = part
    last = starts + lengths
    last -= _WORD_BYTES
    # Strings of up to eight bytes are mixed with their first word once more, which changes nothing.
    np.maximum(last, starts, out=last)
    state ^= words[last] if not len(short) else np.where(lengths < _WORD_BYTES, first, words[last])
    _mix(state, factors)
    state ^= state >> np.uint64(32)
    return state


def _mix(state: _Words, factors: tuple[np.uint64, np.uint64]) -> None:
    """In place."""
    state *= factors[0]
    state ^= state >> np.uint64(29)
    state *= factors[1]
    state ^= state >> np.uint64(32)
