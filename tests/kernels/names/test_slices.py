"""Slice planning: who keeps a column, ties, and that nothing but names and weights decides."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.names.slices import OTHER_SLICES, plan_slices


def test_few_slices_keep_their_own_in_name_order() -> None:
    plan = plan_slices({"press": 1.0, "academic": 5.0}, 2)
    assert plan.names == ("academic", "press")
    assert plan.column_of == {"academic": 0, "press": 1}
    assert plan_slices({}, 3).names == ()


def test_the_lightest_are_merged() -> None:
    plan = plan_slices({"a": 1.0, "b": 4.0, "c": 2.0, "d": 3.0}, 3)
    assert plan.names == ("b", "d", OTHER_SLICES)
    assert plan.column_of == {"b": 0, "d": 1, "a": 2, "c": 2}


def test_ties_go_by_name() -> None:
    assert plan_slices({"c": 1.0, "b": 1.0, "a": 1.0}, 2).names == ("a", OTHER_SLICES)


def test_one_column_takes_all() -> None:
    plan = plan_slices({"a": 1.0, "b": 2.0}, 1)
    assert (plan.names, plan.column_of) == ((OTHER_SLICES,), {"a": 0, "b": 0})
    with pytest.raises(ValueError, match="max_slices: expected at least 1, found 0"):
        plan_slices({"a": 1.0}, 0)


@given(
    st.dictionaries(st.text(max_size=3), st.integers(1, 3).map(float), max_size=12),
    st.integers(1, 8),
    st.randoms(use_true_random=False),
)
def test_every_slice_has_a_column_whatever_the_order(weights, limit, random) -> None:  # type: ignore[no-untyped-def]
    plan = plan_slices(weights, limit)
    assert len(plan.names) == min(len(weights), limit)
    assert set(plan.column_of) == set(weights)
    assert set(plan.column_of.values()) == set(range(len(plan.names)))
    shuffled = list(weights.items())
    random.shuffle(shuffled)
    assert plan_slices(dict(shuffled), limit) == plan
    merged = [s for s in weights if plan.names[plan.column_of[s]] == OTHER_SLICES and len(weights) > limit]
    own = [s for s in weights if s not in merged]
    assert all(weights[a] >= weights[b] for a in own for b in merged)
