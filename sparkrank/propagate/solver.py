"""The block power iteration: x = c·T'x + u for all columns at once, step by committed step.

A task sums one cell of the grid: the flow of one group of source stripes into one destination stripe.
With a single group the task also finishes its stripe; with several, the stripe's owner adds the groups'
parts in their order.  A step counts once its record is written; the record says what every stripe's
file must be, so a later run goes on from there.
"""

from __future__ import annotations

import logging
import time
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import has_arrays, read_arrays, write_arrays
from sparkrank.errors import NotConverged
from sparkrank.propagate.layers import BaseTask, Flows, LayerTask, Solve
from sparkrank.propagate.mixing import KEPT_STEPS, cycle_start, is_mixed_after, mix_states, state_before
from sparkrank.propagate.pull import phase_size, pull
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

log = logging.getLogger(__name__)


@dataclass(frozen=True, kw_only=True)
class Solution:
    """A finished solve.

    ``error_bounds[j]``: no host's column j is further from the exact value than this times the host's
    PageRank.  ``l1_bounds[j]``: at least the sum of all hosts' errors divided by N/(1-c), which is all
    scaled PageRank of a graph without leaks.  ``pagerank_sum`` is the sum of all hosts' scaled PageRank.
    """

    solve: Solve
    steps: int
    error_bounds: list[float]
    l1_bounds: list[float]
    pagerank_sum: float
    edges_per_step: int


def solve_columns(spark: SparkSession, solve: Solve, *, tolerance: float, max_steps: int) -> Solution:
    """Solves all columns to the tolerance.

    1. source phases, each once
    2. the core's constant term; its start u
    3. steps until no host changes by more than the tolerance in any column
    4. sink phases, each once

    Raises NotConverged where ``max_steps`` steps are too few; the steps done stay committed.
    """
    graph = solve.graph
    if (done := solve.folder.record("solution")) is not None:
        log.info("solve: done before, %d steps", done["steps"])
        return Solution(solve=solve, **done)
    with TaskRunner(spark, graph.plan.stripes, even=True) as stripes:
        first = _prepare(solve, stripes)
        record = _iterate(spark, solve, stripes, tolerance, max_steps)
        sums = [*first["layer_sums"], record["pagerank_sum"]]
        for phase in range(graph.core_phase + 1, graph.n_phases):
            task = LayerTask(solve, phase, record["step"])
            sums.append(_sum(stripes.run(task, f"hosts that feed nobody, phase {phase}")))
    finished = {
        "steps": record["step"],
        "error_bounds": record["largest_change"],
        "l1_bounds": [change / graph.n_hosts for change in record["change_sum"]],
        "pagerank_sum": _sum(sums),
        "edges_per_step": record["edges"],
    }
    solve.folder.commit("solution", finished)
    return Solution(solve=solve, **finished)


def _prepare(solve: Solve, stripes: TaskRunner) -> dict[str, Any]:
    """Source phases and the core's constant term; the record holds the phases' PageRank sums."""
    if (record := solve.folder.record("prepared")) is not None:
        return record
    sums = []
    for phase in range(solve.graph.core_phase):
        sums.append(_sum(stripes.run(LayerTask(solve, phase, None), f"hosts fed by nobody, phase {phase}")))
    stripes.run(BaseTask(solve), "constant term")
    return solve.folder.commit("prepared", {"layer_sums": sums})


def _iterate(
    spark: SparkSession, solve: Solve, stripes: TaskRunner, tolerance: float, max_steps: int
) -> dict[str, Any]:
    """Steps until converged; the last step's record."""
    plan = solve.graph.plan
    step, record = _last_step(solve)
    if record is not None:
        log.info("solve: going on after step %d", step)
        # A stop between a step's record and its cleaning left the files that it replaces.
        solve.folder.drop_step(step - KEPT_STEPS)
    else:
        stripes.run(_StartTask(solve), "start")
    cells = TaskRunner(spark, plan.stripes * plan.solve_groups, even=True) if plan.solve_groups > 1 else None
    try:
        while record is None or max(record["largest_change"]) > tolerance:
            if step >= max_steps:
                raise _not_converged(record, tolerance, max_steps)
            started = time.monotonic()
            mixed = mix_states(solve, stripes, step) if is_mixed_after(step) else []
            step += 1
            if cells is not None:
                cells.run(_PartialTask(solve, step), f"step {step}: cells")
            reports = stripes.run(_StepTask(solve, step), f"step {step}")
            record = solve.folder.commit(f"step-{step:05d}", _step_record(step, reports, mixed))
            solve.folder.drop_step(step - KEPT_STEPS)
            _log_step(record, solve.columns.count, time.monotonic() - started)
    finally:
        if cells is not None:
            cells.close()
    return record


def _last_step(solve: Solve) -> tuple[int, dict[str, Any] | None]:
    """The last committed step from which the solve can go on, or (0, None).

    That is a step whose own files, and those of the steps it will be mixed with, are what their
    records say.
    """
    step = 0
    while solve.folder.record(f"step-{step + 1:05d}") is not None:
        step += 1
    while step > 0:
        first = cycle_start(step)
        if all(_is_whole(solve, needed) for needed in range(max(1, first), step + 1)):
            return step, solve.folder.record(f"step-{step:05d}")
        log.warning("step %d: files are missing or damaged; the step is done again", step)
        step -= 1
    return 0, None


