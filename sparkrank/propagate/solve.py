"""The solve of a run: lists matched, columns planned, iteration, reach."""

from __future__ import annotations

import hashlib
import json
import logging
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from sparkrank.config import Config
from sparkrank.errors import InputRefused
from sparkrank.graph.build import Graph
from sparkrank.names.lists import HostLists
from sparkrank.names.slices import plan_slices
from sparkrank.places import resolve
from sparkrank.propagate.columns import Columns, plan_columns
from sparkrank.propagate.folder import SolveFolder
from sparkrank.propagate.layers import Solve
from sparkrank.propagate.members import Members, match_lists
from sparkrank.propagate.reach import find_reached
from sparkrank.propagate.solver import Solution, solve_columns
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

log = logging.getLogger(__name__)


@dataclass(frozen=True, kw_only=True)
class SolvedHosts:
    """A solve with what it started from."""

    solution: Solution
    members: Members
    listed: int
    """Hosts of the core list."""
    good_share: float
    sweeps: int
    reached: int

    def core_facts(self) -> dict[str, Any]:
        """What the manifest says of the core."""
        graph, columns = self.solution.solve.graph, self.solution.solve.columns
        return {
            "listed": self.listed,
            "matched": self.members.core_hosts,
            "unmatched": self.listed - self.members.core_hosts,
            "known_spam_matched": self.members.known_spam_hosts,
            "slices": dict(zip(columns.slices, columns.slice_shares, strict=True)),
            "reached_hosts": self.reached,
            "good_share": self.good_share,
            "hosts": graph.n_hosts,
        }

    def column_facts(self) -> list[dict[str, Any]]:
        """What the manifest says of each column."""
        solution = self.solution
        names = solution.solve.columns.names
        bounds = zip(names, solution.error_bounds, solution.l1_bounds, strict=True)
        return [
            {"name": name, "steps": solution.steps, "error_bound": error, "l1_bound": l1}
            for name, error, l1 in bounds
        ]


def solve_hosts(spark: SparkSession, config: Config, graph: Graph, lists: HostLists) -> SolvedHosts:
    """Solves PageRank and trust; InputRefused where no core host is in the graph."""
    folder = SolveFolder(place=_solve_place(config, graph, lists))
    members = match_lists(spark, graph, folder, lists)
    if not members.core_hosts:
        raise InputRefused(
            f"input.core: expected hosts of the graph, found none of the {lists.core.hosts.num_rows:,} "
            "listed in it; check that list and edges come from the same crawl"
        )
    columns = _columns(config, graph, lists, members)
    solve = Solve(graph, folder, columns, config.solve.damping)
    log.info("solve: %d columns: %s", columns.count, ", ".join(columns.names))
    solution = solve_columns(spark, solve, tolerance=config.solve.tolerance, max_steps=config.solve.max_steps)
    with TaskRunner(spark, graph.plan.stripes, even=True) as stripes:
        reached = find_reached(solve, stripes)
    return SolvedHosts(
        solution=solution,
        members=members,
        listed=lists.core.hosts.num_rows,
        good_share=config.mass.good_share,
        sweeps=reached["sweeps"],
        reached=reached["hosts"],
    )


def _columns(config: Config, graph: Graph, lists: HostLists, members: Members) -> Columns:
    slices = plan_slices(members.weight_of, config.solve.max_columns - 1)
    return plan_columns(
        lists.core.hosts["slice"].to_pylist(),
        lists.core.hosts["weight"].to_numpy(),
        dict(slices.column_of),
        slices.names,
        members.weight_of,
        good_share=config.mass.good_share,
        n_hosts=graph.n_hosts,
        has_known_spam=lists.known_spam is not None,
    )


def _solve_place(config: Config, graph: Graph, lists: HostLists) -> Any:
    """The solve's folder; another tolerance is another solve, more steps are the same one.

    It belongs to one run, whose holder alone writes and removes it.
    """
    known = lists.known_spam
    parts = {
        "run": config.run.id,
        "graph": graph.fingerprint,
        "core": lists.core.fingerprint,
        "known_spam": known.fingerprint if known else None,
        "damping": config.solve.damping,
        "tolerance": config.solve.tolerance,
        "max_columns": config.solve.max_columns,
        "good_share": config.mass.good_share,
        "names": config.as_dict()["names"],
    }
    digest = hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()
    name = f"{graph.fingerprint[:24]}-{digest[:24]}"
    return resolve(config.run.work).child("solves", name)
