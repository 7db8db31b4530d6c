"""Paths followed backwards from many targets at once, a step a round of tasks (see kernels.backward).

A task has one stripe of hosts.  In step d it adds up what the hosts of all stripes sent to its own in
step d - 1, keeps it, and sends what is worth following along the in-links of its hosts.  What is sent
is sorted by target, so that a task works through ranges of targets of bounded size.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.evidence.folder import EvidenceFolder
from sparkrank.evidence.links import Neighbours
from sparkrank.graph.build import Graph
from sparkrank.kernels.backward import Residuals, add_up, follow, worth_following

CHUNK_LINKS = 1 << 21
"""Links worked on at once: about 200 MB of arrays.  One target's links are never divided."""


class Targets(NamedTuple):
    """All targets in the order of their hosts; shapes (n,)."""

    host: NDArray[np.int64]
    """Numbers through the whole graph, rising."""
    score: NDArray[np.float64]
    """p."""
    in_degree: NDArray[np.int64]
    domain: NDArray[np.int64]
    """A hash of the registrable domain, or of the host where it has none; so is ``suffix``."""
    suffix: NDArray[np.int64]


@dataclass(frozen=True, kw_only=True)
class Gathering:
    """What every task of the evidence needs to know: it pickles small.

    ``target_counts[s]`` is the number of targets in stripe s.
    """

    graph: Graph
    folder: EvidenceFolder
    damping: float
    target_counts: list[int]
    least_share_a_link: float
    max_steps: int
    all_trust: float
    """Good share times the number of hosts: what the whole core starts from, scaled."""
    core_weight: float
    """Weight of all core members of the graph."""

    @cached_property
    def neighbours(self) -> Neighbours:
        return Neighbours(self.graph, self.folder)

    @property
    def n_targets(self) -> int:
        return sum(self.target_counts)

    def first_target(self, stripe: int) -> int:
        """Number of the stripe's first target."""
        return sum(self.target_counts[:stripe])

    @cached_property
    def targets(self) -> Targets:
        found = [read_arrays(self.folder.targets(s)) for s in range(self.graph.plan.stripes)]
        firsts = self.neighbours.firsts
        return Targets(
            host=np.concatenate([one["host"] + firsts[s] for s, one in enumerate(found)]),
            **{name: np.concatenate([one[name] for one in found]) for name in Targets._fields[1:]},
        )

    def behind(self, stripe: int, residuals: Residuals) -> NDArray[np.float64]:
        """What comes through each host of the stripe but not from it: (p_w - 1)·r."""
        return (self.neighbours.values(stripe)["scaled_pagerank"][residuals.host] - 1.0) * residuals.value

    def are_followed(self, stripe: int, residuals: Residuals) -> NDArray[np.bool_]:
        """Which residuals of a step between the first and the last are followed."""
        in_degree = self.neighbours.values(stripe)["in_degree"][residuals.host].astype(np.int64)
        score = self.targets.score[residuals.target]
        return worth_following(self.behind(stripe, residuals), score, in_degree, self.least_share_a_link)

    def flow_per_score(self, stripe: int, hosts: NDArray[np.int64]) -> NDArray[np.float64]:
        """c / out-weight of hosts of a stripe that have out-links."""
        return self.damping / self.neighbours.values(stripe)["out_weight"][hosts]


class StepReport(NamedTuple):
    """``chunks[i]``: files that the step's stripe i left; ``pairs`` and ``links`` it worked on."""

    sent_chunks: int
    kept_chunks: int
    pairs: int
    links: int


