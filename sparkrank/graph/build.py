"""The graph of a run: built by stages, recognised by its fingerprint, read by the later steps."""

from __future__ import annotations

import hashlib
import json
import logging
import time
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from sparkrank.config import Config
from sparkrank.errors import InputRefused
from sparkrank.graph.cells import CellWriter
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.hosts import write_hosts
from sparkrank.graph.peeling import Peeling
from sparkrank.graph.plan import GridPlan, plan_grid
from sparkrank.graph.rows import EdgeRows, check_rejected_share
from sparkrank.graph.tiles import write_tiles
from sparkrank.inputs import InputFacts
from sparkrank.names.suffixes import SuffixRules
from sparkrank.places import Place
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

log = logging.getLogger(__name__)

# Counts up whenever a change makes other work files or other canonical names from the same input.
_LAYOUT_VERSION = 1


@dataclass(frozen=True, kw_only=True)
class Graph:
    """A built graph: where its files are and what the solve must know of it.

    ``phase_starts[s]`` are the positions at which the phases of stripe ``s`` begin, and its number of
    hosts last.  ``cells`` are the (stripe, build group) pairs that have edges.  ``counts`` is
    JSON-ready: hosts, edges, rows by what became of them.
    """

    folder: GraphFolder
    fingerprint: str
    plan: GridPlan
    salt: int
    phase_starts: list[list[int]]
    core_phase: int
    cells: list[tuple[int, int]]
    counts: dict[str, Any]

    @property
    def n_hosts(self) -> int:
        return int(self.counts["hosts"])

    @property
    def n_phases(self) -> int:
        return len(self.phase_starts[0]) - 1

    def cells_into(self, stripe: int) -> list[int]:
        """Build groups that have edges into the stripe, in order."""
        return [group for into, group in self.cells if into == stripe]


def graph_fingerprint(
    config: Config, edges: InputFacts, hosts: InputFacts | None, rules: SuffixRules, plan: GridPlan
) -> str:
    """SHA-256 over everything the work files depend on."""
    parts = {
        "layout": _LAYOUT_VERSION,
        "edges": edges.fingerprint,
        "hosts": hosts.fingerprint if hosts else None,
        "node": config.graph.node,
        "weighting": config.graph.weighting,
        "follow_only": config.graph.follow_only,
        "suffixes": rules.fingerprint if config.graph.node == "domain" else None,
        "plan": plan.as_dict(),
    }
    return hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()


def build_graph(
    spark: SparkSession,
    config: Config,
    work: Place,
    edges: InputFacts,
    hosts: InputFacts | None,
    rules: SuffixRules,
    *,
    plan: GridPlan | None = None,
) -> Graph:
    """Builds the graph, or recognises the one already built from the same input and settings.

    1. odd names decided, rejected rows set aside     (record: names)
    2. hosts → ids and names, a stripe each           (record: hosts)
    3. rows → distinct edges and degrees, a tile each (record: tiles)
    4. peel rounds, the order of hosts                (record: order)
    5. tiles → cells                                  (record: graph)

    Stages with a record are not done again.  InputRefused where too many rows are rejected or no edge
    is left.
    """
    plan = plan or plan_grid(edges.rows)
    fingerprint = graph_fingerprint(config, edges, hosts, rules, plan)
    folder = GraphFolder(place=work.child("graphs", fingerprint[:24]))
    if record := folder.record("graph"):
        log.info("graph %s is there already: %s hosts", fingerprint[:12], f"{record['counts']['hosts']:,}")
        names = folder.record("names") or {}
        check_rejected_share(names, edges.rows, config.graph.max_rejected_share)
        return _graph(folder, record)
    builder = _Builder(spark=spark, config=config, folder=folder, plan=plan, edges=edges)
    rows = EdgeRows(
        spark=spark,
        folder=folder,
        facts=edges,
        hosts_facts=hosts,
        follow_only=config.graph.follow_only,
        domain_rules=rules if config.graph.node == "domain" else None,
    )
    record = builder.run(rows, fingerprint)
    return _graph(folder, record)


