"""What speaks against a candidate's scores, in words a reviewer reads before the scores.

The texts are fixed, without numbers, so that they can be filtered by; each is written once, here.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Set
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from sparkrank.kernels.farms import boosters_hidden_by_core_link, core_member_start

NOT_REACHED = "no path leads here from the good core: unknown, not spam"
ONE_SLICE = "leaving one slice out of the good core would take this host below the threshold"
BARE_SUFFIX = "the good core has next to no members under this public suffix"
THIN_CORE = "the good core is thin: one abused link from a member could hide a farm of a thousand hosts"
FEW_SLICES = "the good core has fewer than two slices: how stable the score is cannot be told"

ONE_MEMBER = "nearly all of its trust comes from one core member"

# A core member with ten out-links is an ordinary page; a farm of a thousand is a large one.
_LINK_OUT_LINKS = 10
_FARM_BOOSTERS = 1000.0
# A suffix with less than a tenth of the members that an even spread would give it is left out.
_EVEN_SHARE = 0.1
# All but a tenth: then the others hardly count.
_NEARLY_ALL = 0.9


@dataclass(frozen=True, kw_only=True)
class CoreStrength:
    """How much hangs on single members of the core.

    ``start`` is J, an average member's own share of trust, scaled.  ``hidden_boosters``: the largest
    back-linked farm that one link from a member with ten out-links keeps under the threshold; None at
    a threshold of 1.
    """

    start: float
    hidden_boosters: float | None
    slices: int

    @property
    def cautions(self) -> list[str]:
        """What every candidate of the run must carry."""
        found = []
        if self.slices < 2:
            found.append(FEW_SLICES)
        if self.hidden_boosters is not None and self.hidden_boosters >= _FARM_BOOSTERS:
            found.append(THIN_CORE)
        return found


def core_strength(
    *, good_share: float, n_hosts: int, n_core: int, slices: int, damping: float, min_relative_mass: float
) -> CoreStrength:
    """J of a core and the farm that one of its links hides under the threshold in force."""
    start = core_member_start(good_share, n_hosts, n_core)
    hidden = boosters_hidden_by_core_link(start, _LINK_OUT_LINKS, damping, min_relative_mass)
    return CoreStrength(start=start, hidden_boosters=hidden, slices=slices)


class SuffixMembers(NamedTuple):
    """Hosts of a public suffix, and how many of them are core members."""

    hosts: int
    members: int


def bare_suffixes(counts: Iterable[Mapping[str | None, SuffixMembers]]) -> set[str | None]:
    """Public suffixes with next to no core members: less than a tenth of what an even spread of the core
    over all hosts would give, or none.  ``counts`` are those of parts of the graph."""
    found: dict[str | None, SuffixMembers] = {}
    for part in counts:
        for suffix, count in part.items():
            before = found.get(suffix, SuffixMembers(0, 0))
            found[suffix] = SuffixMembers(before.hosts + count.hosts, before.members + count.members)
    hosts = sum(count.hosts for count in found.values())
    members = sum(count.members for count in found.values())
    return {
        suffix
        for suffix, count in found.items()
        if count.members == 0 or count.members < _EVEN_SHARE * (members * count.hosts / hosts)
    }


def caution_lists(
    columns: Mapping[str, pa.Array],
    bare: Set[str | None],
    strength: CoreStrength,
    min_relative_mass: float,
) -> pa.ListArray:
    """Cautions of candidates, whose scores and measures are ``columns``; what honest thing a shape may be
    comes from the shape."""
    reached = columns["core_reached"].to_numpy(zero_copy_only=False)
    # One slice decides where the whole core says candidate and some core without a slice does not.
    low = columns["relative_mass_low"].to_numpy(zero_copy_only=False)
    trust_share = columns["largest_core_member_trust_share"].to_numpy(zero_copy_only=False)
    is_bare = pc.is_in(columns["suffix"], value_set=pa.array(sorted(filter(None, bare)), pa.string()))
    is_bare = is_bare.to_numpy(zero_copy_only=False)
    if None in bare:
        is_bare = is_bare | columns["suffix"].is_null().to_numpy(zero_copy_only=False)
    # A null is NaN here, and over nothing.
    hold = {
        NOT_REACHED: ~reached,
        ONE_SLICE: reached & (low < min_relative_mass),
        BARE_SUFFIX: is_bare,
        ONE_MEMBER: trust_share >= _NEARLY_ALL,
        **{text: np.ones(len(reached), np.bool_) for text in strength.cautions},
    }
    masks = np.stack(list(hold.values()), axis=1)
    offsets = np.zeros(len(masks) + 1, dtype=np.int32)
    np.cumsum(np.count_nonzero(masks, axis=1), out=offsets[1:])
    texts = pa.array(list(hold), pa.string()).take(pa.array(np.nonzero(masks)[1]))
    return pa.ListArray.from_arrays(pa.array(offsets), texts)
