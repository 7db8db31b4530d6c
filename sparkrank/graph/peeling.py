"""Tiles → degrees of every host, peel rounds, and the order in which hosts are computed.

Each round is two sweeps of tasks: tiles mark the hosts they keep, stripes gather the marks.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import narrow, read_arrays, write_arrays
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.graph.sub_blocks import HOT_SOURCES
from sparkrank.graph.tiles import MAX_LINKS, too_many_links
from sparkrank.kernels import peel
from sparkrank.kernels.edges import destinations, sources
from sparkrank.tasks import TaskRunner

log = logging.getLogger(__name__)

# A round is a pass over all edges; what is left after three iterates under the error bound as well.
_MAX_ROUNDS = 3
# A round that takes fewer of the remaining hosts than this is the last one.
_MIN_GAIN = 0.01


@dataclass(frozen=True)
class Peeling:
    """The build's third stage, over the tiles that have edges."""

    folder: GraphFolder
    plan: GridPlan
    tiles: list[tuple[int, int]]
    weighted: bool

    def run(self, stripe_tasks: TaskRunner, tile_tasks: TaskRunner) -> dict[str, Any]:
        """Runs all rounds and writes degrees and order.

        1. gather degrees; sinks are the hosts without out-links
        2. while a round gains: tiles mark hosts that still feed one, stripes peel the rest
        3. the same from the sources, on what is left
        4. sort each stripe's hosts by the phase in which they are computed

        Returns the record: ``source_rounds``, ``sink_rounds``, ``phase_starts`` (positions at which each
        phase begins, a list a stripe) and ``iterated`` (hosts of the core phase).
        """
        alive = sum(stripe_tasks.run(self._gather_degrees, "degrees of hosts"))
        sink_rounds = self._rounds("sink", alive, stripe_tasks, tile_tasks)
        last = f"sink{sink_rounds}"
        alive_and_gone = stripe_tasks.run(_FirstSources(self, last), "hosts without in-links")
        alive = sum(report[0] for report in alive_and_gone)
        if sum(report[1] for report in alive_and_gone):
            source_rounds = self._rounds("source", alive, stripe_tasks, tile_tasks)
        else:
            source_rounds = 0
        final = f"source{max(1, source_rounds)}"
        starts = stripe_tasks.run(_Order(self, final, source_rounds, sink_rounds), "order of hosts")
        core = source_rounds
        iterated = sum(start[core + 1] - start[core] for start in starts)
        return {
            "source_rounds": source_rounds,
            "sink_rounds": sink_rounds,
            "phase_starts": starts,
            "iterated": iterated,
        }

    def _rounds(self, side: str, alive: int, stripe_tasks: TaskRunner, tile_tasks: TaskRunner) -> int:
        """Rounds from the second on; returns how many rounds took something."""
        done = 1
        while done < _MAX_ROUNDS and alive:
            tile_tasks.run(_Mark(self, side, done), f"{side} round {done + 1}: marks")
            gone = sum(stripe_tasks.run(_Gather(self, side, done), f"{side} round {done + 1}: peel"))
            log.info("peel from the %ss, round %d: %d of %d hosts", side, done + 1, gone, alive)
            if not gone:
                break
            done += 1
            if gone < _MIN_GAIN * alive:
                break
            alive -= gone
        return done

    def codes(self, peel_round: str, stripe: int) -> NDArray[np.int8]:
        return read_arrays(self.folder.peeled(peel_round, stripe))["codes"]

    def stripe_hosts(self, stripe: int) -> int:
        return len(read_arrays(self.folder.ids(stripe))["ids"])

    def _gather_degrees(self, stripe: int) -> int:
        """Adds up the tiles' parts; returns how many hosts have out-links."""
        n = self.stripe_hosts(stripe)
        in_degree, out_degree, out_weight = (np.zeros(n, np.int64) for _ in range(3))
        own_group = self.plan.build_group_of(stripe)
        for tile_stripe, group in self.tiles:
            if tile_stripe != stripe and group != own_group:
                continue
            part = read_arrays(self.folder.tile_degrees(tile_stripe, group))
            if tile_stripe == stripe:
                in_degree += part["in"]
            if group == own_group:
                out_degree += part[f"out-{stripe}"]
                if self.weighted:
                    # Each part is below 2^62: a sum that passes it shows before the next addition.
                    out_weight += part[f"weight-{stripe}"].astype(np.int64)
                    if n and out_weight.max() >= MAX_LINKS:
                        raise too_many_links()
        arrays = {"in_degree": narrow(in_degree), "out_degree": narrow(out_degree)}
        if self.weighted:
            arrays["out_weight"] = narrow(out_weight)
        write_arrays(self.folder.degrees(stripe), arrays)
        codes = peel.first_sinks(np.zeros(n, np.int8), out_degree)
        write_arrays(self.folder.peeled("sink1", stripe), {"codes": codes})
        return int(np.count_nonzero(codes == 0))


