"""Pieces of strings, against slices of Python's own."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels.cut import cut


@st.composite
def strings_and_pieces(draw: st.DrawFn) -> tuple[list[bytes], list[tuple[int, int]]]:
    strings = draw(st.lists(st.binary(max_size=9), max_size=12))
    pieces = []
    for string in strings:
        begin = draw(st.integers(0, len(string)))
        pieces.append((begin, draw(st.integers(begin, len(string)))))
    return strings, pieces


@given(strings_and_pieces(), st.binary(max_size=3), st.binary(max_size=3))
def test_it_cuts_as_slices_do(
    case: tuple[list[bytes], list[tuple[int, int]]], before: bytes, after: bytes
) -> None:
    strings, pieces = case
    data = np.frombuffer(before + b"".join(strings) + after, dtype=np.uint8)
    offsets = len(before) + np.cumsum([0, *map(len, strings)])
    begin = offsets[:-1] + np.array([first for first, _ in pieces], dtype=np.int64)
    end = offsets[:-1] + np.array([last for _, last in pieces], dtype=np.int64)
    expected = b"".join(string[first:last] for string, (first, last) in zip(strings, pieces, strict=True))
    assert cut(data, offsets, begin, end).tobytes() == expected


@pytest.mark.parametrize("skipped", [0, 2])
def test_whole_strings_are_not_copied(skipped: int) -> None:
    data = np.frombuffer(b"xxab.cdxx", dtype=np.uint8)[: 7 + skipped]
    offsets = np.array([2, 4, 4, 7])
    whole = cut(data, offsets, offsets[:-1], offsets[1:])
    assert whole.tobytes() == b"ab.cd"
    assert np.shares_memory(whole, data)
