"""What the order needs of every candidate of a graph, by scipy: what the program gathers, without Spark."""

from dataclasses import dataclass

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from planting.web import BaseGraph, IntArray
from sparkrank.kernels.sources import (
    CandidateArrays,
    DirectLinks,
    captive_weight,
    closeness_of,
    hands_on,
)

DAMPING, GOOD_SHARE, LEAST_SCORE = 0.85, 0.85, 10.0
_TOLERANCE = 1e-8
# Paths are followed this far, and through hosts that bring at least this share of a score.
_STEPS, _LEAST_SHARE = 5, 1e-5


@dataclass(frozen=True, kw_only=True)
class Gathered:
    """Candidates of a graph, by number of the host, with their relative mass and all that orders them."""

    hosts: IntArray
    relative_mass: NDArray[np.float64]
    links: DirectLinks
    arrays: CandidateArrays


def solve(graph: BaseGraph) -> tuple[NDArray[np.float64], NDArray[np.float64], sp.csr_matrix]:
    """Scaled p and t, and c·T' as (to, from)."""
    n = graph.n_hosts
    out_degree = np.bincount(graph.sources, minlength=n)
    flow = DAMPING / out_degree[graph.sources]
    passed = sp.csr_matrix((flow, (graph.destinations, graph.sources)), shape=(n, n))
    start = np.stack([np.ones(n), graph.core * (GOOD_SHARE * n / graph.core.sum())], axis=1)
    state = start
    while True:
        following = passed @ state + start
        change = np.abs(following - state).max()
        state = following
        if change < _TOLERANCE * n / graph.core.sum():
            return state[:, 0], state[:, 1], passed


def gather(graph: BaseGraph) -> Gathered:
    """Scores and links of every host of at least LEAST_SCORE that is not in the core."""
    score, trust, passed = solve(graph)
    hosts = np.flatnonzero((score >= LEAST_SCORE) & ~graph.core)
    n, count = graph.n_hosts, len(hosts)
    degrees = [np.bincount(end, minlength=n) for end in (graph.sources, graph.destinations)]
    first_step = passed[hosts]
    first_step.sort_indices()
    link_of, source = first_step.nonzero()
    origins, distance = _followed(passed, hosts, score)
    self_support = np.asarray(origins[np.arange(count), hosts]).ravel()
    close = _closeness(origins, distance, self_support)
    # By two links from hosts whose walks come here.
    second_step = (first_step @ passed).tocsr()
    weight = close.copy()
    weight.data = captive_weight(weight.data)
    circulating = np.asarray(second_step.multiply(weight).multiply(score[None, :]).sum(axis=1)).ravel()
    back = np.asarray(passed[source, hosts[link_of]]).ravel() > 0
    links = DirectLinks(
        offsets=first_step.indptr.astype(np.int64),
        score=score[source],
        transition=first_step.data / DAMPING,
        closeness=np.maximum(np.asarray(close[link_of, source]).ravel(), first_step.data / DAMPING),
        returned=back,
        followed=np.ones(len(source), dtype=np.bool_),
        in_degree=degrees[1][source],
        out_degree=degrees[0][source],
        domain=graph.domains[source],
        suffix=graph.suffixes[source],
        candidates=np.bincount(source, minlength=n)[source],
    )
    arrays = CandidateArrays(
        score=score[hosts],
        out_degree=degrees[0][hosts],
        domain=graph.domains[hosts],
        self_support=self_support,
        circulating=circulating,
        handed_on=_handed_on(passed, hosts, score),
        core_reached=trust[hosts] > 0,
    )
    mass = 1.0 - trust[hosts] / score[hosts]
    return Gathered(hosts=hosts, relative_mass=mass, links=links, arrays=arrays)


def _followed(
    passed: sp.csr_matrix, hosts: IntArray, score: NDArray[np.float64]
) -> tuple[sp.csr_matrix, sp.csr_matrix]:
    """g(w, x) over paths of at most _STEPS links, and the links of the shortest one plus 1."""
    count, n = len(hosts), passed.shape[0]
    residual = sp.csr_matrix((np.ones(count), (np.arange(count), hosts)), shape=(count, n))
    origins = residual.copy()
    distance = residual.copy()
    for step in range(1, _STEPS + 1):
        residual = (residual @ passed).tocsr()
        row = np.repeat(np.arange(count), np.diff(residual.indptr))
        if step > 1:
            small = residual.data * score[residual.indices] < _LEAST_SHARE * score[hosts[row]]
            residual.data[small] = 0.0
            residual.eliminate_zeros()
        origins = origins + residual
        reached = residual.copy()
        reached.data[:] = 1.0
        new = (reached - reached.multiply(distance > 0)).tocsr()
        new.eliminate_zeros()
        distance = (distance + new * (step + 1)).tocsr()
    return origins.tocsr(), distance


def _closeness(
    origins: sp.csr_matrix, distance: sp.csr_matrix, self_support: NDArray[np.float64]
) -> sp.csr_matrix:
    origins.sort_indices()
    distance.sort_indices()
    row = np.repeat(np.arange(len(self_support)), np.diff(origins.indptr))
    close = origins.copy()
    steps = distance.data.astype(np.int64) - 1
    close.data = closeness_of(origins.data, self_support[row], steps, DAMPING)
    return close


def _handed_on(passed: sp.csr_matrix, hosts: IntArray, score: NDArray[np.float64]) -> NDArray[np.float64]:
    between = passed[hosts][:, hosts].tocoo()
    to, source, own = between.row, between.col, score[hosts]
    handed = hands_on(between.data / DAMPING, own[source], own[to], DAMPING)
    return np.bincount(source, weights=handed, minlength=len(hosts))
