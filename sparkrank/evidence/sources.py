"""Followed paths → the sources of each target, direct and by origin, with what is known of each source.

Both kinds lie in files by stripe of the source, sorted by target; the leading ones of each target are
also written as rows, with names.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.evidence.paths import CHUNK_LINKS, Gathering, target_ranges
from sparkrank.evidence.values import host_names
from sparkrank.kernels.backward import Residuals, add_up, pair_keys
from sparkrank.kernels.lookup import find_ids
from sparkrank.kernels.sources import hands_on

DIRECT, ORIGIN = "direct", "origin"
KINDS = (DIRECT, ORIGIN)

OF_THE_SOURCE = (
    "scaled_pagerank",
    "trust",
    "absolute_mass",
    "relative_mass",
    "in_degree",
    "out_degree",
    "domain",
    "suffix",
    "core_steps",
    "core_weight",
    "is_core",
    "is_target",
)
"""What is taken over from the source's own values."""

Sources = dict[str, NDArray[Any]]


@dataclass(frozen=True)
class DirectSources:
    """One stripe's direct links to targets: every one, however small.

    ``transition`` is T[u, x], ``contribution`` c·p_u·T[u, x]; ``returned``: the target links back.
    """

    gathering: Gathering
    kept_chunks: list[int]
    groups: list[tuple[int, int]]
    listed: int

    def __call__(self, stripe: int) -> int:
        gathering = self.gathering
        leading = _Leading(gathering, stripe, DIRECT, self.groups, self.listed)
        targets_linked = self._targets_linked(stripe)
        handed_on = np.zeros(gathering.target_counts[stripe])
        for chunk in range(self.kept_chunks[stripe]):
            links = read_residuals(gathering, 1, stripe, chunk)
            sources = _described(gathering, stripe, links)
            sources["followed"] = gathering.are_followed(stripe, links)
            sources["targets_linked"] = targets_linked[links.host]
            sources["transition"] = _transition(gathering, stripe, links)
            sources["contribution"] = links.value * sources["scaled_pagerank"]
            sources["returned"] = _are_returned(gathering, stripe, links)
            sources["distance"] = np.ones(len(links.target), dtype=np.uint8)
            write_arrays(gathering.folder.sources(DIRECT, stripe, chunk), sources)
            leading.add(sources)
            self._hand_on(stripe, links, sources, handed_on)
        leading.write()
        write_arrays(gathering.folder.handed_on(stripe), {"share": handed_on})
        return self.kept_chunks[stripe]

    def _targets_linked(self, stripe: int) -> NDArray[np.int64]:
        """How many targets each of the stripe's hosts links to: shape (hosts,)."""
        counts = np.zeros(len(self.gathering.neighbours.values(stripe)["host_at"]), dtype=np.int64)
        for chunk in range(self.kept_chunks[stripe]):
            hosts = read_residuals(self.gathering, 1, stripe, chunk).host
            counts += np.bincount(hosts, minlength=len(counts))
        return counts

    def _hand_on(
        self, stripe: int, links: Residuals, sources: Sources, handed_on: NDArray[np.float64]
    ) -> None:
        """Adds what the stripe's own targets hand on to other ones; ``handed_on`` changes in place."""
        gathering = self.gathering
        at = np.flatnonzero(sources["is_target"])
        own = np.searchsorted(gathering.targets.host, sources["source"][at]) - gathering.first_target(stripe)
        to_score = gathering.targets.score[links.target[at]]
        transition, score = sources["transition"][at], sources["scaled_pagerank"][at]
        handed = hands_on(transition, score, to_score, gathering.damping)
        handed_on += np.bincount(own, handed, minlength=len(handed_on))


@dataclass(frozen=True)
class OriginSources:
    """One stripe's origins: what each host's own teleport gives a target over all paths followed.

    ``distance`` is the number of links of the shortest path followed; ``by_length`` (targets, 4) what
    comes over paths of 0, 1, 2 and 3 links.
    """

    gathering: Gathering
    kept_chunks: list[list[int]]
    """Files of each step and stripe."""
    groups: list[tuple[int, int]]
    listed: int

    def __call__(self, stripe: int) -> int:
        gathering = self.gathering
        leading = _Leading(gathering, stripe, ORIGIN, self.groups, self.listed)
        chunks = 0
        for found, step, value in self._added(stripe):
            sources = _described(gathering, stripe, found)
            sources["contribution"] = found.value
            sources["distance"] = step
            # Paths of one link alone: what a direct source gives of its own teleport.
            sources["over_short_paths"] = value
            write_arrays(gathering.folder.sources(ORIGIN, stripe, chunks), sources)
            leading.add(sources)
            chunks += 1
        leading.write()
        return chunks

    def _added(self, stripe: int) -> Iterator[tuple[Residuals, NDArray[Any], NDArray[Any]]]:
        """Origins, their distances, and what they give over paths of up to 3 links: shape (m, 4)."""
        gathering = self.gathering
        found = [
            (step, read_residuals(gathering, step, stripe, chunk))
            for step, chunks in enumerate(self.kept_chunks)
            for chunk in range(chunks[stripe])
        ]
        counts = np.zeros(gathering.n_targets, dtype=np.int64)
        for _, one in found:
            counts += np.bincount(one.target, minlength=gathering.n_targets)
        for low, high in target_ranges(counts, CHUNK_LINKS):
            parts, steps = [], []
            for step, one in found:
                first, end = np.searchsorted(one.target, (low, high))
                parts.append(Residuals(one.target[first:end], one.host[first:end], one.value[first:end]))
                steps.append(np.full(end - first, step, dtype=np.uint8))
            joined = Residuals(
                np.concatenate([part.target for part in parts]),
                np.concatenate([part.host for part in parts]),
                np.concatenate([part.value for part in parts]),
            )
            origins, first_at = add_up(*joined)
            step_of = np.concatenate(steps)
            keys, all_keys = pair_keys(origins.target, origins.host), pair_keys(joined.target, joined.host)
            short = np.zeros((len(keys), 4))
            for step in range(4):
                here = np.flatnonzero(step_of == step)
                short[np.searchsorted(keys, all_keys[here]), step] = joined.value[here]
            yield origins, step_of[first_at], short


