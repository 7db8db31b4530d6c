"""Columns of the solve → the rows of ``host_scores``.

Numpy tasks put a stripe's columns, degrees and names side by side and leave them as Parquet, from which
Spark publishes the table.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays
from sparkrank.kernels.mass import Masses, spam_mass
from sparkrank.names.suffixes import SuffixRules, split_hosts
from sparkrank.propagate.columns import core_members
from sparkrank.propagate.layers import Solve
from sparkrank.propagate.reach import NOT_REACHED, core_distances
from sparkrank.propagate.solver import Solution
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import DataFrame, SparkSession

_ROW_GROUP_ROWS = 1 << 17  # some MB a column chunk


def host_scores(spark: SparkSession, solution: Solution, sweeps: int, rules: SuffixRules) -> DataFrame:
    """One row a host, in the columns of ``host_scores``.

    ``sweeps`` is the last sweep of the reach, ``rules`` split the hosts' names.
    """
    solve = solution.solve
    with TaskRunner(spark, solve.graph.plan.stripes, even=True) as stripes:
        stripes.run(_ScoreTask(solution, sweeps, rules), "scores of hosts")
    paths = [solve.folder.scores(stripe).uri for stripe in range(solve.graph.plan.stripes)]
    return spark.read.parquet(*paths)


@dataclass(frozen=True)
class _ScoreTask:
    solution: Solution
    sweeps: int
    rules: SuffixRules

    def __call__(self, stripe: int) -> None:
        solve = self.solution.solve
        files = solve.graph.folder
        # The solve's order back to the order of the ids, in which names and degrees are.
        position = read_arrays(files.order(stripe))["position"]
        columns = _solved_columns(solve, stripe, self.solution.steps)[:, position]
        distance = _distances(solve, stripe, self.sweeps)[position]
        reached = distance != NOT_REACHED
        is_core = core_members(solve.folder, stripe, len(position))[position]
        names = pq.read_table(files.names(stripe).path, filesystem=files.names(stripe).filesystem)["host"]
        degrees = read_arrays(files.degrees(stripe))
        known = columns[-1] if solve.columns.has_known_spam else None
        n_slices = len(solve.columns.slices)
        slice_trust = np.where(reached, columns[1 : 1 + n_slices], 0.0)
        masses = spam_mass(columns[0], slice_trust, solve.columns.slice_shares, known)
        split = split_hosts(pa.concat_arrays(names.chunks or [pa.array([], pa.string())]), self.rules)
        table = pa.table(
            {
                "host": names,
                "domain": split.domains,
                "suffix": split.suffixes,
                "in_degree": degrees["in_degree"].astype(np.int64),
                "out_degree": degrees["out_degree"].astype(np.int64),
                "pagerank": columns[0] / self.solution.pagerank_sum,
                "scaled_pagerank": columns[0],
                "known_spam_mass": _or_nulls(known, len(names)),
                **_mass_columns(masses),
                "is_core": is_core,
                "core_reached": reached,
                "core_distance": pa.array(distance.astype(np.int32), mask=~reached),
            }
        )
        sink = pa.BufferOutputStream()
        pq.write_table(table, sink, compression="zstd", row_group_size=_ROW_GROUP_ROWS)
        solve.folder.scores(stripe).write_bytes(sink.getvalue())


def _mass_columns(masses: Masses) -> dict[str, pa.Array]:
    n = len(masses.trust)
    return {
        "trust": pa.array(masses.trust),
        "absolute_mass": pa.array(masses.absolute),
        "relative_mass": pa.array(masses.relative),
        "relative_mass_low": _or_nulls(masses.low, n),
        "relative_mass_high": _or_nulls(masses.high, n),
    }


def _or_nulls(values: NDArray[np.float64] | None, n: int) -> pa.Array:
    return pa.nulls(n, pa.float64()) if values is None else pa.array(values)


def _solved_columns(solve: Solve, stripe: int, steps: int) -> NDArray[np.float64]:
    """All columns of the stripe's hosts in the solve's order: shape (k, hosts)."""
    parts = []
    for phase in range(solve.graph.n_phases):
        if phase == solve.graph.core_phase:
            flow = read_arrays(solve.folder.state(steps, stripe))["flow"]
            parts.append(flow / solve.flow_per_score(stripe, phase))
        else:
            parts.append(read_arrays(solve.folder.layer(phase, stripe))["score"])
    return np.concatenate(parts, axis=1)


def _distances(solve: Solve, stripe: int, sweeps: int) -> NDArray[np.int64]:
    phases = range(solve.graph.n_phases)
    return np.concatenate([core_distances(solve, stripe, phase, sweeps) for phase in phases])
