"""PageRank and trust of a web of many shapes against scipy, networkx and igraph."""

import igraph
import networkx as nx
import numpy as np

from tests.steps.webs import DAMPING


def test_the_web_has_the_shapes_that_it_is_for(web, even_scored) -> None:
    graph = even_scored.graph
    assert even_scored.hosts == web.hosts
    assert graph.n_phases == 7  # three peel rounds from the sources, what iterates, three from the sinks
    # Chains of seven are longer than three rounds: some of their hosts iterate with the middle.
    cyclic = [part for part in nx.strongly_connected_components(web.graph(weighted=False)) if len(part) > 1]
    assert sum(map(len, cyclic)) < graph.counts["iterated_hosts"] < graph.n_hosts
    assert len(cyclic) == 4
    # Over a hundred in-links on one host; enough hosts for diagonals in the storage.
    assert max(even_scored.column("in_degree")) > 250


def test_degrees_are_those_of_the_distinct_edges(web, scored, weighted) -> None:
    graph = web.graph(weighted=weighted)
    assert scored.column("in_degree").tolist() == [graph.in_degree(i) for i in range(len(web.hosts))]
    assert scored.column("out_degree").tolist() == [graph.out_degree(i) for i in range(len(web.hosts))]


def test_pagerank_against_scipy(web, scored, weighted) -> None:
    expected = web.solve(np.ones(len(web.hosts)), weighted=weighted)
    np.testing.assert_allclose(scored.column("scaled_pagerank"), expected, rtol=1e-11, atol=0)


def test_trust_against_scipy(web, scored, weighted) -> None:
    expected = web.solve(web.trust_start(), weighted=weighted)
    np.testing.assert_allclose(scored.column("trust"), expected, rtol=1e-11, atol=0)


def test_known_spam_mass_against_scipy(web, scored, weighted) -> None:
    expected = web.solve(web.spam_start(), weighted=weighted)
    np.testing.assert_allclose(scored.column("known_spam_mass"), expected, rtol=1e-11, atol=0)


def test_pagerank_against_networkx(web, scored, weighted) -> None:
    """The library spreads the rank of hosts without out-links evenly; `pagerank` is held to that."""
    graph = web.graph(weighted=weighted)
    expected = nx.pagerank(graph, alpha=DAMPING, max_iter=1000, tol=1e-16)
    found = scored.column("pagerank")
    np.testing.assert_allclose(found, [expected[i] for i in range(len(found))], rtol=1e-9, atol=0)


def test_pagerank_and_trust_against_igraph(web, scored, weighted) -> None:
    """Personalised, the library restarts from the seeds where a host has no out-links: trust by its sum."""
    edges = web.edges(weighted=weighted)
    graph = igraph.Graph(n=len(web.hosts), edges=list(edges), directed=True)
    weights = list(edges.values())
    plain = graph.pagerank(damping=DAMPING, weights=weights)
    np.testing.assert_allclose(scored.column("pagerank"), plain, rtol=1e-9, atol=0)
    start = web.trust_start()
    personal = graph.personalized_pagerank(damping=DAMPING, reset=start.tolist(), weights=weights)
    trust = scored.column("trust")
    # The library solves to an L1 error of 1e-10; its smallest values carry that as their own error.
    np.testing.assert_allclose(trust / trust.sum(), personal, rtol=1e-9, atol=1e-12)


def test_the_columns_are_what_the_lists_say(web, scored) -> None:
    facts = scored.solved.core_facts()
    weight_of = {name: 0.0 for _, name, _ in web.core}
    for _, name, weight in web.members:
        weight_of[name] += weight
    total = sum(weight_of.values())
    assert facts["slices"] == {name: weight / total for name, weight in sorted(weight_of.items())}
    assert (facts["listed"], facts["matched"], facts["unmatched"]) == (len(web.core), len(web.core) - 1, 1)
    assert facts["known_spam_matched"] == len(web.known_spam)
    columns = scored.solved.column_facts()
    names = ["pagerank", "trust: slice a", "trust: slice b", "trust: slice c", "known_spam"]
    assert [column["name"] for column in columns] == names
    assert all(0 <= column["error_bound"] <= 1e-12 for column in columns)
    assert len({column["steps"] for column in columns}) == 1
    unmatched = [(r.source, r.row_value, r.reason, r.rows) for r in scored.solved.members.unmatched]
    assert unmatched == [("core.host", "missing.example", "not_in_graph", 1)]
