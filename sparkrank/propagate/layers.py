"""Peeled hosts: each phase computed once, exactly, from the phases before it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.graph.build import Graph
from sparkrank.places import Place
from sparkrank.propagate.columns import Columns, start_columns
from sparkrank.propagate.folder import SolveFolder
from sparkrank.propagate.pull import phase_size, pull


@dataclass(frozen=True)
class Solve:
    """What every task of a solve needs to know: it pickles small."""

    graph: Graph
    folder: SolveFolder
    columns: Columns
    damping: float

    def start(self, stripe: int, phase: int) -> NDArray[np.float64]:
        """u of a phase: shape (k, hosts of the phase)."""
        starts = self.graph.phase_starts[stripe]
        return start_columns(self.columns, self.folder, stripe, starts[phase], starts[phase + 1])

    def flow_per_score(self, stripe: int, phase: int) -> NDArray[np.float64]:
        """c / out-weight of a phase's hosts: shape (hosts of the phase,); 0 for hosts without out-links."""
        starts = self.graph.phase_starts[stripe]
        weights = read_arrays(self.graph.folder.order(stripe))["out_weight"]
        out_weight = weights[starts[phase] : starts[phase + 1]]
        factor = np.zeros(len(out_weight))
        np.divide(self.damping, out_weight, out=factor, where=out_weight > 0)
        return factor


class Flows:
    """Flow of finished phases, and of the core where ``core_state`` has it; each file is opened once."""

    def __init__(self, solve: Solve, core_state: Callable[[int], Place] | None) -> None:
        self._solve = solve
        self._core_state = core_state
        self._open: dict[tuple[int, int], NDArray[np.float64]] = {}

    def __call__(self, stripe: int, phase: int) -> NDArray[np.float64]:
        key = (stripe, phase)
        if key not in self._open:
            if phase == self._solve.graph.core_phase:
                assert self._core_state is not None
                place = self._core_state(stripe)
            else:
                place = self._solve.folder.layer(phase, stripe)
            self._open[key] = read_arrays(place)["flow"]
        return self._open[key]


@dataclass(frozen=True)
class LayerTask:
    """One stripe of a peeled phase: x = u + what earlier phases send; returns the PageRank column's sum."""

    solve: Solve
    phase: int
    step: int | None
    """The core's last step; None before the core is solved."""

    def __call__(self, stripe: int) -> float:
        score = layer_scores(self.solve, stripe, self.phase, self.step)
        arrays = {"flow": score * self.solve.flow_per_score(stripe, self.phase), "score": score}
        write_arrays(self.solve.folder.layer(self.phase, stripe), arrays)
        return float(np.add.reduce(score[0]))


@dataclass(frozen=True)
class BaseTask:
    """One stripe's constant term of the core: u + what the source phases send."""

    solve: Solve

    def __call__(self, stripe: int) -> None:
        base = layer_scores(self.solve, stripe, self.solve.graph.core_phase, None)
        write_arrays(self.solve.folder.base(stripe), {"base": base})


def layer_scores(solve: Solve, stripe: int, phase: int, step: int | None) -> NDArray[np.float64]:
    """u of the phase plus what all earlier phases send: shape (k, hosts of the phase)."""
    score = solve.start(stripe, phase)
    if phase_size(solve.graph, stripe, phase):
        groups = range(solve.graph.plan.build_groups)
        core_state = None if step is None else partial(solve.folder.state, step)
        pull(solve.graph, stripe, phase, range(phase), groups, Flows(solve, core_state), score)
    return score
