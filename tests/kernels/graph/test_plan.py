"""The grid: its groups nest for any table, and it grows with the table as documented."""

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from sparkrank.graph.plan import GridPlan, plan_grid

ROWS = st.one_of(
    st.integers(0, 10**11),
    st.floats(0, 11).map(lambda exponent: int(10**exponent)),
    st.integers(0, 37).map(lambda power: 2**power),
)
# Documented: stripes are the square root of the rows over this, up to the most; rows of a build task.
ONE_STRIPE, MAX_STRIPES, ROWS_PER_TILE = 1 << 22, 32, 1 << 23


def check_groups(plan: GridPlan) -> None:
    """Every stripe is in one build group, every build group in one solve group, in order, none empty."""
    members = [plan.stripes_of_build_group(group) for group in range(plan.build_groups)]
    assert [stripe for group in members for stripe in group] == list(range(plan.stripes))
    for group, stripes in enumerate(members):
        assert {plan.build_group_of(stripe) for stripe in stripes} == {group}
    sizes = {len(stripes) for stripes in members}
    assert max(sizes) - min(sizes) <= 1
    outer = [plan.build_groups_of_solve_group(group) for group in range(plan.solve_groups)]
    assert [group for build in outer for group in build] == list(range(plan.build_groups))
    assert {len(build) for build in outer} == {plan.build_groups // plan.solve_groups}


@given(ROWS)
@example(0)
@example(1)
@example(10**11)
def test_groups_nest_and_stay_within_the_limits(rows: int) -> None:
    plan = plan_grid(rows)
    check_groups(plan)
    assert plan_grid(rows) == plan
    assert plan.stripes <= MAX_STRIPES
    if plan.stripes < MAX_STRIPES:
        assert (plan.stripes - 1) ** 2 * ONE_STRIPE < max(1, rows) <= plan.stripes**2 * ONE_STRIPE
    # As far as 32 stripes can be cut; beyond, a tile grows with the table.
    if rows <= 8 * 10**9:
        assert rows <= plan.stripes * plan.build_groups * ROWS_PER_TILE


@given(ROWS, ROWS)
def test_more_rows_never_have_fewer_stripes_or_solve_groups(one: int, other: int) -> None:
    small, large = plan_grid(min(one, other)), plan_grid(max(one, other))
    assert small.stripes <= large.stripes
    assert small.solve_groups <= large.solve_groups


@pytest.mark.parametrize(
    ("rows", "stripes", "solve_groups"),
    [
        (0, 1, 1),
        (ONE_STRIPE, 1, 1),
        (ONE_STRIPE + 1, 2, 1),
        (55_600_000, 4, 1),
        (31**2 * ONE_STRIPE + 1, 32, 2),
        # Source groups from about a billion rows on, as the square root of the rows.
        (2 << 30, 23, 1),
        (4 << 30, 32, 2),
        (16 << 30, 32, 4),
        (64 << 30, 32, 8),
    ],
)
def test_grid_of_some_tables(rows: int, stripes: int, solve_groups: int) -> None:
    plan = plan_grid(rows)
    assert (plan.stripes, plan.solve_groups) == (stripes, solve_groups)


@given(st.integers(1, 80), st.integers(1, 80), st.integers(1, 80))
def test_any_grid_is_whole_or_refused(stripes: int, build: int, solve: int) -> None:
    if stripes >= build >= solve and build % solve == 0:
        plan = GridPlan(stripes=stripes, build_groups=build, solve_groups=solve)
        check_groups(plan)
        assert GridPlan(**plan.as_dict()) == plan
    else:
        with pytest.raises(ValueError, match="not a grid: GridPlan"):
            GridPlan(stripes=stripes, build_groups=build, solve_groups=solve)


def test_a_build_group_has_no_more_stripes_than_a_key_can_name() -> None:
    check_groups(GridPlan(stripes=256, build_groups=2, solve_groups=1))
    with pytest.raises(ValueError, match="more stripes a build group than a key can name"):
        GridPlan(stripes=257, build_groups=2, solve_groups=1)
    with pytest.raises(ValueError, match="not a grid"):
        GridPlan(stripes=1, build_groups=0, solve_groups=0)
