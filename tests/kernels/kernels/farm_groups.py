"""Groups of a small planted graph, by the kernels alone: what the tasks do over files."""

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from sparkrank.kernels.belonging import (
    LEAST_OWED,
    LEAST_STRONG,
    StrongLinks,
    held_by_links,
    held_by_sources,
    homes,
    shared_sources,
    strong_links,
)
from sparkrank.kernels.components import distinct_edges, labels, stars
from sparkrank.kernels.group_shapes import SHAPE_NAMES, GroupSums, hands_over, shapes
from sparkrank.kernels.sources import outside_support, source_kinds
from tests.kernels.kernels.supports import DAMPING, gathered

Links = list[tuple[int, int]]


class Group(NamedTuple):
    candidates: list[int]
    boosters: list[int]
    shape: str


def strong_of(
    n: int,
    edges: Links,
    candidates: Sequence[int],
    domains: Sequence[int] | None = None,
    core: Sequence[int] = (),
):
    """Strong links of a graph's candidates, and its exact support."""
    support = gathered(n, edges, candidates, domains)
    links, arrays = support.links, support.candidates
    kinds = source_kinds(links, arrays, outside_support(links, arrays, DAMPING))
    is_core = np.isin(support.sources, list(core))
    return strong_links(links, support.sources, is_core, kinds, arrays, DAMPING), support


def own_numbers(strong: StrongLinks, candidates: Sequence[int]) -> np.ndarray:
    number = {host: i for i, host in enumerate(candidates)}
    return np.array([number.get(host, -1) for host in strong.source.tolist()], dtype=np.int64)


def groups_of(
    n: int, edges: Links, candidates: Sequence[int], domains: Sequence[int] | None = None
) -> list[Group]:
    """Groups of three hosts and more, by their least candidates; candidates must rise."""
    strong, support = strong_of(n, edges, candidates, domains)
    own = own_numbers(strong, candidates)
    pairs = np.concatenate(
        (held_by_sources(shared_sources(strong)), held_by_links(strong, own)), axis=1, dtype=np.int64
    )
    label = labels(len(candidates), stars(distinct_edges(*pairs)))
    found_homes = homes(strong)
    leaves = [(u, int(label[x])) for u, x, _ in zip(*found_homes, strict=True) if u not in candidates]
    group_of = {**dict(leaves), **{host: int(label[i]) for i, host in enumerate(candidates)}}
    found = []
    for first in sorted(set(label.tolist())):
        members = [host for host in range(n) if group_of.get(host) == first]
        if len(members) >= 3:
            found.append(_described(first, members, group_of, strong, own, candidates, support, found_homes))
    return [group for group in found if group is not None]


def _described(first, members, group_of, strong, own, candidates, support, found_homes) -> Group | None:
    inside = np.array(
        [
            group_of[candidates[x]] == first == group_of.get(u)
            for u, x in zip(strong.source, strong.target, strict=True)
        ]
    )
    between = inside & (own >= 0) & (strong.of_all >= LEAST_OWED)
    links_of = dict(zip(found_homes.source.tolist(), found_homes.links.tolist(), strict=True))
    alone = inside & (own < 0) & np.array([links_of[u] == 1 for u in strong.source.tolist()], dtype=bool)
    score = support.candidates.score
    up = between & hands_over(score[own], score[strong.target])
    low = {int(x) for x in own[up]}
    in_group = [host for host in members if host in candidates]
    sums = GroupSums(
        candidates=np.array([len(in_group)]),
        final=np.array([len(in_group) - len(low)]),
        **{
            name: np.array([getattr(strong, name)[inside].sum()])
            for name in ("given", "returned", "started", "inherited")
        },
        given_to_one=np.array([strong.given[alone].sum()]),
        circling=np.array([strong.circling[alone].sum()]),
    )
    carried = sum(support.score[host] - 1 for host in in_group)
    if sums.given[0] < LEAST_STRONG * carried:
        return None
    shape = SHAPE_NAMES[shapes(sums)[0]]
    return Group(in_group, [host for host in members if host not in candidates], shape)