@dataclass(frozen=True)
class _FirstSources:
    peeling: Peeling
    after: str

    def __call__(self, stripe: int) -> tuple[int, int]:
        codes = self.peeling.codes(self.after, stripe)
        in_degree = read_arrays(self.peeling.folder.degrees(stripe))["in_degree"]
        peeled = peel.first_sources(codes, in_degree)
        write_arrays(self.peeling.folder.peeled("source1", stripe), {"codes": peeled})
        return int(np.count_nonzero(peeled == 0)), int(np.count_nonzero(peeled == 1))


@dataclass(frozen=True)
class _Mark:
    """For one tile: sources that still feed a host (sink rounds) or destinations still fed by one."""

    peeling: Peeling
    side: str
    after: int

    def __call__(self, number: int) -> None:
        folder, plan = self.peeling.folder, self.peeling.plan
        stripe, group = self.peeling.tiles[number]
        tile = read_arrays(folder.tile(stripe, group))
        bounds = tile["bounds"]
        after = f"{self.side}{self.after}"
        n_own = self.peeling.stripe_hosts(stripe)
        own = self.peeling.codes(after, stripe)
        marks: dict[str, NDArray[Any]] = {}
        fed = np.zeros(n_own, dtype=np.bool_)
        for at, source_stripe in enumerate(plan.stripes_of_build_group(group)):
            keys = tile["keys"][bounds[at] : bounds[at + 1]]
            source, destination = sources(keys), destinations(keys)
            n_source = self.peeling.stripe_hosts(source_stripe)
            if self.side == "sink":
                feeding = peel.marked(source, own[destination], n_source)
                marks[f"feeding-{source_stripe}"] = np.packbits(feeding)
            else:
                codes = self.peeling.codes(after, source_stripe)
                fed |= peel.marked(destination, codes[source], n_own)
        if self.side == "source":
            marks["fed"] = np.packbits(fed)
        write_arrays(folder.peel_marks(f"{after}", stripe, group), marks)


@dataclass(frozen=True)
class _Gather:
    """For one stripe: the round's marks from all tiles, and the hosts they leave to be peeled."""

    peeling: Peeling
    side: str
    after: int

    def __call__(self, stripe: int) -> int:
        folder, plan = self.peeling.folder, self.peeling.plan
        after = f"{self.side}{self.after}"
        codes = self.peeling.codes(after, stripe)
        marks = np.zeros(len(codes), dtype=np.bool_)
        for tile_stripe, group in self.peeling.tiles:
            if self.side == "sink" and group == plan.build_group_of(stripe):
                name = f"feeding-{stripe}"
            elif self.side == "source" and tile_stripe == stripe:
                name = "fed"
            else:
                continue
            packed = read_arrays(folder.peel_marks(after, tile_stripe, group))[name]
            marks |= np.unpackbits(packed, count=len(codes)).astype(np.bool_)
        code = self.after + 1 if self.side == "source" else -(self.after + 1)
        peeled = peel.next_round(codes, marks, code)
        write_arrays(folder.peeled(f"{self.side}{self.after + 1}", stripe), {"codes": peeled})
        return int(np.count_nonzero(peeled != codes))


@dataclass(frozen=True)
class _Order:
    """For one stripe: the order of its hosts; what the solve reads, in that order."""

    peeling: Peeling
    after: str
    source_rounds: int
    sink_rounds: int

    def __call__(self, stripe: int) -> list[int]:
        folder = self.peeling.folder
        codes = self.peeling.codes(self.after, stripe)
        phase = peel.phase_of(codes, self.source_rounds, self.sink_rounds)
        degrees = read_arrays(folder.degrees(stripe))
        order = peel.order_in_phases(phase, degrees["in_degree"], degrees["out_degree"], HOT_SOURCES)
        position = np.empty(len(codes), dtype=np.uint32)
        position[order] = np.arange(len(codes), dtype=np.uint32)
        # Where edges weigh 1, a host's weight is its degree.
        out_weight = degrees["out_weight" if self.peeling.weighted else "out_degree"][order]
        write_arrays(folder.order(stripe), {"position": position, "out_weight": out_weight})
        n_phases = self.source_rounds + self.sink_rounds + 1
        return [int(start) for start in np.searchsorted(phase[order], np.arange(n_phases + 1))]
