"""Which hosts the good core reaches, by path: breadth first over the cells until nothing changes.

Reached is a fact about paths, not about numbers: a trust of 0 and one of 1e-300 are told apart.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.propagate.columns import core_members
from sparkrank.propagate.layers import Solve
from sparkrank.propagate.pull import phase_size, pull
from sparkrank.tasks import TaskRunner

log = logging.getLogger(__name__)


def find_reached(solve: Solve, stripes: TaskRunner) -> dict[str, int]:
    """Writes which hosts of every phase are reached; the record counts them and the sweeps.

    1. source phases in their order
    2. the core: each sweep pulls from the sweep before; a stripe first settles what it can by itself
    3. sink phases in their order
    """
    if (record := solve.folder.record("reached")) is not None:
        return record
    graph = solve.graph
    reached = 0
    for phase in range(graph.core_phase):
        reached += sum(stripes.run(_ReachLayer(solve, phase, 0), f"reached, phase {phase}"))
    sweep = 0
    counts = stripes.run(_ReachSweep(solve, 0), "reached, sweep 0")
    while True:
        sweep += 1
        before, counts = counts, stripes.run(_ReachSweep(solve, sweep), f"reached, sweep {sweep}")
        if counts == before:
            break
    reached += sum(counts)
    for phase in range(graph.core_phase + 1, graph.n_phases):
        reached += sum(stripes.run(_ReachLayer(solve, phase, sweep), f"reached, phase {phase}"))
    log.info("reached by the core: %s of %s hosts, %d sweeps", f"{reached:,}", f"{graph.n_hosts:,}", sweep)
    return solve.folder.commit("reached", {"hosts": reached, "sweeps": sweep})


@dataclass(frozen=True)
class _Marks:
    """Reached hosts of finished phases as a flow of ones."""

    solve: Solve
    sweep: int

    def __call__(self, stripe: int, phase: int) -> NDArray[np.float64]:
        return reached_hosts(self.solve, stripe, phase, self.sweep)[None, :].astype(np.float64)


def reached_hosts(solve: Solve, stripe: int, phase: int, sweep: int) -> NDArray[np.bool_]:
    """Which hosts of a phase are reached, as far as the sweep knows: shape (hosts of the phase,)."""
    if phase == solve.graph.core_phase:
        return read_arrays(solve.folder.reached(sweep, stripe))["reached"]
    return read_arrays(solve.folder.reached_layer(phase, stripe))["reached"]


def _members(solve: Solve, stripe: int, phase: int) -> NDArray[np.bool_]:
    starts = solve.graph.phase_starts[stripe]
    return core_members(solve.folder, stripe, starts[-1])[starts[phase] : starts[phase + 1]]


def _add_reached(
    solve: Solve, stripe: int, phase: int, from_phases: range, sweep: int, reached: NDArray[np.bool_]
) -> None:
    """Marks hosts of the phase with an in-link from a reached host; ``reached`` changes in place."""
    inflow = np.zeros((1, len(reached)))
    groups = range(solve.graph.plan.build_groups)
    pull(solve.graph, stripe, phase, from_phases, groups, _Marks(solve, sweep), inflow)
    reached |= inflow[0] > 0


@dataclass(frozen=True)
class _ReachLayer:
    solve: Solve
    phase: int
    sweep: int

    def __call__(self, stripe: int) -> int:
        reached = _members(self.solve, stripe, self.phase)
        if phase_size(self.solve.graph, stripe, self.phase):
            _add_reached(self.solve, stripe, self.phase, range(self.phase), self.sweep, reached)
        write_arrays(self.solve.folder.reached_layer(self.phase, stripe), {"reached": reached})
        return int(np.count_nonzero(reached))


@dataclass(frozen=True)
class _ReachSweep:
    """Sweep 0 starts from members and source phases; later ones add what the last sweep reached."""

    solve: Solve
    sweep: int

    def __call__(self, stripe: int) -> int:
        solve, core = self.solve, self.solve.graph.core_phase
        if self.sweep == 0:
            reached = _members(solve, stripe, core)
            _add_reached(solve, stripe, core, range(core), 0, reached)
        else:
            reached = reached_hosts(solve, stripe, core, self.sweep - 1).copy()
            _add_reached(solve, stripe, core, range(core, core + 1), self.sweep - 1, reached)
            if solve.graph.plan.stripes == 1:
                self._settle(reached)
        write_arrays(solve.folder.reached(self.sweep, stripe), {"reached": reached})
        return int(np.count_nonzero(reached))

    def _settle(self, reached: NDArray[np.bool_]) -> None:
        """Follows links to their end where there is one stripe: a long chain needs no sweep a link."""
        solve, core = self.solve, self.solve.graph.core_phase
        known = -1
        while known < (known := int(np.count_nonzero(reached))):
            inflow = np.zeros((1, len(reached)))
            flow = reached[None, :].astype(np.float64)
            pull(solve.graph, 0, core, range(core, core + 1), range(1), lambda *_, flow=flow: flow, inflow)
            reached |= inflow[0] > 0
