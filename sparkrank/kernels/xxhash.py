"""XXH64 of many byte strings at once.

The hash of a host's name is its id, so it must be the same in numpy as in Spark's ``xxhash64(string)``
(seed 42).  All strings of one length class go through the same steps together: first the whole 32-byte
stripes of long strings, a stripe a step, then the up to 31 bytes that are left.  Arithmetic is modulo
2^64, which arrays of uint64 do without warnings.

Source: xxHash fast digest algorithm, specification 0.1.1, section "XXH64 algorithm description"
(github.com/Cyan4973/xxHash, doc/xxhash_spec.md), by which the step numbers below go.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_P1 = 0x9E3779B185EBCA87
_P2 = 0xC2B2AE3D27D4EB4F
_P3 = 0x165667B19E3779F9
_P4 = 0x85EBCA77C2B2AE63
_P5 = 0x27D4EB2F165667C5

_STRIPE_BYTES = 32
_MODULUS = 2**64

# Strings a pass: temporaries of one pass stay in the processor's cache.
_STRINGS_A_PASS = 1 << 16

_Words = NDArray[np.uint64]


def xxh64(data: NDArray[np.uint8], offsets: NDArray[np.int64], seed: int) -> NDArray[np.int64]:
    """XXH64 of each byte string.

    Parameters
    ----------
    data : shape (n_bytes,), the strings one after the other; what lies outside ``offsets`` is ignored.
    offsets : shape (n + 1,), not decreasing: string i is ``data[offsets[i]:offsets[i + 1]]``.
    seed : any integer, taken modulo 2^64.

    Returns
    -------
    shape (n,): the hashes, their 64 bits read as a signed number, as Spark has them.
    """
    n = len(offsets) - 1
    hashes = np.empty(n, dtype=np.uint64)
    for first in range(0, n, _STRINGS_A_PASS):
        bounds = offsets[first : min(first + _STRINGS_A_PASS, n) + 1].astype(np.int64)
        used = data[bounds[0] : bounds[-1]]
        # Eight bytes more: the rest of a string is read as whole words, beyond the last string's end, too.
        padded = np.zeros(len(used) + 8, dtype=np.uint8)
        padded[:-8] = used
        # The word that begins at each byte. Processors read it wherever it begins.
        words = np.ndarray((len(used) + 1,), dtype="<u8", buffer=padded, strides=(1,))
        bounds -= bounds[0]
        hashes[first : first + len(bounds) - 1] = _hash_pass(words, bounds[:-1], np.diff(bounds), seed)
    return hashes.view(np.int64)


def _hash_pass(
    words: _Words, starts: NDArray[np.int64], lengths: NDArray[np.int64], seed: int
) -> NDArray[np.uint64]:
    """Hashes of the strings that begin at ``starts``; shapes (n,)."""
    # Steps 1 to 3: accumulators, which strings of less than a stripe skip.
    state = np.full(len(starts), (seed + _P5) % _MODULUS, dtype=np.uint64)
    _take_stripes(state, words, starts, lengths // _STRIPE_BYTES, seed)
    state += lengths.view(np.uint64)  # step 4: the length
    rest = lengths % _STRIPE_BYTES
    # Strings with an equal rest lie side by side, so that no step needs a mask.
    order = np.argsort(rest.astype(np.uint8), kind="stable")
    sorted_state = state.take(order)
    rest_starts = (starts + (lengths - rest)).take(order)
    ends = np.cumsum(np.bincount(rest, minlength=_STRIPE_BYTES)).tolist()
    begin = 0
    for n_bytes, end in enumerate(ends):
        if end > begin:
            _take_rest(sorted_state[begin:end], words, rest_starts[begin:end], n_bytes)
        begin = end
    _avalanche(sorted_state)
    state[order] = sorted_state
    return state


def _take_stripes(
    state: _Words, words: _Words, starts: NDArray[np.int64], n_stripes: NDArray[np.int64], seed: int
) -> None:
    """Steps 1 to 3 for the strings of at least one stripe: their state is replaced in place.

    Time and memory go by the stripes there are: the strings that still have one are a prefix of an order
    by number of stripes.
    """
    long = np.flatnonzero(n_stripes)
    if len(long) == 0:
        return
    long = long[np.argsort(-n_stripes[long], kind="stable")]
    stripes = n_stripes[long]
    # How many strings have more than j stripes, for each j.
    active = np.searchsorted(-stripes, -np.arange(stripes[0]), side="left").tolist()
    position = starts[long] + np.arange(0, _STRIPE_BYTES, 8)[:, np.newaxis]
    initial = [(seed + add) % _MODULUS for add in (_P1 + _P2, _P2, 0, -_P1)]
    lanes = np.repeat(np.array(initial, dtype=np.uint64)[:, np.newaxis], len(long), axis=1)
    for n_active in active:
        lanes[:, :n_active] = _round(lanes[:, :n_active], words[position[:, :n_active]])
        position[:, :n_active] += _STRIPE_BYTES
    merged = np.zeros(len(long), dtype=np.uint64)
    for lane, bits in zip(lanes, (1, 7, 12, 18), strict=True):
        merged += _rotated(lane, bits)
    for lane in lanes:
        merged ^= _round(np.zeros_like(lane), lane)
        merged *= np.uint64(_P1)
        merged += np.uint64(_P4)
    state[long] = merged


def _take_rest(state: _Words, words: _Words, starts: NDArray[np.int64], n_bytes: int) -> None:
    """Step 5, in place: what is left of strings with the same ``n_bytes`` (below 32) left."""
    taken = 0
    while n_bytes - taken >= 8:
        word = words[starts + taken]
        state ^= _round(np.zeros_like(word), word)
        _scramble(state, 27, _P1, _P4)
        taken += 8
    if n_bytes == taken:
        return
    tail = words[starts + taken]
    if n_bytes - taken >= 4:
        state ^= (tail & np.uint64(0xFFFFFFFF)) * np.uint64(_P1)
        _scramble(state, 23, _P2, _P3)
        tail >>= np.uint64(32)
        taken += 4
    for _ in range(n_bytes - taken):
        state ^= (tail & np.uint64(0xFF)) * np.uint64(_P5)
        _scramble(state, 11, _P1, 0)
        tail >>= np.uint64(8)


def _round(accumulator: _Words, word: _Words) -> _Words:
    """One round of an accumulator."""
    mixed = word * np.uint64(_P2)
    mixed += accumulator
    mixed = _rotated(mixed, 31)
    mixed *= np.uint64(_P1)
    return mixed


def _scramble(state: _Words, bits: int, factor: int, add: int) -> None:
    """Rotates, multiplies and adds in place."""
    high = state >> np.uint64(64 - bits)
    state <<= np.uint64(bits)
    state |= high
    state *= np.uint64(factor)
    state += np.uint64(add)


def _rotated(word: _Words, bits: int) -> _Words:
    turned = word << np.uint64(bits)
    turned |= word >> np.uint64(64 - bits)
    return turned


def _avalanche(state: _Words) -> None:
    """Step 6, in place."""
    for bits, factor in ((33, _P2), (29, _P3), (32, 1)):
        state ^= state >> np.uint64(bits)
        state *= np.uint64(factor)
