"""How many links each host is from the good core: breadth first over the cells until nothing changes.

Reached is a fact about paths, not about numbers: a trust of 0 and one of 1e-300 are told apart.

The nearest of a host's in-links comes out of the same multiplication as the scores: a host at distance
d sends 2^(-32·(d - base)), so that the sum over fewer than 2^31 in-links has the exponent of the nearest
one, whatever the others add.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import narrow, read_arrays, write_arrays
from sparkrank.propagate.columns import core_members
from sparkrank.propagate.layers import Solve
from sparkrank.propagate.pull import phase_size, pull
from sparkrank.tasks import TaskRunner

log = logging.getLogger(__name__)

NOT_REACHED = -1
"""The distance of hosts that no path from the core leads to."""

_BITS = 32  # of exponent a link: no host has 2^31 in-links
_SPAN = 31  # distances that one sum tells apart: 2^(-32·31) is still a normal float64


def find_reached(solve: Solve, stripes: TaskRunner) -> dict[str, int]:
    """Writes the distances of every phase; the record counts the hosts reached and the sweeps.

    1. source phases in their order
    2. the core: each sweep follows one link more; a single stripe settles in one task
    3. sink phases in their order
    """
    if (record := solve.folder.record("reached")) is not None:
        return record
    graph = solve.graph
    reached, farthest = 0, 0
    for phase in range(graph.core_phase):
        layer = _ReachLayer(solve, phase, 0, farthest)
        reached, farthest = _added(reached, farthest, stripes.run(layer, f"reached, phase {phase}"))
    sweep = 0
    reports = stripes.run(_ReachSweep(solve, 0), "reached, sweep 0")
    while any(report.changed for report in reports):
        sweep += 1
        reports = stripes.run(_ReachSweep(solve, sweep), f"reached, sweep {sweep}")
    reached, farthest = _added(reached, farthest, reports)
    for phase in range(graph.core_phase + 1, graph.n_phases):
        layer = _ReachLayer(solve, phase, sweep, farthest)
        reached, farthest = _added(reached, farthest, stripes.run(layer, f"reached, phase {phase}"))
    log.info("reached by the core: %s of %s hosts, %d sweeps", f"{reached:,}", f"{graph.n_hosts:,}", sweep)
    return solve.folder.commit("reached", {"hosts": reached, "sweeps": sweep})


class _Found(NamedTuple):
    """What a task found: hosts reached, the farthest distance, whether a distance changed."""

    reached: int
    farthest: int
    changed: bool

    @classmethod
    def of(cls, distance: NDArray[np.int64], *, changed: bool) -> _Found:
        reached = int(np.count_nonzero(distance != NOT_REACHED))
        return cls(reached, int(distance.max(initial=0)), changed)


def _added(reached: int, farthest: int, found: list[_Found]) -> tuple[int, int]:
    return reached + sum(one.reached for one in found), max(farthest, *(one.farthest for one in found))


def core_distances(solve: Solve, stripe: int, phase: int, sweep: int) -> NDArray[np.int64]:
    """Links from the nearest core member, as far as the sweep knows: shape (hosts of the phase,).

    0 for members, NOT_REACHED where no path is known.
    """
    if phase == solve.graph.core_phase:
        place = solve.folder.reached(sweep, stripe)
    else:
        place = solve.folder.reached_layer(phase, stripe)
    return read_arrays(place)["steps"].astype(np.int64) - 1


def _start(solve: Solve, stripe: int, phase: int) -> NDArray[np.int64]:
    """Distances before any link is followed: 0 for members."""
    starts = solve.graph.phase_starts[stripe]
    members = core_members(solve.folder, stripe, starts[-1])[starts[phase] : starts[phase + 1]]
    return np.where(members, 0, NOT_REACHED)


class _Signals:
    """Distances in [base, base + 31) of finished phases as a flow; nothing from other hosts."""

    def __init__(self, solve: Solve, sweep: int, base: int) -> None:
        self._solve, self._sweep, self._base = solve, sweep, base
        self._made: dict[tuple[int, int], NDArray[np.float64]] = {}

    def __call__(self, stripe: int, phase: int) -> NDArray[np.float64]:
        key = (stripe, phase)
        if key not in self._made:
            self._made[key] = _signal(core_distances(self._solve, stripe, phase, self._sweep), self._base)
        return self._made[key]


def _signal(distance: NDArray[np.int64], base: int) -> NDArray[np.float64]:
    """2^(-32·(distance - base)) where that is in the span, else 0: shape (1, n)."""
    powers = np.zeros(_SPAN + 2)
    powers[1:-1] = np.ldexp(1.0, -_BITS * np.arange(_SPAN))
    return powers[np.clip(distance - base, -1, _SPAN) + 1][None, :]


def _follow(distance: NDArray[np.int64], inflow: NDArray[np.float64], base: int) -> bool:
    """Takes over what comes one link behind the nearest in-link; whether a distance changed."""
    got = np.flatnonzero(inflow > 0)
    # frexp: inflow = m · 2^e, m in [1/2, 1). One signal of step s has e = 1 - 32·s, their sum less than
    # 31 more.
    step = -((np.frexp(inflow[got])[1] - 1) // _BITS)
    found = base + step + 1
    nearer = (distance[got] == NOT_REACHED) | (found < distance[got])
    distance[got[nearer]] = found[nearer]
    return bool(nearer.any())


@dataclass(frozen=True)
class _ReachLayer:
    """A peeled phase; ``farthest`` is the largest distance of the phases before it."""

    solve: Solve
    phase: int
    sweep: int
    farthest: int

    def __call__(self, stripe: int) -> _Found:
        distance = _start(self.solve, stripe, self.phase)
        if phase_size(self.solve.graph, stripe, self.phase):
            self._follow_earlier(stripe, distance)
        write_arrays(self.solve.folder.reached_layer(self.phase, stripe), {"steps": narrow(distance + 1)})
        return _Found.of(distance, changed=False)

    def _follow_earlier(self, stripe: int, distance: NDArray[np.int64]) -> None:
        graph, phases = self.solve.graph, range(self.phase)
        groups = range(graph.plan.build_groups)
        for base in range(0, self.farthest + 1, _SPAN):
            inflow = np.zeros((1, len(distance)))
            signals = _Signals(self.solve, self.sweep, base)
            pull(graph, stripe, self.phase, phases, groups, signals, inflow, even=True)
            _follow(distance, inflow[0], base)


@dataclass(frozen=True)
class _ReachSweep:
    """Sweep 0 starts from members and source phases; sweep s follows the s-th link within the core.

    Hosts that sweep s - 1 changed are s - 1 links from a member or more, by the source phases that they
    were reached through.  Hosts at less sent what they have before.
    """

    solve: Solve
    sweep: int

    def __call__(self, stripe: int) -> _Found:
        solve, core = self.solve, self.solve.graph.core_phase
        groups = range(solve.graph.plan.build_groups)
        if self.sweep == 0:
            distance, phases, base = _start(solve, stripe, core), range(core), 0
        else:
            distance = core_distances(solve, stripe, core, self.sweep - 1)
            phases, base = range(core, core + 1), self.sweep - 1
        inflow = np.zeros((1, len(distance)))
        signals = _Signals(solve, max(0, self.sweep - 1), base)
        if len(distance):
            pull(solve.graph, stripe, core, phases, groups, signals, inflow, even=True)
        changed = _follow(distance, inflow[0], base) or self.sweep == 0
        if solve.graph.plan.stripes == 1 and self.sweep == 1:
            self._settle(distance)
            changed = False
        write_arrays(solve.folder.reached(self.sweep, stripe), {"steps": narrow(distance + 1)})
        return _Found.of(distance, changed=changed)

    def _settle(self, distance: NDArray[np.int64]) -> None:
        """Follows links to their end where there is one stripe: a long chain needs no task a link."""
        solve, core = self.solve, self.solve.graph.core_phase
        phases = range(core, core + 1)
        base, changed = 1, len(distance) > 0
        while changed:
            inflow = np.zeros((1, len(distance)))
            flow = _signal(distance, base)
            pull(solve.graph, 0, core, phases, range(1), lambda *_, flow=flow: flow, inflow, even=True)
            changed = _follow(distance, inflow[0], base)
            base += 1