def read_residuals(gathering: Gathering, step: int, stripe: int, chunk: int) -> Residuals:
    """The residuals of one file."""
    found = read_arrays(gathering.folder.residuals(step, stripe, chunk))
    return Residuals(found["target"], found["host"].astype(np.int64), found["value"])


def _described(gathering: Gathering, stripe: int, pairs: Residuals) -> Sources:
    values = gathering.neighbours.values(stripe)
    source = pairs.host + gathering.neighbours.firsts[stripe]
    return {
        "target": pairs.target.astype(np.uint32),
        "source": source,
        **{name: _wide(values[name][pairs.host]) for name in OF_THE_SOURCE},
    }


def _transition(gathering: Gathering, stripe: int, links: Residuals) -> NDArray[np.float64]:
    """T[u, x] of direct links: their weight, a whole number, by the source's out-weight, without rounding."""
    weight = np.rint(links.value / gathering.flow_per_score(stripe, links.host))
    share: NDArray[np.float64] = weight / gathering.neighbours.values(stripe)["out_weight"][links.host]
    return share


def _wide(values: NDArray[Any]) -> NDArray[Any]:
    """Counts in one type, whatever each stripe's fit."""
    return values.astype(np.int64) if values.dtype.kind == "u" else values


def _are_returned(gathering: Gathering, stripe: int, links: Residuals) -> NDArray[np.bool_]:
    """Whether the target of each link links back: whether it is among its source's own in-links."""
    neighbours, targets = gathering.neighbours, gathering.targets
    returned = np.zeros(len(links.target), dtype=np.bool_)
    in_degree = neighbours.values(stripe)["in_degree"]
    hosts = np.unique(links.host)
    hosts = hosts[in_degree[hosts] > 0]
    part = (np.cumsum(in_degree[hosts].astype(np.int64)) - 1) // CHUNK_LINKS
    keys = pair_keys(links.target, links.host)
    for number in np.unique(part).tolist():
        here = hosts[part == number]
        found = neighbours.in_links(
            stripe, here, lambda from_stripe, places: neighbours.values(from_stripe)["is_target"][places]
        )
        back = pair_keys(
            np.searchsorted(targets.host, found.sources), np.repeat(here, np.diff(found.offsets))
        )
        place = find_ids(keys, back)
        returned[place[place >= 0]] = True
    return returned


class _Leading:
    """The leading sources of each target among a stripe's, by group of targets."""

    def __init__(
        self, gathering: Gathering, stripe: int, kind: str, groups: list[tuple[int, int]], listed: int
    ) -> None:
        self._gathering, self._stripe, self._kind = gathering, stripe, kind
        self._groups, self._listed = groups, listed
        self._kept: list[Sources] = []

    def add(self, sources: Sources) -> None:
        """Keeps the leading ones of a range of targets of its own; sorted by target, then source."""
        kept = leading_ones(sources["target"], sources["contribution"], self._listed)
        self._kept.append({name: values[kept] for name, values in sources.items() if values.ndim == 1})

    def write(self) -> None:
        """Writes a file a group."""
        gathering = self._gathering
        if not self._kept:
            return
        kept = {name: np.concatenate([one[name] for one in self._kept]) for name in self._kept[0]}
        first = gathering.neighbours.firsts[self._stripe]
        names = host_names(gathering.graph, self._stripe, kept["source"] - first)
        table = pa.table({**{name: pa.array(values) for name, values in kept.items()}, "name": names})
        cuts = np.searchsorted(kept["target"], [low for low, _ in self._groups] + [gathering.n_targets])
        for group, (low, high) in enumerate(zip(cuts[:-1].tolist(), cuts[1:].tolist(), strict=True)):
            if low < high:
                sink = pa.BufferOutputStream()
                pq.write_table(table.slice(low, high - low), sink, compression="zstd")
                place = gathering.folder.leading(self._kind, group, self._stripe)
                place.write_bytes(sink.getvalue())


def leading_ones(
    target: NDArray[np.integer], contribution: NDArray[np.float64], most: int
) -> NDArray[np.int64]:
    """Places of each target's ``most`` largest contributions, rising; of equal ones the first.

    ``target`` is sorted.  Selected, not sorted: targets have up to millions of sources.
    """
    starts = np.flatnonzero(np.diff(target, prepend=np.int64(-1)))
    counts = np.diff(starts, append=len(target))
    is_leading = np.ones(len(target), dtype=np.bool_)
    many = counts > most
    for start, count in zip(starts[many].tolist(), counts[many].tolist(), strict=True):
        values = contribution[start : start + count]
        least = np.partition(values, count - most)[count - most]
        chosen = values > least
        chosen[np.flatnonzero(values == least)[: most - int(np.count_nonzero(chosen))]] = True
        is_leading[start : start + count] = chosen
    return np.flatnonzero(is_leading)


def by_contribution(sources: Sources) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Order by target, falling contribution, then source; and each one's place within its target."""
    order = np.lexsort((sources["source"], -sources["contribution"], sources["target"]))
    target = sources["target"][order]
    is_first = np.ones(len(target), dtype=np.bool_)
    np.not_equal(target[1:], target[:-1], out=is_first[1:])
    starts = np.flatnonzero(is_first)
    return order, np.arange(len(order)) - np.repeat(starts, np.diff(starts, append=len(order)))
