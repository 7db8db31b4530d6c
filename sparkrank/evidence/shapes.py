"""Sources of a group of targets → the arrays that the shape kernels take, and the measures they give."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays
from sparkrank.evidence.paths import Gathering
from sparkrank.evidence.sources import DIRECT, ORIGIN, Sources
from sparkrank.kernels.belonging import StrongLinks, strong_links
from sparkrank.kernels.reasons import Marks, marks
from sparkrank.kernels.shape import priority, shape_columns
from sparkrank.kernels.sources import (
    CandidateArrays,
    DirectLinks,
    captive_weight,
    closeness_of,
    kind_sums,
    outside_support,
    source_kinds,
)

_SOURCE_BITS = 40  # hosts of the whole graph
_SOURCE_MASK = (1 << _SOURCE_BITS) - 1
_DISTANCES = 3
_LINK_TYPES = {
    "target": np.int64,
    "scaled_pagerank": np.float64,
    "transition": np.float64,
    "returned": np.bool_,
    "followed": np.bool_,
    "in_degree": np.int64,
    "out_degree": np.int64,
    "domain": np.int64,
    "suffix": np.int64,
    "targets_linked": np.int64,
}


@dataclass(frozen=True, kw_only=True)
class GroupShapes:
    """Measures by name, shape (n,) each; ``kind_of`` says what the direct sources look like."""

    measures: dict[str, NDArray[Any]]
    direct_keys: NDArray[np.int64]
    """Sorted keys of all direct links: see ``source_keys``."""
    kinds: NDArray[np.int8]
    """What each of these looks like, by number."""
    marks: Marks

    strong: StrongLinks
    """What may hold the targets and their sources together."""

    def kind_of(self, keys: NDArray[np.int64]) -> NDArray[np.int8]:
        """Kinds of some of the direct links."""
        return self.kinds[np.searchsorted(self.direct_keys, keys)]


def source_keys(target: NDArray[np.int64], source: NDArray[np.int64]) -> NDArray[np.int64]:
    """One number a pair of a target (counted in its group) and a source."""
    return (target << _SOURCE_BITS) | source


def read_sources(
    gathering: Gathering, kind: str, chunks: list[int], low: int, high: int
) -> tuple[Sources, NDArray[np.int64]]:
    """Sources of targets [low, high) by target and source, and their keys; targets count from ``low``."""
    parts: list[Sources] = []
    for stripe, count in enumerate(chunks):
        for chunk in range(count):
            found = read_arrays(gathering.folder.sources(kind, stripe, chunk))
            first, end = np.searchsorted(found["target"], (low, high))
            if first < end:
                parts.append({name: values[first:end] for name, values in found.items()})
    if not parts:
        return {}, np.zeros(0, np.int64)
    joined = {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
    joined["target"] = joined["target"].astype(np.int64) - low
    keys = source_keys(joined["target"], joined["source"])
    order = np.argsort(keys)
    return {name: values[order] for name, values in joined.items()}, keys[order]


def group_shapes(
    gathering: Gathering,
    chunks: dict[str, list[int]],
    low: int,
    high: int,
) -> GroupShapes:
    """Measures of targets [low, high)."""
    n, damping = high - low, gathering.damping
    origins, origin_keys = read_sources(gathering, ORIGIN, chunks[ORIGIN], low, high)
    targets = _own_values(gathering, low, high)
    # Every target is an origin of its own, at distance 0.
    own = np.flatnonzero(origins["distance"] == 0)
    self_support = origins["contribution"][own]
    of = origins["target"]
    closeness = closeness_of(origins["contribution"], self_support[of], origins["distance"], damping)
    weight = np.where(origins["distance"] == 0, 1.0, captive_weight(closeness))
    over_two = origins["over_short_paths"][:, 2]
    circulating = np.zeros(n)
    circulating += np.bincount(of, origins["scaled_pagerank"] * over_two * weight, minlength=n)
    arrays = CandidateArrays(
        score=targets["scaled_pagerank"],
        out_degree=targets["out_degree"],
        domain=targets["domain"],
        self_support=self_support,
        circulating=circulating,
        handed_on=_handed_on(gathering, low, high),
        core_reached=targets["core_steps"] > 0,
    )
    direct, keys = read_sources(gathering, DIRECT, chunks[DIRECT], low, high)
    links = _links(direct, n, closeness[np.searchsorted(origin_keys, keys)] if direct else np.zeros(0))
    shape = shape_columns(links, arrays, damping)
    kinds = source_kinds(links, arrays, outside_support(links, arrays, damping))
    sums = kind_sums(links, arrays, kinds, damping)
    measures: dict[str, NDArray[Any]] = {
        "priority": priority(shape, arrays),
        "handed_on_share": arrays.handed_on,
        **shape._asdict(),
        **sums._asdict(),
        **_origin_measures(origins, targets, n),
        "largest_core_member_trust_share": _largest_member(gathering, origins, targets),
    }
    is_core = direct["is_core"] if direct else np.zeros(0, np.bool_)
    return GroupShapes(
        measures=measures,
        direct_keys=keys,
        kinds=kinds,
        marks=marks(shape, arrays, sums),
        strong=strong_links(links, keys & _SOURCE_MASK, is_core, kinds, arrays, damping),
    )


def _own_values(gathering: Gathering, low: int, high: int) -> dict[str, NDArray[Any]]:
    """The targets' own scores."""
    hosts = gathering.targets.host[low:high]
    firsts = gathering.neighbours.firsts
    stripes = np.searchsorted(firsts, hosts, side="right") - 1
    names = ("scaled_pagerank", "trust", "out_degree", "domain", "core_steps")
    parts: dict[str, list[NDArray[Any]]] = {name: [] for name in names}
    for stripe in np.unique(stripes).tolist():
        values = gathering.neighbours.values(stripe)
        here = hosts[stripes == stripe] - firsts[stripe]
        for name in names:
            parts[name].append(values[name][here])
    joined = {name: np.concatenate(values) for name, values in parts.items()}
    joined["out_degree"] = joined["out_degree"].astype(np.int64)
    return joined


