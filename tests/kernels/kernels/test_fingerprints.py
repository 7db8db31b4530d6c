"""Fingerprints: equal for equal strings wherever they lie, distinct for others."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels.fingerprints import N_KEYS, fingerprints

KEYS = np.random.default_rng(11).integers(0, 2**64, N_KEYS, dtype=np.uint64)


def of(strings: list[bytes], before: bytes = b"", after: bytes = b"") -> list[int]:
    offsets = np.cumsum([len(before), *map(len, strings)])
    data = np.frombuffer(before + b"".join(strings) + after, np.uint8)
    return fingerprints(data, offsets, KEYS).tolist()


@given(st.lists(st.binary(max_size=70), max_size=30), st.binary(max_size=9), st.binary(max_size=9))
def test_equal_exactly_for_equal_strings(strings: list[bytes], before: bytes, after: bytes) -> None:
    found = of(strings, before, after)
    by_string = dict(zip(strings, found, strict=True))
    assert found == [by_string[one] for one in strings]
    assert len(set(by_string.values())) == len(by_string)
    assert 0 not in found


def test_every_single_bit_counts_at_every_length() -> None:
    for length in range(1, 41):
        plain = bytes(range(64, 64 + length))
        flipped = [
            plain[:at] + bytes([plain[at] ^ 1 << bit]) + plain[at + 1 :]
            for at in range(length)
            for bit in range(8)
        ]
        assert len(set(of([plain, *flipped, plain + b"\0", plain[:-1]]))) == 8 * length + 3


def test_top_bits_of_one_word_are_not_undone_by_the_next() -> None:
    """A difference in a word's top bit survives a multiplication as it is: the shift must spread it."""
    plain = np.arange(8, dtype=np.uint64)
    strings = [plain.tobytes()]
    for first in range(7):
        for bit in range(64):
            changed = plain.copy()
            changed[first] ^= np.uint64(1 << 63)
            changed[first + 1] ^= np.uint64(1 << bit)
            strings.append(changed.tobytes())
            changed = changed.copy()
            changed[first + 1] ^= np.uint64(1 << 63 | 1 << 34 | 1 << 31)
            strings.append(changed.tobytes())
    assert len(set(of(strings))) == len(set(strings))


def test_a_million_strings_have_as_many_fingerprints() -> None:
    strings = [b"host%d.example" % number for number in range(300_000)]
    strings += [b"www.%d.a-longer-name.example" % number for number in range(300_000)]
    assert len(set(of(strings))) == len(strings)


def test_other_keys_give_other_fingerprints() -> None:
    data, offsets = np.frombuffer(b"hostname.example", np.uint8), np.array([0, 4, 16])
    assert not set(fingerprints(data, offsets, KEYS)) & set(fingerprints(data, offsets, KEYS + np.uint64(2)))


def test_no_strings() -> None:
    assert len(fingerprints(np.zeros(0, np.uint8), np.zeros(1, np.int64), KEYS)) == 0