@dataclass(frozen=True)
class FollowStep:
    """One stripe of one step; ``sent_chunks`` are the files that each stripe sent in the step before."""

    gathering: Gathering
    step: int
    sent_chunks: list[int]

    def __call__(self, stripe: int) -> StepReport:
        lost = np.zeros(self.gathering.n_targets)
        sent, kept, pairs, links = 0, 0, 0, 0
        for residuals in self._arriving(stripe):
            place = self.gathering.folder.residuals(self.step, stripe, kept)
            write_arrays(place, {**residuals._asdict(), "host": residuals.host.astype(np.uint32)})
            kept += 1
            pairs += len(residuals.target)
            for part in self._followed(stripe, residuals, lost):
                links += self._send(stripe, part, sent)
                sent += 1
        write_arrays(self.gathering.folder.lost(self.step, stripe), {"lost": lost})
        return StepReport(sent, kept, pairs, links)

    def _arriving(self, stripe: int) -> Iterator[Residuals]:
        """What reaches the targets from the stripe's hosts, a range of targets at a time."""
        gathering = self.gathering
        if self.step == 0:
            n = gathering.target_counts[stripe]
            first = gathering.first_target(stripe)
            hosts = read_arrays(gathering.folder.targets(stripe))["host"]
            yield Residuals(np.arange(first, first + n), hosts.astype(np.int64), np.ones(n))
            return
        files = []
        for sender, chunks in enumerate(self.sent_chunks):
            for chunk in range(chunks):
                found = read_arrays(gathering.folder.sent(self.step - 1, sender, chunk))
                first, end = found["bounds"][stripe : stripe + 2].tolist()
                if first < end:
                    files.append({name: found[name][first:end] for name in ("target", "host", "value")})
        counts = np.zeros(gathering.n_targets, dtype=np.int64)
        for one in files:
            counts += np.bincount(one["target"], minlength=gathering.n_targets)
        for low, high in target_ranges(counts, CHUNK_LINKS):
            parts = []
            for one in files:
                first, end = np.searchsorted(one["target"], (low, high))
                parts.append({name: values[first:end] for name, values in one.items()})
            target, host, value = (
                np.concatenate([part[name] for part in parts]) for name in ("target", "host", "value")
            )
            residuals, _ = add_up(target, host, value)
            # r = c · sum of weight / out-weight: the sender knew the weights, this stripe the out-weights.
            yield residuals._replace(value=residuals.value * gathering.flow_per_score(stripe, residuals.host))

    def _followed(self, stripe: int, residuals: Residuals, lost: NDArray[np.float64]) -> Iterator[Residuals]:
        """What is worth following, in parts of bounded size; the rest is added to ``lost``."""
        gathering = self.gathering
        behind = gathering.behind(stripe, residuals)
        in_degree = gathering.neighbours.values(stripe)["in_degree"][residuals.host].astype(np.int64)
        if self.step == 0:
            chosen = in_degree > 0
        elif self.step >= gathering.max_steps:
            chosen = np.zeros(len(behind), dtype=np.bool_)
        else:
            chosen = gathering.are_followed(stripe, residuals)
        # Rounding leaves hosts without in-links next to nothing behind them.
        left = np.where(chosen | (in_degree == 0), 0.0, behind)
        lost += np.bincount(residuals.target, left, minlength=len(lost))
        at = np.flatnonzero(chosen)
        ends = np.cumsum(in_degree[at])
        part = (ends - in_degree[at]) // CHUNK_LINKS
        for number in np.unique(part).tolist():
            here = at[part == number]
            yield Residuals(residuals.target[here], residuals.host[here], residuals.value[here])

    def _send(self, stripe: int, residuals: Residuals, chunk: int) -> int:
        """Sends residuals along the in-links of their hosts; returns the number of links."""
        neighbours = self.gathering.neighbours
        hosts, slot = np.unique(residuals.host, return_inverse=True)
        links = neighbours.in_links(stripe, hosts)
        at, link = follow(residuals, slot, links.offsets)
        value = residuals.value[at]
        if links.weights is not None:
            value = value * links.weights[link]
        source = links.sources[link]
        to_stripe = np.searchsorted(neighbours.firsts, source, side="right") - 1
        order = np.argsort(to_stripe.astype(np.min_scalar_type(len(neighbours.firsts))), kind="stable")
        bounds = np.searchsorted(to_stripe[order], np.arange(len(neighbours.firsts)))
        arrays: dict[str, NDArray[Any]] = {
            "target": residuals.target[at][order].astype(np.uint32),
            "host": (source - neighbours.firsts[to_stripe])[order].astype(np.uint32),
            "value": value[order],
            "bounds": bounds,
        }
        write_arrays(self.gathering.folder.sent(self.step, stripe, chunk), arrays)
        return len(link)


@dataclass(frozen=True)
class FollowRest:
    """All further steps, when little is left to follow: one task instead of many rounds."""

    gathering: Gathering
    step: int
    sent_chunks: list[int]

    def __call__(self, _: int) -> list[list[StepReport]]:
        steps: list[list[StepReport]] = []
        sent = self.sent_chunks
        for step in range(self.step, self.gathering.max_steps + 1):
            task = FollowStep(self.gathering, step, sent)
            steps.append([task(stripe) for stripe in range(len(sent))])
            sent = [report.sent_chunks for report in steps[-1]]
            if not any(sent):
                break
        return steps


def target_ranges(counts: NDArray[np.int64], most: int) -> list[tuple[int, int]]:
    """Ranges [low, high) of targets with about ``most`` entries each; none without entries."""
    ends = np.cumsum(counts)
    if len(ends) == 0 or ends[-1] == 0:
        return []
    part = (ends - counts) // most
    cuts = np.flatnonzero(np.diff(part)) + 1
    edges = [0, *cuts.tolist(), len(counts)]
    return list(itertools.pairwise(edges))
