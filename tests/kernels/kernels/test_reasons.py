"""Reasons and cautions: each text held against the graph that it describes, and against one it does not."""

import pytest

from sparkrank.kernels.reasons import CAUTIONS, MOST_REASONS, REASONS, marks
from sparkrank.kernels.shape import shape_columns
from sparkrank.kernels.sources import kind_sums, outside_support, source_kinds
from tests.kernels.kernels.supports import DAMPING, gathered, random_edges

Edges = list[tuple[int, int]]
SIZES = range(1, 25)
STAR: Edges = [(source, 0) for source in SIZES]
BACK: Edges = [*STAR, *((0, source) for source in SIZES)]
RING: Edges = [*STAR, *((source, source % 24 + 1) for source in SIZES)]
SHARED: Edges = [*STAR, *((source, 25) for source in SIZES)]


def told(
    edges: Edges, candidates: list[int], domains: list[int] | None = None
) -> tuple[list[str], list[str]]:
    """Reasons and cautions of the first candidate."""
    n = 1 + max(max(edge) for edge in edges)
    support = gathered(n, edges, candidates, domains)
    shape = shape_columns(support.links, support.candidates, DAMPING)
    outside = outside_support(support.links, support.candidates, DAMPING)
    kinds = source_kinds(support.links, support.candidates, outside)
    found = marks(shape, support.candidates, kind_sums(support.links, support.candidates, kinds, DAMPING))
    reasons = [text for text, holds in zip(REASONS, found.reasons[0], strict=True) if holds]
    return reasons, [text for text, holds in zip(CAUTIONS, found.cautions[0], strict=True) if holds]


def test_a_star_has_the_first_reasons_and_the_footer_caution() -> None:
    assert told(STAR, [0]) == ([REASONS[0], REASONS[5], REASONS[6]], [CAUTIONS[1]])


def test_a_host_without_links_has_none() -> None:
    assert told(STAR, [1])[0] == []


@pytest.mark.parametrize(
    ("edges", "candidates", "domains", "caution"),
    [
        (STAR, [0], [0] * 25, 0),
        (STAR, [0], None, 1),
        (RING, [0], None, 2),
        (BACK, [0], None, 3),
    ],
)
def test_cautions(edges: Edges, candidates: list[int], domains: list[int] | None, caution: int) -> None:
    assert CAUTIONS[caution] in told(edges, candidates, domains)[1]
    others = {0: BACK, 1: BACK, 2: STAR, 3: STAR}
    assert CAUTIONS[caution] not in told(others[caution], candidates)[1]


@pytest.mark.parametrize(
    ("edges", "candidates", "domains", "reason"),
    [
        (BACK, [0], None, 1),
        (SHARED, [0, 25], None, 2),
        (STAR, [0], [0] + [1] * 24, 3),
    ],
)
def test_reasons(edges: Edges, candidates: list[int], domains: list[int] | None, reason: int) -> None:
    assert REASONS[reason] in told(edges, candidates, domains)[0]
    assert REASONS[reason] not in told(STAR, [0])[0]


def test_links_of_open_pages_are_a_reason() -> None:
    """Twenty guest books, each linked to by somebody and linking to thirty hosts."""
    books: Edges = [(40 + book, 100 + 29 * book + i) for book in range(20) for i in range(29)]
    books += [(60 + book, 40 + book) for book in range(20)] + [(40 + book, 0) for book in range(20)]
    books += [(60 + book, 700 + i) for book in range(20) for i in range(30)]
    assert REASONS[4] in told([*STAR, *books], [0])[0]


def test_hosts_with_support_of_their_own_are_a_caution_and_take_a_reason() -> None:
    """Each source has ten friends that link to nine others."""
    friends: Edges = [(300 + 10 * s + i, s) for s in SIZES for i in range(10)]
    friends += [(300 + 10 * s + i, 600 + 9 * i + j) for s in SIZES for i in range(10) for j in range(9)]
    reasons, cautions = told([*STAR, *friends], [0])
    assert CAUTIONS[4] in cautions
    assert REASONS[6] not in reasons
    assert CAUTIONS[4] not in told(STAR, [0])[1]


def test_no_more_than_three_reasons_and_no_more_than_hold() -> None:
    counts = {
        len(told(random_edges(20, 90, seed), [host, (host + 1) % 20])[0])
        for seed in range(3)
        for host in range(20)
    }
    assert counts <= set(range(MOST_REASONS + 1))
    assert len(counts) > 1
