"""Which slices of the core get a column of their own in the solve."""

import dataclasses
from collections.abc import Mapping

OTHER_SLICES = "(other slices)"
"""The name of the column that the lightest slices share; no slice of a list may have it."""

NO_SUFFIX = "(no suffix)"
"""The slice of an entry that names none and has no public suffix, such as an IP address."""


@dataclasses.dataclass(frozen=True, kw_only=True)
class SlicePlan:
    """`names` of the columns in order, and for each slice of the core the index of its column."""

    names: tuple[str, ...]
    column_of: Mapping[str, int]


def plan_slices(weight_by_slice: Mapping[str, float], max_slices: int) -> SlicePlan:
    """Columns for slices of the given total weights, at most `max_slices` (>= 1) of them.

    With no more slices than that each has its own, in name order. Otherwise the heaviest `max_slices - 1`
    keep theirs, in name order, and the rest share the last, named "(other slices)". Of equally heavy slices
    the one first by name is kept, so that the plan depends on nothing but names and weights.
    """
    if max_slices < 1:
        raise ValueError(f"max_slices: expected at least 1, found {max_slices}")
    by_weight = sorted(weight_by_slice, key=lambda name: (-weight_by_slice[name], name))
    if len(by_weight) <= max_slices:
        names = tuple(sorted(by_weight))
        return SlicePlan(names=names, column_of={name: i for i, name in enumerate(names)})
    kept = sorted(by_weight[: max_slices - 1])
    column_of = {name: i for i, name in enumerate(kept)}
    column_of.update({name: len(kept) for name in sorted(by_weight[max_slices - 1 :])})
    return SlicePlan(names=(*kept, OTHER_SLICES), column_of=column_of)
