"""Packed keys to the limits of their bits, merged duplicates and totals, against dicts."""

from collections import Counter
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from sparkrank.kernels.edges import (
    MAX_GROUP_STRIPES,
    MAX_STRIPE_HOSTS,
    destinations,
    merge_duplicates,
    out_totals,
    pack_keys,
    sources,
    split_by_stripe,
)

STRIPE = st.one_of(st.integers(0, MAX_GROUP_STRIPES - 1), st.just(MAX_GROUP_STRIPES - 1))
HOST = st.one_of(st.integers(0, MAX_STRIPE_HOSTS - 1), st.sampled_from([0, MAX_STRIPE_HOSTS - 1]))
EDGE = st.tuples(STRIPE, HOST, HOST)
# Few hosts, so that duplicates are the rule.
SMALL_EDGE = st.tuples(st.integers(0, 2), st.integers(0, 3), st.integers(0, 3))


def keys_of(edges: list[tuple[int, int, int]]) -> np.ndarray:
    columns = np.array(edges, dtype=np.int64).reshape(-1, 3)
    return pack_keys(columns[:, 0], columns[:, 1], columns[:, 2])


@given(st.lists(EDGE, max_size=30))
def test_keys_hold_what_was_packed_and_sort_as_it_does(edges: list[tuple[int, int, int]]) -> None:
    keys = keys_of(edges)
    assert (keys >= 0).all()
    assert destinations(keys).tolist() == [destination for _, destination, _ in edges]
    assert sources(keys).tolist() == [source for _, _, source in edges]
    assert np.sort(keys).tolist() == keys_of(sorted(edges)).tolist()
    assert len(set(keys.tolist())) == len(set(edges))


@given(st.lists(EDGE, max_size=30), st.integers(0, MAX_GROUP_STRIPES))
@example([(0, 1, 2), (MAX_GROUP_STRIPES - 1, MAX_STRIPE_HOSTS - 1, 0)], MAX_GROUP_STRIPES)
def test_keys_split_by_stripe(edges: list[tuple[int, int, int]], n_stripes: int) -> None:
    edges = sorted(edge for edge in edges if edge[0] < n_stripes)
    bounds = split_by_stripe(keys_of(edges), n_stripes)
    assert bounds.shape == (n_stripes + 1,)
    parts = [edges[low:high] for low, high in pairwise(bounds.tolist())]
    assert parts == [[edge for edge in edges if edge[0] == stripe] for stripe in range(n_stripes)]


@given(st.lists(SMALL_EDGE, max_size=40))
def test_uniform_duplicates_merge(edges: list[tuple[int, int, int]]) -> None:
    merged = merge_duplicates(keys_of(edges), None)
    assert merged.weights is None
    assert merged.keys.tolist() == keys_of(sorted(set(edges))).tolist()


@given(st.lists(st.tuples(SMALL_EDGE, st.integers(1, 2**55)), max_size=40))
def test_weights_of_duplicates_add_up(rows: list[tuple[tuple[int, int, int], int]]) -> None:
    totals: Counter[tuple[int, int, int]] = Counter()
    for edge, weight in rows:
        totals[edge] += weight
    merged = merge_duplicates(
        keys_of([edge for edge, _ in rows]), np.array([weight for _, weight in rows], dtype=np.int64)
    )
    assert merged.weights is not None
    assert merged.keys.tolist() == keys_of(sorted(totals)).tolist()
    # Exactly: sums of integers above 2**53 are no business of float64.
    assert merged.weights.tolist() == [totals[edge] for edge in sorted(totals)]


@pytest.mark.parametrize("weighted", [False, True])
def test_no_edges(weighted: bool) -> None:
    none = np.zeros(0, dtype=np.int64)
    merged = merge_duplicates(none, none if weighted else None)
    assert len(merged.keys) == 0
    assert (merged.weights is not None) == weighted
    assert out_totals(none, none if weighted else None, 3).tolist() == [0, 0, 0]
    assert split_by_stripe(none, 2).tolist() == [0, 0, 0]


@given(st.lists(st.tuples(st.integers(0, 6), st.integers(1, 2**55)), max_size=40))
def test_totals_out_of_each_host(links: list[tuple[int, int]]) -> None:
    source = np.array([host for host, _ in links], dtype=np.int64)
    weight = np.array([value for _, value in links], dtype=np.int64)
    degrees = out_totals(source, None, 9)
    totals = out_totals(source, weight, 9)
    assert degrees.dtype == totals.dtype == np.int64
    assert degrees.tolist() == [sum(host == h for host, _ in links) for h in range(9)]
    assert totals.tolist() == [sum(value for host, value in links if host == h) for h in range(9)]
