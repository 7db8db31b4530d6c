"""Positions of ids, against a plain dict."""

import time

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from sparkrank.kernels.lookup import find_ids

LOWEST, HIGHEST = -(2**63), 2**63 - 1

ANY_ID = st.integers(LOWEST, HIGHEST)
# Forged ids: many in one small range, so that equal id ranges hold more than a walk is worth.
CROWDED_ID = st.integers(-40, 40)
EDGE_ID = st.sampled_from([LOWEST, LOWEST + 1, -1, 0, 1, HIGHEST - 1, HIGHEST])
SOME_ID = st.one_of(ANY_ID, CROWDED_ID, EDGE_ID)


def check(known: list[int], wanted: list[int]) -> None:
    ids = np.array(sorted(set(known)), dtype=np.int64)
    place = {value: at for at, value in enumerate(ids.tolist())}
    asked = np.array(wanted, dtype=np.int64)
    before = asked.copy()
    found = find_ids(ids, asked)
    assert found.dtype == np.int64
    assert found.tolist() == [place.get(value, -1) for value in wanted]
    assert (asked == before).all()


@given(st.lists(SOME_ID, max_size=60), st.lists(SOME_ID, max_size=40))
@example([], [])
@example([], [LOWEST, 0])
@example([7], [])
@example([7], [6, 7, 8, LOWEST, HIGHEST])
@example([LOWEST, HIGHEST], [HIGHEST, LOWEST, 0, -1])
@example([HIGHEST - 1, HIGHEST], [HIGHEST, HIGHEST - 1, HIGHEST - 2, LOWEST])
@example([LOWEST, *range(-40, 41)], [LOWEST, *range(-45, 45), HIGHEST])
def test_it_is_a_dict(known: list[int], more: list[int]) -> None:
    neighbours = [value + step for value in known for step in (-1, 1) if LOWEST <= value + step <= HIGHEST]
    check(known, [*more, *reversed(known), *neighbours])


@pytest.mark.parametrize("crowd", [31, 32, 33, 34, 1000])
def test_crowded_ids_change_nothing(crowd: int) -> None:
    """Around the length at which the walk gives way to a binary search, and beyond."""
    for base in (LOWEST, 0, HIGHEST - 3 * crowd):
        near = [base + 3 * i for i in range(crowd)]
        wanted = [value + step for value in near for step in (0, 1)]
        check([*near, LOWEST, HIGHEST], [*wanted, LOWEST, HIGHEST, 12345])


def test_forged_ids_cost_no_walk() -> None:
    """All ids but one in one range: a walk would take one pass over the wanted ids an id."""
    ids = np.append(np.arange(100_000), HIGHEST)
    started = time.process_time()
    assert (find_ids(ids, ids) == np.arange(100_001)).all()
    assert time.process_time() - started < 1.0  # some 20 ms by binary search, over 10 s by walking


def test_many_uniform_ids() -> None:
    rng = np.random.default_rng(11)
    ids = np.unique(rng.integers(LOWEST, HIGHEST, 50_000, endpoint=True))
    present = rng.choice(ids, 20_000)
    absent = np.setdiff1d(rng.integers(LOWEST, HIGHEST, 20_000, endpoint=True), ids)
    assert (find_ids(ids, present) == np.searchsorted(ids, present)).all()
    assert (find_ids(ids, absent) == -1).all()


def test_a_view_with_a_step_can_be_asked_for() -> None:
    assert find_ids(np.array([1, 5, 9]), np.array([9, 0, 4, 0, 1])[::2]).tolist() == [2, -1, 0]
