"""Shape columns and the order: against plain loops, and on graphs whose answer is plain to see."""

import math
from collections import Counter

import numpy as np
import pytest
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from sparkrank.kernels.shape import ShapeColumns, concentration, degree_class, priority, shape_columns
from sparkrank.kernels.sources import outside_support
from tests.kernels.kernels.supports import DAMPING, Support, gathered, random_edges

Edges = list[tuple[int, int]]


def shape_of(support: Support) -> ShapeColumns:
    return shape_columns(support.links, support.candidates, DAMPING)


def priority_of(support: Support) -> NDArray[np.float64]:
    return priority(shape_of(support), support.candidates)


def order_value(edges: Edges, target: int = 0) -> float:
    n = 1 + max(max(edge) for edge in edges)
    return float(priority_of(gathered(n, edges, [target]))[0])


@pytest.mark.parametrize("seed", range(4))
def test_columns_against_plain_loops(seed: int) -> None:
    random = np.random.default_rng(seed)
    domains = random.integers(0, 5, 30).tolist()
    candidates = [0, 5, 9, 20]
    support = gathered(30, random_edges(30, 120, seed), candidates, domains)
    found = shape_of(support)
    outside = outside_support(support.links, support.candidates, DAMPING)
    links = support.links
    chosen = np.count_nonzero(support.transition[:, candidates], axis=1)
    for place, x in enumerate(candidates):
        at = range(links.offsets[place], links.offsets[place + 1])
        given = {i: DAMPING * support.score[support.sources[i]] * links.transition[i] for i in at}
        total = math.fsum(given.values())
        by_domain: Counter[int] = Counter()
        by_suffix: Counter[int] = Counter()
        for i in at:
            by_domain[domains[support.sources[i]]] += given[i]
            by_suffix[int(support.sources[i]) % 2] += given[i]
        expected = {
            "exclusive_share": sum(given[i] * links.transition[i] for i in at),
            "returned_share": sum(given[i] for i in at if support.transition[x, support.sources[i]] > 0),
            "own_domain_share": sum(given[i] for i in at if domains[support.sources[i]] == domains[x]),
            "mutual_target_share": sum(given[i] for i in at if chosen[support.sources[i]] > 1),
            "unsupported_share": sum(given[i] * 0.1 / (0.1 + outside[i]) for i in at),
            "source_variety": total - sum(part**2 for part in given.values()) / total,
            "domain_concentration": sum(part**2 for part in by_domain.values()) / total,
            "suffix_concentration": sum(part**2 for part in by_suffix.values()) / total,
            "bound_share": sum(
                min(1.0, 5 * support.closeness[support.sources[i], place])
                * DAMPING * links.transition[i] * (links.score[i] - outside[i])
                for i in at
            ),
        }  # fmt: skip
        for name, value in expected.items():
            assert_allclose(getattr(found, name)[place], value / total, rtol=1e-12, atol=1e-15, err_msg=name)
        assert_allclose(found.bound_amount[place], expected["bound_share"], rtol=1e-12)
        breadth = sum(outside[i] / (0.1 + outside[i]) / links.out_degree[i] ** 0.5 for i in at)
        assert_allclose(found.independent_breadth[place], breadth, rtol=1e-12, atol=1e-15)


def test_alike_sources_have_about_as_many_links_in_and_out() -> None:
    """Two sources of one link, one of four: classes of two thirds and one third by count, by contribution
    8/9 and 1/9."""
    support = gathered(8, [(1, 0), (2, 0), (3, 0), (3, 4), (3, 5), (3, 6)], [0])
    assert_allclose(shape_of(support).alike_sources, (8 / 9) ** 2 + (1 / 9) ** 2, rtol=1e-12)


def test_a_class_of_sources_is_a_doubling_of_links_out_and_of_links_in() -> None:
    """Bounds of the classes, by Python's own count of binary digits."""
    out_degree, in_degree = (side.ravel() for side in np.meshgrid(np.arange(1, 34), np.arange(34)))
    links = gathered(4, [(1, 0)], [0]).links._replace(out_degree=out_degree, in_degree=in_degree)
    found = degree_class(links)
    pairs = zip(out_degree.tolist(), in_degree.tolist(), strict=True)
    expected = [(out.bit_length(), (inward + 1).bit_length()) for out, inward in pairs]
    numbers: dict[tuple[int, int], set[int]] = {}
    for pair, number in zip(expected, found.tolist(), strict=True):
        numbers.setdefault(pair, set()).add(number)
    assert all(len(each) == 1 for each in numbers.values())
    assert len(set().union(*numbers.values())) == len(numbers)


