"""Columns of the solve → the rows of ``host_scores``.

Numpy tasks put a stripe's columns, degrees and names side by side and leave them in scratch files, cut by
host into the parts from which the table is published.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays
from sparkrank.graph.folder import GraphFolder
from sparkrank.kernels.mass import Masses, spam_mass
from sparkrank.names.suffixes import SuffixRules, split_hosts
from sparkrank.propagate.columns import core_members
from sparkrank.propagate.layers import Solve
from sparkrank.propagate.reach import NOT_REACHED, core_distances
from sparkrank.propagate.solver import Solution
from sparkrank.publish.parts import TableParts, choose_cuts, part_numbers, sample_size, write_parts
from sparkrank.tables import HOST_SCORES
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import SparkSession


def host_scores(spark: SparkSession, solution: Solution, sweeps: int, rules: SuffixRules) -> TableParts:
    """One row a host, in the columns of ``host_scores``, cut into parts by host.

    ``sweeps`` is the last sweep of the reach, ``rules`` split the hosts' names.
    """
    graph = solution.solve.graph
    stripes = range(graph.plan.stripes)
    with TaskRunner(spark, len(stripes), even=True) as tasks:
        sampled = -(-sample_size(graph.n_hosts) // len(stripes))
        sample = tasks.run(_SampleTask(graph.folder, sampled), "sample of hosts")
        cuts = choose_cuts(itertools.chain.from_iterable(sample), graph.n_hosts)
        rows = tasks.run(_ScoreTask(solution, sweeps, rules, cuts), "scores of hosts")
    files = tuple(solution.solve.folder.scores(stripe) for stripe in stripes)
    return TableParts(files=files, rows=tuple(rows))


@dataclass(frozen=True)
class _SampleTask:
    """The stripe's first hosts by id: ids are hashes, so that they are a random sample of the names."""

    folder: GraphFolder
    n_sampled: int

    def __call__(self, stripe: int) -> list[str]:
        place = self.folder.names(stripe)
        with place.filesystem.open_input_file(place.path) as source:
            for batch in pq.ParquetFile(source).iter_batches(self.n_sampled, columns=["host"]):
                hosts: list[str] = batch["host"].to_pylist()
                return hosts
        return []


@dataclass(frozen=True)
class _ScoreTask:
    """Writes a stripe's rows, part by part; the report has the rows of each part."""

    solution: Solution
    sweeps: int
    rules: SuffixRules
    cuts: pa.StringArray

    def __call__(self, stripe: int) -> tuple[int, ...]:
        hosts = _hosts(self.solution.solve.graph.folder, stripe)
        number = part_numbers(hosts, self.cuts)
        # Hosts of a part lie together, in the order of their ids.
        order = np.argsort(number.astype(np.min_scalar_type(len(self.cuts))), kind="stable")
        bounds = np.searchsorted(number[order], np.arange(len(self.cuts) + 2))
        rows = _StripeRows(self.solution, self.sweeps, self.rules, stripe, hosts)
        parts = (rows.columns(order[first:end]) for first, end in itertools.pairwise(bounds))
        return write_parts(self.solution.solve.folder.scores(stripe), HOST_SCORES, parts)


class _StripeRows:
    """What is known of a stripe's hosts, from which rows are put together."""

    def __init__(
        self, solution: Solution, sweeps: int, rules: SuffixRules, stripe: int, hosts: pa.StringArray
    ) -> None:
        solve = solution.solve
        self._hosts = hosts
        self._rules = rules
        self._slices = solve.columns
        self._pagerank_sum = solution.pagerank_sum
        # Names and degrees are in the order of ids, the rest is in the solve's.
        self._position = read_arrays(solve.graph.folder.order(stripe))["position"]
        self._degrees = read_arrays(solve.graph.folder.degrees(stripe))
        self._solved = _solved_columns(solve, stripe, solution.steps)
        self._distance = _distances(solve, stripe, sweeps)
        self._is_core = core_members(solve.folder, stripe, len(hosts))

    def columns(self, at: NDArray[np.int64]) -> dict[str, pa.Array]:
        """The columns of ``host_scores`` for the hosts at these places in the order of ids."""
        position = self._position[at]
        solved = self._solved.take(position, axis=1)
        distance = self._distance[position]
        reached = distance != NOT_REACHED
        known = solved[-1] if self._slices.has_known_spam else None
        slice_trust = np.where(reached, solved[1 : 1 + len(self._slices.slices)], 0.0)
        masses = spam_mass(solved[0], slice_trust, self._slices.slice_shares, known)
        hosts = self._hosts.take(pa.array(at))
        split = split_hosts(hosts, self._rules)
        return {
            "host": hosts,
            "domain": split.domains,
            "suffix": split.suffixes,
            "in_degree": pa.array(self._degrees["in_degree"][at].astype(np.int64)),
            "out_degree": pa.array(self._degrees["out_degree"][at].astype(np.int64)),
            "pagerank": pa.array(solved[0] / self._pagerank_sum),
            "scaled_pagerank": pa.array(solved[0]),
            "known_spam_mass": _or_nulls(known, len(at)),
            **_mass_columns(masses),
            "is_core": pa.array(self._is_core[position]),
            "core_reached": pa.array(reached),
            "core_distance": pa.array(distance.astype(np.int32), mask=~reached),
        }


def _hosts(folder: GraphFolder, stripe: int) -> pa.StringArray:
    """The stripe's hosts in the order of their ids."""
    place = folder.names(stripe)
    hosts = pq.read_table(place.path, filesystem=place.filesystem, columns=["host"])["host"]
    return pa.concat_arrays(hosts.chunks or [pa.array([], pa.string())])


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
