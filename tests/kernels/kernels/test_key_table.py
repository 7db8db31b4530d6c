"""Numbers of distinct keys against a plain dictionary."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.kernels import key_table
from sparkrank.kernels.key_table import KeyTable


def check(table: KeyTable, keys: np.ndarray, known: dict[int, int]) -> None:
    """A call's answer against the dictionary of all calls, which it extends."""
    before = len(known)
    numbers, new = table.number(keys)
    assert sorted(keys[new].tolist()) == sorted(set(keys.tolist()) - set(known))
    known.update(zip(keys[new].tolist(), range(before, before + len(new)), strict=True))
    assert numbers.tolist() == [known[key] for key in keys.tolist()]
    assert table.count == len(known)


@given(st.lists(st.lists(st.integers(1, 60), max_size=40), max_size=6), st.integers(0, 2**58 - 1))
def test_numbers_are_a_dictionary_s(calls: list[list[int]], crowd: int) -> None:
    # Keys of one crowd have the same upper bits, and so the same slot: they walk on.
    table, known = KeyTable(), {}
    for keys in calls:
        check(table, np.array([(crowd << 6) + key for key in keys], np.uint64), known)


@pytest.mark.parametrize("expected", [0, 300_000])
def test_the_table_grows_and_forgets_nothing(expected: int) -> None:
    rng = np.random.default_rng(7)
    table, known = KeyTable(expected), {}
    for n_distinct in (10, 50_000, 200_000):
        pool = rng.integers(1, 2**64, n_distinct, dtype=np.uint64)
        check(table, pool[rng.integers(0, n_distinct, 150_000)], known)


def test_keys_behind_the_last_slot_begin_again_at_the_first() -> None:
    table, known = KeyTable(), {}
    top = np.arange(2**64 - 50, 2**64, dtype=np.uint64)
    check(table, np.concatenate((top, top[::-1])), known)
    check(table, np.arange(1, 50, dtype=np.uint64), known)


def test_all_keys_in_one_slot_of_a_table_that_grows(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(key_table, "_FIRST_BITS", 4)
    table, known = KeyTable(), {}
    for first in range(1, 400, 40):
        check(table, np.arange(first, first + 60, dtype=np.uint64), known)


def test_no_keys() -> None:
    numbers, new = KeyTable().number(np.zeros(0, np.uint64))
    assert len(numbers) == len(new) == 0
