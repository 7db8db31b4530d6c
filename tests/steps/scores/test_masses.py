"""Spam mass of the web of many shapes: what-ifs, known spam, and what the core reaches."""

import dataclasses

import networkx as nx
import numpy as np
import pytest

from sparkrank.errors import InputRefused
from tests.steps.graphs import write_list
from tests.steps.webs import GOOD_SHARE


def test_masses_follow_from_the_scores(scored) -> None:
    p, t, known = (scored.column(name) for name in ("scaled_pagerank", "trust", "known_spam_mass"))
    absolute, relative = scored.column("absolute_mass"), scored.column("relative_mass")
    np.testing.assert_allclose(absolute, np.maximum(p - t, known), rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(relative, absolute / p, rtol=1e-12, atol=1e-12)
    assert (relative <= 1).all()


def test_known_spam_raises_masses_and_lowers_none(web, web_crawl, even_scored) -> None:
    """The larger of both, never their mean: what the core explains stays where no known spam leads."""
    without = dataclasses.replace(web_crawl, known_spam=None).run(even_scored.graph)
    assert without.table["known_spam_mass"].null_count == len(web.hosts)
    before, after = (run.column("absolute_mass") for run in (without, even_scored))
    known = even_scored.column("known_spam_mass")
    raised = known > before + 1e-9
    assert (after[raised] > before[raised]).all()
    np.testing.assert_allclose(after[~raised], before[~raised], rtol=1e-12, atol=1e-9)
    # The web has both: listed hosts that the core explains, and hosts that no list changes.
    assert 0 < np.count_nonzero(raised) < len(web.hosts) / 2


def test_low_and_high_are_those_of_separate_solves(web, scored, weighted) -> None:
    """Leaving a slice out is a core of its own: solved as such by scipy, not combined from columns."""
    p = web.solve(np.ones(len(web.hosts)), weighted=weighted)
    known = web.solve(web.spam_start(), weighted=weighted)
    cores = [web.trust_start(), *(web.trust_start(without=f"slice {name}") for name in "abc")]
    masses = [np.maximum(p - web.solve(core, weighted=weighted), known) / p for core in cores]
    low, high = scored.column("relative_mass_low"), scored.column("relative_mass_high")
    np.testing.assert_allclose(low, np.min(masses, axis=0), rtol=1e-9, atol=1e-10)
    np.testing.assert_allclose(high, np.max(masses, axis=0), rtol=1e-9, atol=1e-10)
    relative = scored.column("relative_mass")
    assert (low <= relative).all()
    assert (relative <= high).all()
    assert np.count_nonzero(high - low > 0.1) > 50


def test_a_core_without_a_slice_is_another_run(web, web_crawl, even_scored, tmp_path) -> None:
    """The program's own run on a core of two slices lies on the edge of the three slices' range or in it."""
    rest = [entry for entry in web.core if entry[1] != "slice b"]
    crawl = dataclasses.replace(web_crawl, core=write_list(tmp_path / "core.csv", rest))
    relative = crawl.run(even_scored.graph).column("relative_mass")
    assert (relative >= even_scored.column("relative_mass_low") - 1e-9).all()
    assert (relative <= even_scored.column("relative_mass_high") + 1e-9).all()


def test_reached_is_what_a_path_from_the_core_leads_to(web, scored) -> None:
    graph = web.graph(weighted=False)
    members = {web.at[host] for host, _, _ in web.members}
    expected = members.union(*(nx.descendants(graph, member) for member in members))
    reached = scored.column("core_reached")
    assert set(np.flatnonzero(reached).tolist()) == expected
    assert scored.solved.reached == len(expected)
    assert set(np.flatnonzero(scored.column("is_core")).tolist()) == members
    assert 0 < len(expected) < len(web.hosts)


def test_unreached_hosts_have_no_trust_at_all_and_read_unknown(scored) -> None:
    unreached = ~scored.column("core_reached")
    assert (scored.column("trust")[unreached] == 0).all()
    assert (scored.column("trust")[~unreached] > 0).all()
    assert (scored.column("relative_mass")[unreached] == 1).all()
    assert (scored.column("relative_mass_low")[unreached] == 1).all()


def test_a_host_without_in_links_scores_one(scored) -> None:
    lonely = scored.column("in_degree") == 0
    assert (scored.column("scaled_pagerank")[lonely] == 1).all()
    assert (scored.column("scaled_pagerank")[~lonely] > 1).all()


def test_a_member_starts_with_j_by_its_weight(web, even_scored) -> None:
    """The member that nobody links to has its own share of trust and nothing else."""
    total = sum(weight for _, _, weight in web.members)
    j = GOOD_SHARE * len(web.hosts) / len(web.members)
    expected = j * 2.0 / (total / len(web.members))
    assert even_scored["source0.example"]["trust"] == pytest.approx(expected, rel=1e-12)


def test_merged_slices_count_as_one(web_crawl, even_scored) -> None:
    """Three columns in all: the heaviest slice and the two others together."""
    merged = web_crawl.run(even_scored.graph, solve__max_columns=3)
    np.testing.assert_allclose(merged.column("trust"), even_scored.column("trust"), rtol=1e-11, atol=0)
    shares = merged.solved.core_facts()["slices"]
    whole = even_scored.solved.core_facts()["slices"]
    heaviest = max(whole, key=lambda name: whole[name])
    assert shares == pytest.approx({heaviest: whole[heaviest], "(other slices)": 1 - whole[heaviest]})
    low, wide = merged.column("relative_mass_low"), even_scored.column("relative_mass_low")
    assert not np.allclose(low, wide)


def test_one_slice_has_no_range(web_crawl, even_scored) -> None:
    one = web_crawl.run(even_scored.graph, solve__max_columns=2)
    assert one.table["relative_mass_low"].null_count == one.table.num_rows
    assert one.table["relative_mass_high"].null_count == one.table.num_rows
    np.testing.assert_allclose(one.column("trust"), even_scored.column("trust"), rtol=1e-11, atol=0)


def test_suffix_and_domain_are_there(even_scored) -> None:
    assert even_scored["hub.example"]["suffix"] == "example"
    assert even_scored["hub.example"]["domain"] == "hub.example"


def test_no_core_host_in_the_graph_is_refused(web_crawl, even_scored, tmp_path) -> None:
    core = write_list(tmp_path / "core.csv", [("z.example",), ("y.example",)])
    with pytest.raises(InputRefused) as refusal:
        dataclasses.replace(web_crawl, core=core).solve(even_scored.graph)
    assert str(refusal.value) == (
        "input.core: expected hosts of the graph, found none of the 2 listed in it; "
        "check that list and edges come from the same crawl"
    )
