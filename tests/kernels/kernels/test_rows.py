"""Edges of chosen rows of a section against the section unpacked whole."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels import diagonals
from sparkrank.kernels.diagonals import make_section, section_edges
from sparkrank.kernels.rows import ranges, row_edges


def expected_edges(section, row: int) -> list[int]:
    destination, source = section_edges(section)
    return sorted(source[destination == section.rows[row]].tolist())


@given(st.lists(st.tuples(st.integers(0, 9), st.integers(0, 30)), min_size=1, unique=True), st.data())
def test_rows_of_any_section(pairs, data) -> None:
    least = diagonals.MIN_DIAGONAL_ROWS
    diagonals.MIN_DIAGONAL_ROWS = data.draw(st.integers(1, 12))
    try:
        destination, source = np.array(sorted(pairs), dtype=np.int64).T
        section = make_section(destination, source, None)
    finally:
        diagonals.MIN_DIAGONAL_ROWS = least
    rows = np.array(data.draw(st.permutations(range(len(section.rows)))), dtype=np.int64)
    rows = rows[: data.draw(st.integers(0, len(rows)))]
    counts, places = row_edges(section, rows)
    cuts = np.cumsum(counts)[:-1]
    found = [sorted(section.sources[part].tolist()) for part in np.split(places, cuts)] if len(rows) else []
    assert found == [expected_edges(section, row) for row in rows.tolist()]
    # Every edge has a place of its own.
    assert len(set(places.tolist())) == len(places)


@pytest.mark.parametrize(
    ("counts", "expected"), [([], []), ([0, 0], []), ([2, 0, 3], [0, 1, 0, 1, 2]), ([0, 1], [0])]
)
def test_ranges(counts, expected) -> None:
    assert ranges(np.array(counts, dtype=np.int64)).tolist() == expected
