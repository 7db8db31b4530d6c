"""What each column of the solve starts from.

All columns are solved under one convention, x = c·T'x + (1-c)·v, and kept in scaled units,
x·N/(1-c): then  x = c·T'x + u  with u = N·v, a host without in-links has p = 1, and a residual in
these units is the error bound of every host divided by its PageRank.

- column 0, PageRank: u = 1 everywhere
- one column a slice of the good core: a member of weight w has u = γ·N·w / (weight of all members)
- with a known-spam list one more: u = 1 on each listed host
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays
from sparkrank.propagate.folder import SolveFolder


@dataclass(frozen=True, kw_only=True)
class Columns:
    """The columns of a solve and the start of each.

    ``column_of_entry[i]`` and ``start_of_entry[i]`` belong to row i of the core list; entries that the
    graph does not have are never asked for.
    """

    slices: tuple[str, ...]
    slice_shares: tuple[float, ...]
    """Share of γ of each slice column; they add up to 1."""
    column_of_entry: NDArray[np.int64]
    start_of_entry: NDArray[np.float64]
    has_known_spam: bool

    @property
    def names(self) -> tuple[str, ...]:
        known = ("known_spam",) if self.has_known_spam else ()
        return ("pagerank", *(f"trust: {name}" for name in self.slices), *known)

    @property
    def count(self) -> int:
        return 1 + len(self.slices) + self.has_known_spam


def plan_columns(
    entry_slices: list[str],
    entry_weights: NDArray[np.float64],
    column_of_slice: dict[str, int],
    slice_names: tuple[str, ...],
    weight_of: dict[str, float],
    *,
    good_share: float,
    n_hosts: int,
    has_known_spam: bool,
) -> Columns:
    """Columns for a core whose matched weights by slice are ``weight_of``."""
    total = sum(weight_of[name] for name in sorted(weight_of))
    shares = [0.0] * len(slice_names)
    for name in sorted(weight_of):
        shares[column_of_slice[name]] += weight_of[name] / total
    return Columns(
        slices=slice_names,
        slice_shares=tuple(shares),
        column_of_entry=np.array([1 + column_of_slice.get(name, -1) for name in entry_slices], np.int64),
        start_of_entry=good_share * n_hosts * entry_weights / total,
        has_known_spam=has_known_spam,
    )


def start_columns(
    columns: Columns, folder: SolveFolder, stripe: int, first: int, end: int
) -> NDArray[np.float64]:
    """u of the stripe's hosts at positions [first, end): shape (k, end - first)."""
    start = np.zeros((columns.count, end - first))
    start[0] = 1.0
    members = read_arrays(folder.members(stripe))
    inside = (members["position"] >= first) & (members["position"] < end)
    position, entry = members["position"][inside] - first, members["entry"][inside]
    core = entry >= 0
    start[columns.column_of_entry[entry[core]], position[core]] = columns.start_of_entry[entry[core]]
    if columns.has_known_spam:
        start[-1, position[~core]] = 1.0
    return start


def core_members(folder: SolveFolder, stripe: int, n_hosts: int) -> NDArray[np.bool_]:
    """Which of the stripe's hosts are members of the good core, in the solve's order: shape (n_hosts,)."""
    is_core = np.zeros(n_hosts, dtype=np.bool_)
    members = read_arrays(folder.members(stripe))
    is_core[members["position"][members["entry"] >= 0]] = True
    return is_core
