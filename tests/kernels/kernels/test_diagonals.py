"""Packed sections hold the edges they were made from, whatever the shape of their rows."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels.diagonals import MIN_DIAGONAL_ROWS, Section, make_section, section_edges
from tests.kernels.kernels.sections import SHAPES, Sorted, random_rows


def check(edges: Sorted) -> Section:
    """Every edge is there once, with its weight; rows and storage are as documented."""
    section = make_section(edges.destination, edges.source, edges.weights)
    destination, source = section_edges(section)
    assert destination.shape == source.shape == section.sources.shape == edges.source.shape
    order = np.lexsort((source, destination))
    assert (destination[order] == edges.destination).all()
    assert (source[order] == edges.source).all()
    if edges.weights is None:
        assert section.weights is None
    else:
        assert section.weights is not None
        assert (section.weights[order] == edges.weights).all()
    assert sorted(section.rows.tolist()) == np.unique(edges.destination).tolist()
    assert (np.diff(section.diagonals) <= 0).all()
    assert (section.diagonals > 0).all()
    return section


@pytest.mark.parametrize("weighted", [False, True])
@pytest.mark.parametrize("shape", SHAPES)
def test_unpacking_is_the_inverse_of_packing(shape: str, weighted: bool) -> None:
    check(SHAPES[shape](weighted))


@given(st.lists(st.integers(1, 12), min_size=1, max_size=400), st.booleans(), st.integers(0, 2**31))
def test_unpacking_is_the_inverse_of_packing_for_any_lengths(
    lengths: list[int], weighted: bool, seed: int
) -> None:
    check(random_rows(np.array(lengths), weighted=weighted, seed=seed))


def test_offsets_are_16_bits_wide_exactly_where_they_fit() -> None:
    for last, width in ((0xFFFF, 2), (0x10000, 4), (2**32 - 1, 4)):
        ends, zero = np.array([0, last]), np.zeros(2, dtype=np.int64)
        by_source = make_section(zero, ends, None)
        assert (by_source.sources.itemsize, by_source.rows.itemsize) == (width, 2)
        assert by_source.sources.tolist() == [0, last]
        by_row = make_section(ends, zero, None)
        assert (by_row.sources.itemsize, by_row.rows.itemsize) == (2, width)
        assert by_row.rows.tolist() == [0, last]


def test_few_rows_have_no_diagonals() -> None:
    few = check(random_rows(np.full(MIN_DIAGONAL_ROWS - 1, 3)))
    assert (len(few.diagonals), len(few.long_starts)) == (0, MIN_DIAGONAL_ROWS - 1)
    enough = check(random_rows(np.full(MIN_DIAGONAL_ROWS, 3)))
    assert enough.diagonals.tolist() == [MIN_DIAGONAL_ROWS] * 3
    assert len(enough.long_starts) == 0


def test_rows_longer_than_the_last_worthwhile_diagonal_stay_together() -> None:
    """Length 3 is the largest that MIN_DIAGONAL_ROWS rows reach; the rows of 4 and more are long."""
    lengths = np.array([3] * 50 + [4] * 60 + [900] * (MIN_DIAGONAL_ROWS - 70) + [1] * 5)
    section = check(random_rows(lengths))
    assert section.diagonals.tolist() == [55, 50, 50]
    assert len(section.long_starts) == MIN_DIAGONAL_ROWS - 10
    assert len(section.rows) == len(lengths)
