"""XXH64 against published values and the package `xxhash`, which wraps the reference implementation."""

import time
import warnings
from collections.abc import Iterator

import numpy as np
import pytest
import xxhash
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from sparkrank.kernels import xxhash as kernel
from sparkrank.kernels.xxhash import xxh64

SEED = 2654435761


def check_buffer(n_bytes: int) -> bytes:
    """The start of the buffer that the reference implementation's own self-test hashes."""
    octets, state = bytearray(), SEED
    for _ in range(n_bytes):
        octets.append(state >> 56)
        state = state * 11400714785074694797 % 2**64
    return bytes(octets)


# The self-test of the reference implementation, release 0.8 (from memory; that the package
# agrees is checked, too).
PUBLISHED = [
    (b"", 0, 0xEF46DB3751D8E999),
    (check_buffer(1), 0, 0xE934A84ADB052768),
    (check_buffer(1), SEED, 0x5014607643A9B4C3),
    (check_buffer(4), 0, 0x9136A0DCA57457EE),
    (check_buffer(14), 0, 0x8282DCC4994E35C8),
    (check_buffer(14), SEED, 0xC3BD6BF63DEB6DF0),
    (check_buffer(222), 0, 0xB641AE8CB691C174),
    (check_buffer(222), SEED, 0x20CB8AB7AE10C14A),
]


def packed(strings: list[bytes]) -> tuple[NDArray[np.uint8], NDArray[np.int64]]:
    data = np.frombuffer(b"".join(strings), dtype=np.uint8)
    return data, np.cumsum([0, *map(len, strings)], dtype=np.int64)


def expected(strings: list[bytes], seed: int) -> NDArray[np.int64]:
    hashes = [xxhash.xxh64_intdigest(string, seed % 2**64) for string in strings]
    return np.array(hashes, dtype=np.uint64).view(np.int64)


@pytest.fixture(autouse=True)
def _no_warnings() -> Iterator[None]:
    """Wrapping is what the arithmetic is about: no overflow may be reported."""
    with np.errstate(all="raise"), warnings.catch_warnings():
        warnings.simplefilter("error")
        yield


@pytest.mark.parametrize(("string", "seed", "published"), PUBLISHED)
def test_published_values(string: bytes, seed: int, published: int) -> None:
    assert int(xxh64(*packed([string]), seed)[0]) % 2**64 == published
    assert xxhash.xxh64_intdigest(string, seed) == published


@pytest.mark.parametrize("seed", [0, 42, -1, 2**63, -(2**63), 2**64 - 1])
def test_every_length_and_every_byte_alone_and_together(seed: int) -> None:
    rng = np.random.default_rng(5)
    strings = [rng.bytes(length) for length in rng.permutation(300)]
    strings += [bytes([octet]) * times for octet in range(256) for times in (1, 3, 7)]
    assert (xxh64(*packed(strings), seed) == expected(strings, seed)).all()
    for string in strings[:300:7]:
        assert (xxh64(*packed([string]), seed) == expected([string], seed)).all()


@given(st.lists(st.binary(max_size=100), max_size=40), st.integers(-(2**64), 2**64), st.integers(0, 9))
def test_any_strings(strings: list[bytes], seed: int, skipped: int) -> None:
    data, offsets = packed([b"s" * skipped, *strings, b"end"])
    hashes = xxh64(data, offsets[1:-1], seed)
    assert hashes.dtype == np.int64
    assert hashes.shape == (len(strings),)
    assert (hashes == expected(strings, seed)).all()


def test_how_strings_share_passes_makes_no_difference(monkeypatch: pytest.MonkeyPatch) -> None:
    rng = np.random.default_rng(6)
    strings = [rng.bytes(length) for length in rng.integers(0, 70, 200)]
    for size in (1, 7, 199, 200, 201):
        monkeypatch.setattr(kernel, "_STRINGS_A_PASS", size)
        assert (xxh64(*packed(strings), 42) == expected(strings, 42)).all()


def test_inputs_stay_as_they_are_and_may_be_views() -> None:
    strings = [b"shop.example", b"", b"x" * 50]
    data, offsets = packed(strings)
    twice, spread = np.repeat(data, 2), np.repeat(offsets, 2)
    twice.flags.writeable = spread.flags.writeable = False
    assert (xxh64(twice[::2], spread[::2], 42) == expected(strings, 42)).all()


def test_one_long_string_among_many_short_ones_costs_its_own_length() -> None:
    strings = [b"%d.example" % number for number in range(100_000)]
    strings[777] = b"l" * 100_000
    started = time.process_time()
    hashes = xxh64(*packed(strings), 42)
    # Some 50 ms; a hundred thousand strings padded to the longest would take minutes and 10 GB.
    assert time.process_time() - started < 2.0
    assert (hashes[:2000] == expected(strings[:2000], 42)).all()