@dataclass(frozen=True, kw_only=True)
class _Builder:
    spark: SparkSession
    config: Config
    folder: GraphFolder
    plan: GridPlan
    edges: InputFacts

    def run(self, rows: EdgeRows, fingerprint: str) -> dict[str, Any]:
        weighted = self.config.graph.weighting == "links"
        names = self._stage("names", rows.set_odd_aside)
        check_rejected_share(names, self.edges.rows, self.config.graph.max_rejected_share)
        hosts = self._stage("hosts", lambda: write_hosts(rows.hosts(names), self.folder, self.plan))
        followed = rows.accepted(names).where("followed")
        tiles = self._stage(
            "tiles",
            lambda: write_tiles(followed, self.folder, self.plan, hosts["salt"], weighted=weighted),
        )
        if not tiles["edges"]:
            raise InputRefused(
                f"input.edges: expected links between different hosts, found none in "
                f"{self.edges.rows:,} rows "
                f"({names['rejected_rows']:,} rejected, {tiles['self_links']:,} self-links, the rest not "
                "followed); check the columns src, dst and rel"
            )
        order = self._stage("order", lambda: self._peel(tiles, weighted=weighted))
        record = self._stage(
            "graph",
            lambda: (
                self._pack(tiles, order)
                | {
                    "fingerprint": fingerprint,
                    "plan": self.plan.as_dict(),
                    "salt": hosts["salt"],
                    "phase_starts": order["phase_starts"],
                    "core_phase": order["source_rounds"],
                    "counts": self._counts(names, hosts, tiles, order),
                }
            ),
        )
        for name in ("tiles", "peel"):
            self.folder.place.child(name).delete_tree()
        for name in ("odd", "names", "decided"):
            self.folder.scratch(name).delete_tree()
        return record

    def _stage(self, name: str, work: Any) -> dict[str, Any]:
        if (record := self.folder.record(name)) is not None:
            log.info("build %s: done before", name)
            return record
        started = time.monotonic()
        self.spark.sparkContext.setJobDescription(f"build {name}")
        record = self.folder.commit(name, work())
        log.info("build %s: %.1f s", name, time.monotonic() - started)
        return record

    def _peel(self, tiles: dict[str, Any], *, weighted: bool) -> dict[str, Any]:
        pairs = [(stripe, group) for stripe, group in tiles["tiles"]]
        peeling = Peeling(self.folder, self.plan, pairs, weighted)
        with (
            TaskRunner(self.spark, self.plan.stripes) as stripes,
            TaskRunner(self.spark, len(pairs)) as cells,
        ):
            return peeling.run(stripes, cells)

    def _pack(self, tiles: dict[str, Any], order: dict[str, Any]) -> dict[str, Any]:
        pairs = [(stripe, group) for stripe, group in tiles["tiles"]]
        writer = CellWriter(self.folder, self.plan, pairs, order["phase_starts"])
        with TaskRunner(self.spark, len(pairs)) as runner:
            return {"cells": pairs, "cell_stamps": runner.run(writer, "edges into cells")}

    def _counts(
        self, names: dict[str, Any], hosts: dict[str, Any], tiles: dict[str, Any], order: dict[str, Any]
    ) -> dict[str, Any]:
        accepted = self.edges.rows - names["rejected_rows"]
        followed = tiles["edges"] + tiles["duplicates"] + tiles["self_links"]
        return {
            "rows": self.edges.rows,
            "rejected_rows": names["rejected_rows"],
            "rejected": names["rejected"],
            "rejected_hosts": names["rejected_hosts"],
            "not_followed_rows": accepted - followed,
            "self_link_rows": tiles["self_links"],
            "merged_rows": tiles["duplicates"],
            "hosts": hosts["hosts"],
            "edges": tiles["edges"],
            "iterated_hosts": order["iterated"],
        }


def _graph(folder: GraphFolder, record: dict[str, Any]) -> Graph:
    return Graph(
        folder=folder,
        fingerprint=record["fingerprint"],
        plan=GridPlan(**record["plan"]),
        salt=record["salt"],
        phase_starts=record["phase_starts"],
        core_phase=record["core_phase"],
        cells=[(stripe, group) for stripe, group in record["cells"]],
        counts=record["counts"],
    )
