"""Planted farms of every shape, and honest neighbours that must not be drawn in."""

import numpy as np
import pytest

from tests.kernels.kernels.farm_groups import Links, groups_of, strong_of
from tests.kernels.kernels.supports import random_edges


def fan(hosts, to: int) -> Links:
    return [(u, to) for u in hosts]


def back(edges: Links) -> Links:
    return [*edges, *((b, a) for a, b in edges)]


def ring(hosts) -> Links:
    return [(u, hosts[(i + 1) % len(hosts)]) for i, u in enumerate(hosts)]


# Host 0 is the target of a single farm, 1 … 20 its boosters.
B = range(1, 21)
FEEDERS = [(21 + i, 1 + i % 20) for i in range(60)]
FARMS = {
    "star": ("star", fan(B, 0), [0]),
    "one back-link in many": ("star", [*fan(B, 0), (0, 1), *((0, v) for v in range(60, 70))], [0]),
    # All that the target has goes round by two boosters: amounts count, not numbers.
    "two back-links": ("star_with_back_links", [*fan(B, 0), (0, 1), (0, 2)], [0]),
    "star with decoys": ("star", [*fan(B, 0), *((u, 60 + u % 9) for u in B)], [0]),
    "back-links": ("star_with_back_links", back(fan(B, 0)), [0]),
    "ring": ("ring", [*fan(B, 0), *ring(B)], [0]),
    "ring both ways": ("ring", [*fan(B, 0), *back(ring(B))], [0]),
    "ring with back-links": ("ring", [*back(fan(B, 0)), *ring(B)], [0]),
    "ring with one strong booster": ("ring", [*fan(B, 0), *ring(B), (0, 1)], [0, 1, 2]),
    "two tiers": ("two_tier", [*fan(B, 0), *FEEDERS], [0]),
    "two tiers, back-links": ("two_tier", [*back(fan(B, 0)), *FEEDERS], [0]),
    "two tiers of candidates": (
        "two_tier",
        [*fan([1, 2, 3], 0), *((4 + i, 1 + i % 3) for i in range(60))],
        [0, 1, 2, 3],
    ),
    "alliance": ("alliance", [*fan(B, 0), *fan(range(22, 62), 21), (0, 21), (21, 0)], [0, 21]),
    "alliance of three": (
        "alliance",
        [*fan(B, 0), *fan(range(23, 43), 21), *fan(range(43, 63), 22), *back([(0, 21), (21, 22), (22, 0)])],
        [0, 21, 22],
    ),
    "shared boosters": ("alliance", [*back(fan(B, 0)), *back(fan(B, 21))], [0, 21]),
    "mixed": (
        "mixed",
        [*fan(B, 0), *fan(B, 21), (22, 0), *fan(range(23, 40), 22)],
        [0, 21, 22],
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", FARMS)
def test_planted_farms_are_one_group_of_their_shape(name) -> None:
    shape, edges, candidates = FARMS[name]
    (group,) = groups_of(90, edges, candidates)
    assert group.candidates == candidates
    assert group.shape == shape
    # All boosters that link to a candidate are in; decoys are not.
    sources = {u for u, x in edges if x in candidates} - set(candidates)
    assert set(group.boosters) == sources


def test_a_directory_holds_nothing_together() -> None:
    """Two farms on one list of links: their own groups, the list in none."""
    edges = [*fan(range(2, 22), 0), *fan(range(22, 42), 1), *((42, x) for x in [0, 1, *range(43, 60)])]
    first, second = groups_of(60, edges, [0, 1])
    assert first.boosters == list(range(2, 22))
    assert second.boosters == list(range(22, 42))


def test_one_shared_booster_holds_nothing_together() -> None:
    """It belongs where it gives more of what it has; where that is equal, to whom it means more."""
    edges = [*fan(range(2, 22), 0), *fan(range(22, 62), 1), (2, 1)]
    first, second = groups_of(62, edges, [0, 1])
    assert 2 in first.boosters
    assert second.boosters == list(range(22, 62))


@pytest.mark.parametrize(("shared", "groups"), [(4, 2), (11, 1)])
def test_a_quarter_of_what_each_gets_holds_together(shared, groups) -> None:
    """Of 20 boosters each, so many link to both, half of what they have to each."""
    both = range(2, 2 + shared)
    one, other = range(22, 42 - shared), range(42, 62 - shared)
    edges = [*fan(both, 0), *fan(both, 1), *fan(one, 0), *fan(other, 1)]
    # s halves of 2s·½ + (20 - s): 4 of them are 2/18, 11 are 5.5/14.5.
    assert len(groups_of(62, edges, [0, 1])) == groups


def test_a_popular_host_does_not_draw_farms_together() -> None:
    """Both targets link to it alone; among 600 readers' theirs hardly matter, among 20's they do."""
    farms = [*fan(range(3, 8), 0), *fan(range(8, 13), 1), (0, 2), (1, 2)]
    far = groups_of(613, [*farms, *fan(range(13, 613), 2)], [0, 1, 2])
    assert [group.candidates for group in far] == [[0], [1], [2]]
    near = groups_of(613, [*farms, *fan(range(13, 33), 2)], [0, 1, 2])
    assert [group.candidates for group in near] == [[0, 1, 2]]


@pytest.mark.parametrize("seed", range(4))
def test_no_host_has_more_than_ten_strong_links(seed) -> None:
    n = 60
    edges = random_edges(n, 500, seed)
    strong, support = strong_of(n, edges, range(n), domains=[0] * n)
    assert len(strong.source) > 50
    assert np.unique(strong.source, return_counts=True)[1].max() <= 10
    assert support.links.out_degree.max() > 10


def test_a_candidate_that_honest_hosts_carry_has_no_strong_links() -> None:
    """Twelve hosts with ten in-links each, one of whose ten links leads here, and one booster."""
    carriers = range(1, 13)
    edges = fan([*carriers, 13], 0)
    edges += [(u, 200 + (9 * u + i) % 90) for u in carriers for i in range(9)]
    edges += [(20 + 10 * u + i, u) for u in carriers for i in range(10)]
    strong, _ = strong_of(300, edges, [0])
    assert len(strong.source) == 0
    more, _ = strong_of(300, [*edges, *fan(range(14, 20), 0)], [0])
    assert more.source.tolist() == list(range(13, 20))


def test_a_core_member_is_a_booster_of_nobody() -> None:
    """Its page has one link, which somebody left there."""
    strong, _ = strong_of(21, fan(B, 0), [0], core=[7])
    assert strong.source.tolist() == [u for u in B if u != 7]


@pytest.mark.parametrize(("farms", "groups"), [(9, 10), (16, 16)])
def test_a_candidate_whose_sources_belong_elsewhere_is_in_no_group(farms, groups) -> None:
    """Two boosters of its own, and one of each of so many farms, to which that means more."""
    edges = [*fan([1, 2], 0)]
    for i in range(farms):
        target, boosters = 3 + 5 * i, range(4 + 5 * i, 8 + 5 * i)
        edges += [*fan(boosters, target), (boosters[0], 0)]
    candidates = [0, *range(3, 3 + 5 * farms, 5)]
    strong, _ = strong_of(83, edges, candidates)
    assert np.count_nonzero(strong.target == 0) == farms + 2
    found = groups_of(83, edges, candidates)
    # 1.7 of 1.7 + 9/2·0.85 is 0.31, of 1.7 + 16/2·0.85 it is 0.2.
    assert len(found) == groups
    assert [group.candidates for group in found if 0 not in group.candidates] == [[x] for x in candidates[1:]]