def _is_whole(solve: Solve, step: int) -> bool:
    """Whether a step's files, and the mixture that it began from, are what its record says."""
    record = solve.folder.record(f"step-{step:05d}")
    if record is None:
        return False
    files = [(solve.folder.state(step, stripe), stamp) for stripe, stamp in enumerate(record["stamps"])]
    files += [
        (solve.folder.mixed(step - 1, stripe), stamp) for stripe, stamp in enumerate(record["mixed_stamps"])
    ]
    return all(has_arrays(place, stamp) for place, stamp in files)


def _step_record(step: int, reports: list[dict[str, Any]], mixed: list[dict[str, int]]) -> dict[str, Any]:
    """Adds the stripes' reports up, in stripe order; ``mixed`` stamps what the step began from."""
    columns = range(len(reports[0]["largest_change"]))
    return {
        "step": step,
        "largest_change": [max(report["largest_change"][j] for report in reports) for j in columns],
        "change_sum": [_sum([report["change_sum"][j] for report in reports]) for j in columns],
        "pagerank_sum": _sum([report["pagerank_sum"] for report in reports]),
        "edges": sum(report["edges"] for report in reports),
        "stamps": [report["stamp"] for report in reports],
        "mixed_stamps": mixed,
    }


def _log_step(record: dict[str, Any], n_columns: int, seconds: float) -> None:
    log.info(
        "step %d: error at most %.1e of PageRank, %.3g million edge-columns/s, %.2f s",
        record["step"],
        max(record["largest_change"]),
        record["edges"] * n_columns / seconds / 1e6,
        seconds,
    )


def _not_converged(record: dict[str, Any] | None, tolerance: float, max_steps: int) -> NotConverged:
    found = (
        "no step" if record is None else f"{max(record['largest_change']):.2g} after step {record['step']}"
    )
    return NotConverged(
        f"solve: expected an error of at most {tolerance:.3g} of PageRank (solve.tolerance) within "
        f"{max_steps} steps (solve.max_steps), found {found}; allow more steps, "
        "the steps done are kept, or a larger tolerance"
    )


def _sum(values: list[float]) -> float:
    """Left to right: the same bits whoever computed the parts."""
    total = 0.0
    for value in values:
        total += value
    return total


@dataclass(frozen=True)
class _StartTask:
    """State 0 of one stripe: the flow of u."""

    solve: Solve

    def __call__(self, stripe: int) -> None:
        core = self.solve.graph.core_phase
        flow = self.solve.start(stripe, core) * self.solve.flow_per_score(stripe, core)
        write_arrays(self.solve.folder.state(0, stripe), {"flow": flow})


@dataclass(frozen=True)
class _PartialTask:
    """One cell of the grid: what a source group sends into a stripe."""

    solve: Solve
    step: int

    def __call__(self, cell: int) -> None:
        plan = self.solve.graph.plan
        stripe, group = divmod(cell, plan.solve_groups)
        part, n_edges = _core_inflow(self.solve, self.step, stripe, plan.build_groups_of_solve_group(group))
        place = self.solve.folder.partial(self.step, stripe, group)
        write_arrays(place, {"part": part, "edges": np.array([n_edges])})


@dataclass(frozen=True)
class _StepTask:
    """Finishes one stripe of a step; returns its changes, sums and the stamp of its file."""

    solve: Solve
    step: int

    def __call__(self, stripe: int) -> dict[str, Any]:
        solve, folder = self.solve, self.solve.folder
        plan, core = solve.graph.plan, solve.graph.core_phase
        if plan.solve_groups == 1:
            inflow, n_edges = _core_inflow(solve, self.step, stripe, range(plan.build_groups))
        else:
            inflow, n_edges = self._add_partials(stripe)
        base = read_arrays(folder.base(stripe))["base"]
        before = read_arrays(state_before(folder, self.step, stripe))["flow"]
        factor = solve.flow_per_score(stripe, core)
        largest_change, change_sum = [], []
        pagerank_sum = 0.0
        # Column by column, and the flow in the place of the score: what one line leaves in the cache, the
        # next finds there.
        for j, score in enumerate(inflow):
            score += base[j]
            if j == 0:
                pagerank_sum = float(np.add.reduce(score))
            flow = np.multiply(score, factor, out=score)
            # The change of the score itself: core hosts have out-links, so no factor is 0.
            change = flow - before[j]
            np.abs(change, out=change)
            change /= factor
            largest_change.append(float(change.max(initial=0.0)))
            change_sum.append(float(np.add.reduce(change)))
        stamp = write_arrays(folder.state(self.step, stripe), {"flow": inflow})
        return {
            "largest_change": largest_change,
            "change_sum": change_sum,
            "pagerank_sum": pagerank_sum,
            "edges": n_edges,
            "stamp": stamp.as_dict(),
        }

    def _add_partials(self, stripe: int) -> tuple[NDArray[np.float64], int]:
        total: NDArray[np.float64] | None = None
        n_edges = 0
        for group in range(self.solve.graph.plan.solve_groups):
            arrays = read_arrays(self.solve.folder.partial(self.step, stripe, group))
            total = arrays["part"].copy() if total is None else np.add(total, arrays["part"], out=total)
            n_edges += int(arrays["edges"][0])
        assert total is not None
        return total, n_edges


def _core_inflow(solve: Solve, step: int, stripe: int, groups: range) -> tuple[NDArray[np.float64], int]:
    """What the core sends into a stripe's core hosts, and over how many edges."""
    core = solve.graph.core_phase
    inflow = np.zeros((solve.columns.count, phase_size(solve.graph, stripe, core)))
    flows = Flows(solve, partial(state_before, solve.folder, step))
    n_edges = pull(solve.graph, stripe, core, range(core, core + 1), groups, flows, inflow)
    return inflow, n_edges
