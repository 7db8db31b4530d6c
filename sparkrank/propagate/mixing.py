"""Extrapolation between steps: every few plain steps, the next one starts from their best mixture.

When a mixture is made follows from the step's number alone, so a resumed solve makes the same ones.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.kernels.extrapolate import combine, extrapolation_weights, residual_products
from sparkrank.places import Place
from sparkrank.propagate.folder import SolveFolder
from sparkrank.propagate.layers import Solve
from sparkrank.tasks import TaskRunner

# Plain steps before the first cycle: the fast modes die by themselves.
_FIRST_STEPS = 4
# Residuals a mixture: more take out more slow modes and keep more states. Seven took fewer steps than four
# to six on a real host graph, a web with planted rings and an R-MAT graph, and nine hardly fewer.
_CYCLE_STEPS = 7

KEPT_STEPS = _CYCLE_STEPS + 2
"""States older than this many steps are of no further use."""


def is_mixed_after(step: int) -> bool:
    """Whether the step after this one starts from a mixture."""
    return step > _FIRST_STEPS and (step - _FIRST_STEPS) % _CYCLE_STEPS == 0


def cycle_start(step: int) -> int:
    """The step whose state, or mixture, began the cycle that ``step`` (> 0) belongs to."""
    if step <= _FIRST_STEPS:
        return 0
    return step - 1 - (step - 1 - _FIRST_STEPS) % _CYCLE_STEPS


def state_before(folder: SolveFolder, step: int, stripe: int) -> Place:
    """The state that a step starts from."""
    if is_mixed_after(step - 1):
        return folder.mixed(step - 1, stripe)
    return folder.state(step - 1, stripe)


def mix_states(solve: Solve, stripes: TaskRunner, step: int) -> list[dict[str, int]]:
    """Writes the mixture of the cycle that ended with ``step``; the stamps of its files.

    1. each stripe multiplies its residuals with each other
    2. the sums over all stripes give each column's weights
    3. each stripe mixes its states by them
    """
    parts = stripes.run(_ProductsTask(solve, step), f"after step {step}: products of residuals")
    total = parts[0].copy()
    for part in parts[1:]:
        total += part
    weights = np.array([extrapolation_weights(products.tolist()) for products in total]).T
    return stripes.run(_MixTask(solve, step, weights), f"after step {step}: mixture")


def _cycle(step: int) -> range:
    return range(cycle_start(step) + 1, step + 1)


@dataclass(frozen=True)
class _ProductsTask:
    """Products of one stripe's residuals: shape (k, m, m)."""

    solve: Solve
    step: int

    def __call__(self, stripe: int) -> NDArray[np.float64]:
        folder = self.solve.folder
        residuals = []
        for step in _cycle(self.step):
            after = read_arrays(folder.state(step, stripe))["flow"]
            residuals.append(after - read_arrays(state_before(folder, step, stripe))["flow"])
        return residual_products(residuals)


@dataclass(frozen=True)
class _MixTask:
    """One stripe's mixture; ``weights`` has shape (m, k)."""

    solve: Solve
    step: int
    weights: NDArray[np.float64]

    def __call__(self, stripe: int) -> dict[str, int]:
        folder = self.solve.folder
        states = [read_arrays(folder.state(step, stripe))["flow"] for step in _cycle(self.step)]
        stamp = write_arrays(folder.mixed(self.step, stripe), {"flow": combine(states, self.weights)})
        return stamp.as_dict()
