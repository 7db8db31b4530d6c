"""Whatever the graph: other names change nothing but names, hosts without edges nothing but N and J."""

import numpy as np
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from tests.reference import dense_solve
from tests.steps.graphs import make_crawl

GOOD_SHARE = 0.5

pairs = st.tuples(st.integers(0, 7), st.integers(0, 7))
graphs = st.lists(pairs, min_size=1, max_size=24).filter(lambda edges: any(u != v for u, v in edges))


# A build an example: few of them, the same ones each time, and no hour spent on making one smaller.
@settings(max_examples=5, deadline=None, derandomize=True, phases=[Phase.generate])
@given(edges=graphs, n_lonely=st.integers(1, 3), data=st.data())
def test_names_and_lonely_hosts(
    spark, tmp_path_factory: pytest.TempPathFactory, edges, n_lonely, data
) -> None:
    """The graph twice, under different names, and hosts that nobody links to or from."""
    numbers = sorted({number for edge in edges for number in edge})
    members = data.draw(st.lists(st.sampled_from(numbers), min_size=1, unique=True))
    names = ("a", "zz.other")
    rows = [tuple(f"{name}{number}.example" for number in edge) for name in names for edge in edges]
    core = [(f"{name}{number}.example", f"slice {number % 2}") for name in names for number in members]
    lonely = [f"lonely{i}.example" for i in range(n_lonely)]
    given = {"mass__good_share": GOOD_SHARE, "solve__tolerance": 1e-12, "solve__max_steps": 400}
    scored = make_crawl(spark, tmp_path_factory.mktemp("named"), rows, core, hosts=lonely, **given).run()

    hosts = [[f"{name}{number}.example" for number in numbers] for name in names]
    assert scored.hosts == sorted([*hosts[0], *hosts[1], *lonely])
    by_host = {row["host"]: row for row in scored.table.to_pylist()}
    for column in scored.table.column_names:
        first, second = ([by_host[host][column] for host in under] for under in hosts)
        if column in ("suffix", "is_core", "core_reached", "core_distance") or first[0] is None:
            assert first == second, column
        elif column not in ("host", "domain"):
            assert first == pytest.approx(second, rel=1e-11, abs=1e-11), column

    # Scaled PageRank is that of the graph alone; trust goes by J = γN/|core|, and N counts every host.
    distinct = {(numbers.index(u), numbers.index(v)) for u, v in edges if u != v}
    start = np.zeros((2, len(numbers)))
    start[0] = 1
    start[1, [numbers.index(member) for member in members]] = GOOD_SHARE * len(scored.hosts) / len(core)
    p, t = dense_solve(distinct, len(numbers), start)
    found = [by_host[host] for host in hosts[0]]
    assert [row["scaled_pagerank"] for row in found] == pytest.approx(p, rel=1e-11, abs=0)
    assert [row["trust"] for row in found] == pytest.approx(t, rel=1e-11, abs=0)
    total = 2 * p.sum() + n_lonely
    assert [row["pagerank"] for row in found] == pytest.approx(p / total, rel=1e-11, abs=0)
    for host in lonely:
        row = by_host[host]
        assert (row["scaled_pagerank"], row["trust"], row["relative_mass"]) == (1, 0, 1)
        assert (row["in_degree"], row["out_degree"], row["core_reached"]) == (0, 0, False)
        assert row["pagerank"] == pytest.approx(1 / total, rel=1e-11)