def _handed_on(gathering: Gathering, low: int, high: int) -> NDArray[np.float64]:
    parts = [
        read_arrays(gathering.folder.handed_on(stripe))["share"]
        for stripe in range(gathering.graph.plan.stripes)
    ]
    return np.concatenate(parts)[low:high]


def _links(direct: Sources, n: int, closeness: NDArray[np.float64]) -> DirectLinks:
    if not direct:
        direct = {name: np.zeros(0, dtype) for name, dtype in _LINK_TYPES.items()}
    offsets = np.searchsorted(direct["target"], np.arange(n + 1)).astype(np.int64)
    return DirectLinks(
        offsets=offsets,
        score=direct["scaled_pagerank"],
        transition=direct["transition"],
        closeness=np.maximum(closeness, direct["transition"]),
        returned=direct["returned"],
        followed=direct["followed"],
        in_degree=direct["in_degree"],
        out_degree=direct["out_degree"],
        domain=direct["domain"],
        suffix=direct["suffix"],
        candidates=direct["targets_linked"],
    )


def _origin_measures(origins: Sources, targets: dict[str, NDArray[Any]], n: int) -> dict[str, NDArray[Any]]:
    """Shares by distance of the origin and by length of path; hosts by distance.

    Supporters by distance and their least growth, min over d of N_d / N_{d-1} with N_d the hosts within d
    links: Becchetti, Castillo, Donato, Leonardi & Baeza-Yates, "Link-based characterization and detection of
    web spam", AIRWeb 2006 (from memory), as is the share of long paths (truncated PageRank).
    """
    of, distance = origins["target"], origins["distance"]
    score = targets["scaled_pagerank"]
    found: dict[str, NDArray[Any]] = {}
    within = np.ones(n)
    growth = np.full(n, np.inf)
    for steps in range(1, _DISTANCES + 1):
        near = np.where(distance <= steps, origins["contribution"], 0.0)
        found[f"share_within_{steps}"] = np.bincount(of, near, minlength=n) / score
        supporters = np.bincount(of[distance == steps], minlength=n)
        found[f"supporters_at_{steps}"] = supporters
        growth = np.minimum(growth, (within + supporters) / within)
        within = within + supporters
    found["supporter_growth"] = growth
    short = np.bincount(of, origins["over_short_paths"].sum(axis=1), minlength=n)
    found["long_path_share"] = np.maximum(0.0, 1.0 - short / score)
    return found


def _largest_member(
    gathering: Gathering, origins: Sources, targets: dict[str, NDArray[Any]]
) -> NDArray[np.float64]:
    """The largest part of a target's trust from one core member; NaN where it has none.

    A member of weight w starts from good_share·N·w / (weight of all), and gives that times its g.
    """
    trust = targets["trust"]
    largest = np.zeros(len(trust))
    start = gathering.all_trust / gathering.core_weight * origins["core_weight"]
    np.maximum.at(largest, origins["target"], start * origins["contribution"])
    share: NDArray[np.float64] = np.full(len(trust), np.nan)
    np.divide(largest, trust, out=share, where=trust > 0)
    return share