def test_concentration_of_candidates_without_links_or_weight_is_zero() -> None:
    support = gathered(4, [(1, 0), (2, 0)], [3, 0, 1])
    links = support.links
    assert_allclose(concentration(links, np.array([1.0, 3.0]), links.domain), [0, 0.625, 0], rtol=1e-12)
    assert_allclose(concentration(links, np.zeros(2), links.domain), 0.0)
    empty = gathered(3, [(0, 1)], [0, 2])
    assert_allclose(priority_of(empty), 0.0)


@pytest.mark.parametrize("k", [3, 30, 300])
def test_a_one_way_star_has_the_priority_of_its_arithmetic(k: int) -> None:
    """All factors 1 but the variety, 1 - 1/k, and ck of bound amount against half an independent host."""
    edges = [(booster, 0) for booster in range(1, k + 1)]
    expected = math.sqrt(1 - 1 / k) * math.log10(1 + DAMPING * k / 0.5)
    assert_allclose(order_value(edges), expected, rtol=1e-9, atol=0)


def test_farms_of_other_shapes_are_bound_all_the_way_down() -> None:
    k = 24
    boosters = range(1, k + 1)
    ring = [(b, 0) for b in boosters] + [(b, b % k + 1) for b in boosters] + [(0, 1)]
    two_tier = [(b, 0) for b in range(1, 5)] + [(0, b) for b in range(1, 5)]
    two_tier += [(4 + f, 1 + f % 4) for f in boosters]
    alliance = [(b, 0) for b in range(2, 14)] + [(b, 1) for b in range(14, 26)] + [(0, 1), (1, 0)]
    for edges in (ring, two_tier, alliance):
        n = 1 + max(max(edge) for edge in edges)
        found = shape_of(gathered(n, edges, [0]))
        assert_allclose(found.bound_share, 1.0, rtol=1e-9)
        assert_allclose(found.independent_breadth, 0.0, atol=1e-9)


def liked(k: int, stars: int) -> Edges:
    """Host 0 with k sources, each of which ``stars`` others link to among ten links of theirs."""
    edges = [(source, 0) for source in range(1, k + 1)]
    free = k + 1
    for source in range(1, k + 1):
        for _ in range(stars):
            edges += [(free, source), *((free, free + i) for i in range(1, 10))]
            free += 10
    return edges


def test_support_of_its_sources_from_elsewhere_speaks_for_a_host() -> None:
    """The same star, its sources better and better known: it falls, though its score rises."""
    values = [order_value(liked(10, stars)) for stars in (0, 2, 6)]
    assert values[0] > 1.2 * values[1] > 1.2**2 * values[2]


def test_a_legacy_of_one_source_is_no_farm() -> None:
    """What 20 sites give to one that hands it on is worth less than what they give themselves."""
    direct = [(booster, 0) for booster in range(1, 21)]
    handed_on = [(booster, 21) for booster in range(1, 21)] + [(21, 0)]
    assert order_value(handed_on) < order_value(direct) / 2


def test_what_else_takes_from_the_order() -> None:
    edges = [(booster, 0) for booster in range(1, 11)]
    apart = gathered(11, edges, [0])
    whole, columns = priority_of(apart)[0], apart.candidates
    own_domain = priority_of(gathered(11, edges, [0], [7] * 11))
    not_reached = columns._replace(core_reached=np.array([False]))
    handed_on = columns._replace(handed_on=np.array([0.5]))
    assert_allclose(own_domain, whole * 0.8, rtol=1e-9)
    assert_allclose(priority_of(apart._replace(candidates=not_reached)), whole * 0.85, rtol=1e-9)
    assert_allclose(priority_of(apart._replace(candidates=handed_on)), whole * 0.6, rtol=1e-9)


def test_relabelling_hosts_changes_nothing() -> None:
    edges = random_edges(25, 90, 11)
    moved = np.random.default_rng(5).permutation(25)
    renamed = [(int(moved[a]), int(moved[b])) for a, b in edges]
    first_support = gathered(25, edges, list(range(25)))
    second_support = gathered(25, renamed, moved.tolist())
    first, second = shape_of(first_support), shape_of(second_support)
    # Suffixes follow the numbers, so they are the one column that may differ.
    for name in set(ShapeColumns._fields) - {"suffix_concentration"}:
        assert_allclose(getattr(second, name), getattr(first, name), rtol=1e-9, atol=1e-12, err_msg=name)
    assert_allclose(
        priority(second, second_support.candidates),
        priority(first, first_support.candidates),
        rtol=1e-9,
        atol=1e-12,
    )
