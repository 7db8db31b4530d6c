"""The hosts of plain values: bytes in, bytes out.

Nearly every value of an edge table is plain: a host of ASCII letters, digits, hyphens and underscores,
bare or in a URL without user info.  Its canonical host is a piece of it in lower case.  The kernel finds
that piece for all values of a block at once: comparisons run over the block's bytes, and the few positions
they leave (dots, ends of names) are looked up a value.  What it is not sure of it leaves to the caller.

Source of the forms: URL Standard, sections 3.5 "Host parsing" and 4.4 "URL parsing" (url.spec.whatwg.org).
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.cut import cut

# DNS limits, as everywhere in the program.
_MAX_NAME_BYTES = 253
_MAX_LABEL_BYTES = 63
# Ports of five digits may be over 65535.
_MAX_PORT_DIGITS = 4

# Longer values are left to the caller: so no value costs more than some microseconds here.
_MAX_VALUE_BYTES = 4096
# Bytes a block: its temporaries stay in the processor's cache.
_BLOCK_BYTES = 1 << 18

_SCHEMES = (b"http", b"https", b"ftp", b"ws", b"wss")
_HYPHEN, _DOT, _SLASH, _COLON, _UNDERSCORE = b"-./:_"

_Bytes = NDArray[np.uint8]
_Longs = NDArray[np.int64]
_Flags = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True)
class PlainHosts:
    """The hosts of n values, one after the other."""

    data: NDArray[np.uint8]
    """Shape (n_bytes,): lower-case ASCII."""
    lengths: NDArray[np.int64]
    """Shape (n,): bytes a value; 0 where the value is not plain."""


def find_plain_hosts(data: NDArray[np.uint8], offsets: NDArray[np.int64]) -> PlainHosts:
    """Canonical hosts of the plain among many values.

    Plain are names of ASCII letters, digits, ``-`` and ``_`` in dot-separated labels of 1 to 63 bytes, at
    most 253 in all and one trailing dot, without ``xn--`` and without a digit at the start of the last
    label (which might be an address); bare with an optional port and path, or in http, https, ftp, ws, wss
    or ``//`` URLs without user info.  Ports have at most four digits, values at most 4,096 bytes.

    Parameters
    ----------
    data : shape (n_bytes,), the values one after the other; what lies outside ``offsets`` is ignored.
    offsets : shape (n + 1,), not decreasing: value i is ``data[offsets[i]:offsets[i + 1]]``.
    """
    n = len(offsets) - 1
    lengths = np.zeros(n, dtype=np.int64)
    pieces = [np.empty(0, dtype=np.uint8)]
    for first, last in _blocks(offsets):
        bounds = offsets[first : last + 1] - offsets[first]
        block = data[offsets[first] : offsets[last]]
        begin, end = _Block(block, bounds).find()
        lengths[first:last] = end - begin
        pieces.append(_lower(cut(block, bounds, begin, end)))
    return PlainHosts(data=np.concatenate(pieces), lengths=lengths)


def _blocks(offsets: _Longs) -> list[tuple[int, int]]:
    """Ranges of values without any that is too long."""
    n = len(offsets) - 1
    too_long = np.flatnonzero(np.diff(offsets) > _MAX_VALUE_BYTES).tolist()
    blocks = []
    for before, after in pairwise([-1, *too_long, n]):
        first = before + 1
        while first < after:
            limit = np.searchsorted(offsets, offsets[first] + _BLOCK_BYTES, side="right")
            last = min(max(int(limit) - 1, first + 1), after)
            blocks.append((first, last))
            first = last
    return blocks


def _lower(octets: _Bytes) -> _Bytes:
    """ASCII in lower case."""
    capital = (octets - np.uint8(ord("A"))) < 26
    return octets + (capital.view(np.uint8) << np.uint8(5)) if capital.any() else octets


class _Block:
    """Values side by side, and what their bytes say."""

    def __init__(self, block: _Bytes, bounds: _Longs) -> None:
        self.start, self.stop = bounds[:-1], bounds[1:]
        # Eight bytes more, so that a word can be read wherever a value has a byte.
        self.padded = np.zeros(len(block) + 8, dtype=np.uint8)
        self.padded[: len(block)] = block
        self.bytes = self.padded[: len(block)]
        self.words = np.ndarray((len(block) + 1,), dtype="<u8", buffer=self.padded, strides=(1,))

    def find(self) -> tuple[_Longs, _Longs]:
        """Where the plain hosts begin and end; equal positions where a value is not plain."""
        begin, is_url = self._after_scheme()
        not_name = np.flatnonzero(~self._in_names())
        name_end = _next(not_name, begin, self.stop)
        rest, plain = self._after_port(name_end, is_url, not_name)
        opens_path = self.padded[rest] == _SLASH
        opens_more = np.isin(self.padded[rest], np.frombuffer(b"?#\\", dtype=np.uint8))
        plain &= (rest == self.stop) | opens_path | (is_url & opens_more)
        # One trailing dot is removed. Where there is no name, the dot of the value before changes nothing.
        end = name_end - (self.padded[name_end - 1] == _DOT)
        plain &= self._are_names(begin, end)
        has_path = rest < self.stop
        if (plain & has_path & ~is_url).any():
            plain &= is_url | ~has_path | self._are_bare()
        return begin, np.where(plain, end, begin)

    def _after_scheme(self) -> tuple[_Longs, _Flags]:
        """Where the authority of a URL begins, or the value itself; and which values are such URLs."""
        first = self.words[self.start]
        size = self.stop - self.start
        skipped = np.zeros(len(size), dtype=np.int64)
        for scheme in (b"", *_SCHEMES):
            prefix = scheme + (b"://" if scheme else b"//")
            # Only at letters does this bit make lower case.
            lower = np.uint64(int.from_bytes(b"\x20" * len(scheme), "little"))
            mask = np.uint64(2 ** (8 * len(prefix)) - 1)
            same = ((first | lower) & mask) == np.uint64(int.from_bytes(prefix, "little"))
            skipped[same & (size >= len(prefix))] = len(prefix)
        return self.start + skipped, skipped > 0

    def _in_names(self) -> _Flags:
        """Bytes that names are made of: letters, digits, hyphens, underscores, dots."""
        octets = self.bytes
        name = ((octets | np.uint8(0x20)) - np.uint8(ord("a"))) < 26
        # From the hyphen to the 9 there is nothing else but the slash.
        name |= ((octets - np.uint8(_HYPHEN)) < 13) & (octets != _SLASH)
        name |= octets == _UNDERSCORE
        return name

    def _after_port(self, name_end: _Longs, is_url: _Flags, not_name: _Longs) -> tuple[_Longs, _Flags]:
        """Where the port ends if one follows the name, else the name; False for what is no port."""
        rest, well = name_end.copy(), np.ones(len(name_end), dtype=np.bool_)
        at = np.flatnonzero((name_end < self.stop) & (self.padded[name_end] == _COLON))
        if len(at):
            digits = name_end[at] + 1
            rest[at] = _next(not_name, digits, self.stop[at])
            n_digits = rest[at] - digits
            # URLs may have a colon and no port; a bare host with one is damaged.
            enough = (n_digits >= 1) | is_url[at]
            well[at] = enough & (n_digits <= _MAX_PORT_DIGITS) & self._are_digits(digits, n_digits)
        return rest, well

    def _are_digits(self, position: _Longs, count: _Longs) -> _Flags:
        """True where the next ``count`` bytes are digits, as far as a port goes."""
        digits = np.ones(len(position), dtype=np.bool_)
        for step in range(_MAX_PORT_DIGITS):
            octet = self.padded[np.minimum(position + step, len(self.padded) - 1)]
            digits &= (step >= count) | ((octet - np.uint8(ord("0"))) < 10)
        return digits

    def _are_names(self, begin: _Longs, end: _Longs) -> _Flags:
        """True for labels of 1 to 63 bytes, 253 bytes in all, no ``xn--``, no digit to begin the last."""
        dots = np.flatnonzero(self.bytes == _DOT)
        low, high = np.searchsorted(dots, begin), np.searchsorted(dots, end)
        has_dots = high > low
        # With a dot more at either end there is always one to look up.
        dots = np.concatenate([[-1], dots, [len(self.bytes)]])
        first_end = np.where(has_dots, dots[low + 1], end)
        last_begin = np.where(has_dots, dots[high] + 1, begin)
        fits = _is_label_length(first_end - begin) & _is_label_length(end - last_begin)
        fits &= (end - begin) <= _MAX_NAME_BYTES
        # Labels between two dots: a running count of the bad ones tells whether a name has any.
        bad = np.cumsum(~_is_label_length(np.diff(dots) - 1))
        fits &= ~has_dots | (bad[low] == bad[np.maximum(high - 1, 0)])
        fits &= (self.padded[last_begin] - np.uint8(ord("0"))) >= 10
        encoded = self._encoded_labels()
        if len(encoded):
            fits &= _next(encoded, begin, end) == end
        return fits

    def _encoded_labels(self) -> _Longs:
        """Positions of ``xn--``, at the start of a label or not."""
        hyphen = self.bytes == _HYPHEN
        double = np.flatnonzero(hyphen[1:] & hyphen[:-1])
        double = double[double >= 2]
        n = self.bytes[double - 1] | np.uint8(0x20)
        x = self.bytes[double - 2] | np.uint8(0x20)
        positions: _Longs = double[(n == ord("n")) & (x == ord("x"))] - 2
        return positions

    def _are_bare(self) -> _Flags:
        """True for values without ``//`` and without what a bare value cannot have, such as spaces."""
        octets = self.bytes
        slash = octets == _SLASH
        double = np.flatnonzero(slash[1:] & slash[:-1])
        refused = (octets <= 0x20) | (octets == 0x7F) | (octets == ord("?")) | (octets == ord("#"))
        # Two slashes count where both are the value's own.
        within: _Flags = _next(double, self.start, self.stop) + 1 >= self.stop
        within &= _next(np.flatnonzero(refused), self.start, self.stop) == self.stop
        return within


def _next(positions: _Longs, begin: _Longs, end: _Longs) -> _Longs:
    """The first of the ascending positions from ``begin`` on, ``end`` where there is none before it."""
    if len(positions) == 0:
        return end
    at = np.searchsorted(positions, begin)
    found = positions[np.minimum(at, len(positions) - 1)]
    return np.where(at < len(positions), np.minimum(found, end), end)


def _is_label_length(length: _Longs) -> _Flags:
    return (length >= 1) & (length <= _MAX_LABEL_BYTES)
