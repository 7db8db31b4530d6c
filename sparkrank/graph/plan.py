"""The grid: how many stripes the hosts are cut into, and how many groups the sources.

The grid is a function of the number of edge rows alone, never of columns, cores or executors, because
the order of every sum follows from it.
"""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass

from sparkrank.kernels.edges import MAX_GROUP_STRIPES

# Stripes grow as the square root of the rows, from one at four million: wide stripes make long runs of
# equal destination, which are cheaper to sum, and every stripe reads a copy of the state.
_ROWS_PER_STRIPE_SQUARED = 1 << 22
_MAX_STRIPES = 32
# From about a billion rows on, source groups grow as the square root of the rows.
_ROWS_PER_GROUP_SQUARED = 1 << 30
# A build task sorts about this many edges, 0.5 GB of keys and ids, until groups are single stripes.
_ROWS_PER_TILE = 1 << 23


@dataclass(frozen=True, kw_only=True)
class GridPlan:
    """Stripes of hosts by hash range; groups of neighbouring stripes as sources.

    A tile is (destination stripe, build group), a cell of the solve (destination stripe, solve group);
    each solve group is a whole number of build groups.
    """

    stripes: int
    build_groups: int
    solve_groups: int

    def __post_init__(self) -> None:
        whole = self.stripes >= self.build_groups >= self.solve_groups >= 1
        if not whole or self.build_groups % self.solve_groups:
            raise ValueError(f"not a grid: {self}")
        if self.stripes > self.build_groups * MAX_GROUP_STRIPES:
            raise ValueError(f"more stripes a build group than a key can name: {self}")

    def build_group_of(self, stripe: int) -> int:
        return stripe * self.build_groups // self.stripes

    def stripes_of_build_group(self, group: int) -> range:
        return _members(group, self.build_groups, self.stripes)

    def build_groups_of_solve_group(self, group: int) -> range:
        return _members(group, self.solve_groups, self.build_groups)

    def as_dict(self) -> dict[str, int]:
        return asdict(self)


def plan_grid(n_rows: int) -> GridPlan:
    """The grid for an edge table of ``n_rows`` rows."""
    stripes = min(_MAX_STRIPES, max(1, math.ceil(math.sqrt(n_rows / _ROWS_PER_STRIPE_SQUARED))))
    solve_groups = max(1, round(math.sqrt(n_rows / _ROWS_PER_GROUP_SQUARED)))
    solve_groups = min(solve_groups, stripes)
    per_group = math.ceil(n_rows / (stripes * solve_groups * _ROWS_PER_TILE))
    per_group = max(1, min(per_group, stripes // solve_groups))
    return GridPlan(stripes=stripes, build_groups=solve_groups * per_group, solve_groups=solve_groups)


def _members(group: int, n_groups: int, n_members: int) -> range:
    """The members m with m * n_groups // n_members == group."""
    return range(-(-group * n_members // n_groups), -(-(group + 1) * n_members // n_groups))
