"""Direct links of candidates on small graphs, gathered by dense algebra and plain loops."""

from collections.abc import Sequence
from typing import NamedTuple

import networkx as nx
import numpy as np
from numpy.typing import NDArray

from sparkrank.kernels.sources import CandidateArrays, DirectLinks, captive_weight, closeness_of

DAMPING = 0.85


class Support(NamedTuple):
    """Inputs of the kernels for some candidates of a graph, and what they were made from."""

    links: DirectLinks
    candidates: CandidateArrays
    sources: NDArray[np.int64]
    """Host of each link."""
    score: NDArray[np.float64]
    """p of every host."""
    closeness: NDArray[np.float64]
    """(hosts, candidates), 0 where no path leads."""
    transition: NDArray[np.float64]
    """(hosts, hosts)."""


def transitions(n: int, edges: Sequence[tuple[int, int]]) -> NDArray[np.float64]:
    """T, rows of hosts without out-links zero."""
    matrix = np.zeros((n, n))
    for source, destination in edges:
        matrix[source, destination] = 1.0
    out = matrix.sum(axis=1, keepdims=True)
    return np.divide(matrix, out, out=np.zeros((n, n)), where=out > 0)


def gathered(
    n: int,
    edges: Sequence[tuple[int, int]],
    candidates: Sequence[int],
    domains: Sequence[int] | None = None,
) -> Support:
    """Hosts have domains of their own unless ``domains`` says otherwise; suffixes are their parity."""
    matrix = transitions(n, edges)
    gives = np.linalg.inv(np.eye(n) - DAMPING * matrix)
    score = gives.sum(axis=0)
    graph = nx.DiGraph(edges)
    graph.add_nodes_from(range(n))
    closeness = np.zeros((n, len(candidates)))
    for place, host in enumerate(candidates):
        steps = nx.single_target_shortest_path_length(graph, host)
        for source, distance in dict(steps).items():
            closeness[source, place] = closeness_of(
                gives[[source], host], gives[[host], host], np.array([distance]), DAMPING
            )[0]
    of = [(place, source) for place, x in enumerate(candidates) for source in sorted(graph.predecessors(x))]
    source = np.array([pair[1] for pair in of], dtype=np.int64)
    place = np.array([pair[0] for pair in of], dtype=np.int64)
    host = np.array(candidates, dtype=np.int64)
    domain = np.arange(n) if domains is None else np.array(domains)
    degree_in = np.array([graph.in_degree(v) for v in range(n)])
    degree_out = np.array([graph.out_degree(v) for v in range(n)])
    # Over two links, each way summed in a plain loop.
    circulating = [
        sum(
            score[v] * DAMPING**2 * matrix[v, u] * matrix[u, x] * captive_weight(closeness[[v], i])[0]
            for u in graph.predecessors(x)
            for v in graph.predecessors(u)
        )
        for i, x in enumerate(candidates)
    ]
    links = DirectLinks(
        offsets=np.concatenate(([0], np.cumsum(np.bincount(place, minlength=len(host))))),
        score=score[source],
        transition=matrix[source, host[place]],
        closeness=closeness[source, place],
        returned=matrix[host[place], source] > 0,
        followed=np.ones(len(source), dtype=np.bool_),
        in_degree=degree_in[source],
        out_degree=degree_out[source],
        domain=domain[source],
        suffix=source % 2,
        candidates=np.array([sum(graph.has_edge(u, x) for x in candidates) for u in source.tolist()]),
    )
    arrays = CandidateArrays(
        score=score[host],
        out_degree=degree_out[host],
        domain=domain[host],
        self_support=gives[host, host],
        circulating=np.array(circulating, dtype=np.float64),
        handed_on=np.zeros(len(host)),
        core_reached=np.ones(len(host), dtype=np.bool_),
    )
    return Support(links, arrays, source, score, closeness, matrix)


def random_edges(n: int, count: int, seed: int) -> list[tuple[int, int]]:
    """Different links between different hosts."""
    random = np.random.default_rng(seed)
    pairs = random.integers(0, n, (count, 2))
    return sorted({(a, b) for a, b in pairs.tolist() if a != b})
