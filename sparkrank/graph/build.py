"""The graph of a run: built by stages, recognised by its fingerprint, read by the later steps."""

from __future__ import annotations

import hashlib
import json
import logging
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from sparkrank.config import Config
from sparkrank.errors import InputRefused, SparkrankError
from sparkrank.graph.cells import CellWriter
from sparkrank.graph.counts import add_counts, check_rejected_share, graph_counts
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.hosts import HostsTask
from sparkrank.graph.peeling import Peeling
from sparkrank.graph.pieces import Piece, plan_pieces
from sparkrank.graph.plan import GridPlan, plan_grid
from sparkrank.graph.scan import ScanTask
from sparkrank.graph.tiles import TileTask
from sparkrank.inputs import InputFacts
from sparkrank.names.suffixes import SuffixRules
from sparkrank.places import Place
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

log = logging.getLogger(__name__)

# The seed under which the ids of hosts are most likely distinct is as good as any other; Spark's own
# xxhash64 uses this one, so ids can be looked up from SQL.
_FIRST_SALT = 42
_SALTS = 3
_SUMMED = ("rows", "edge_rows", "not_followed", "self_links", "clashes")
_BY_REASON = ("rejected", "rejected_hosts")

# Counts up whenever a change makes other work files or other canonical names from the same input.
_LAYOUT_VERSION = 5


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
    rejected_pieces: list[int]
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

    1. rows → ids by tile, hosts by stripe, rejected values   (record: scan)
    2. hosts → sorted ids and names, a stripe each            (record: hosts)
    3. ids → distinct edges and degrees, a tile each          (record: tiles)
    4. peel rounds, the order of hosts                        (record: order)
    5. tiles → cells                                          (record: graph)

    Stages with a record are not done again.  InputRefused where too many rows are rejected or no edge
    is left.
    """
    plan = plan or plan_grid(edges.rows)
    fingerprint = graph_fingerprint(config, edges, hosts, rules, plan)
    folder = GraphFolder(place=work.child("graphs", fingerprint[:24]))
    if record := folder.record("graph"):
        log.info("graph %s is there already: %s hosts", fingerprint[:12], f"{record['counts']['hosts']:,}")
        check_rejected_share(record["counts"], config.graph.max_rejected_share)
        return _graph(folder, record)
    domain_rules = rules if config.graph.node == "domain" else None
    builder = _Builder(
        spark=spark, config=config, folder=folder, plan=plan, pieces=_pieces(config, edges, hosts)
    )
    return _graph(folder, builder.run(domain_rules, fingerprint))


def _pieces(config: Config, edges: InputFacts, hosts: InputFacts | None) -> list[Piece]:
    """Edge pieces, then pieces of the hosts list."""
    columns, dictionaries = ["src", "dst"], []
    if edges.has_links:
        columns.append("links")
    if edges.has_rel and config.graph.follow_only:
        columns.append("rel")
        dictionaries.append("rel")
    pieces = plan_pieces(edges, tuple(columns), tuple(dictionaries))
    if hosts is not None:
        pieces += plan_pieces(hosts, ("host",))
    return pieces


@dataclass(frozen=True, kw_only=True)
class _Builder:
    spark: SparkSession
    config: Config
    folder: GraphFolder
    plan: GridPlan
    pieces: list[Piece]

    def run(self, domain_rules: SuffixRules | None, fingerprint: str) -> dict[str, Any]:
        weighted = self.config.graph.weighting == "links"
        scan, hosts = self._scan(domain_rules, weighted=weighted)
        tiles = self._stage("tiles", lambda: self._tile(scan, weighted=weighted))
        if not tiles["edges"]:
            raise InputRefused(
                f"input.edges: expected links between different hosts, found none in {scan['rows']:,} rows "
                f"({sum(scan['rejected'].values()):,} rejected, {scan['self_links']:,} self-links, "
                f"{scan['not_followed']:,} not followed); check the columns src, dst and rel"
            )
        order = self._stage("order", lambda: self._peel(tiles, weighted=weighted))
        record = self._stage(
            "graph",
            lambda: {
                **self._pack(tiles, order),
                "fingerprint": fingerprint,
                "plan": self.plan.as_dict(),
                "salt": scan["salt"],
                "rejected_pieces": scan["rejected_pieces"],
                "phase_starts": order["phase_starts"],
                "core_phase": order["source_rounds"],
                "counts": graph_counts(scan, hosts, tiles, order),
            },
        )
        for name in ("scan", "tiles", "peel"):
            self.folder.place.child(name).delete_tree()
        return record

    def _stage(self, name: str, work: Callable[[], dict[str, Any]]) -> dict[str, Any]:
        if (record := self.folder.record(name)) is not None:
            log.info("build %s: done before", name)
            return record
        started = time.monotonic()
        record = self.folder.commit(name, work())
        log.info("build %s: %.1f s", name, time.monotonic() - started)
        return record

    def _scan(
        self, domain_rules: SuffixRules | None, *, weighted: bool
    ) -> tuple[dict[str, Any], dict[str, Any]]:
        """Scans under a salt; under another where two hosts share an id."""
        salt = _FIRST_SALT
        for attempt in range(1, _SALTS + 1):
            task = ScanTask(
                self.folder,
                self.plan,
                self.pieces,
                salt,
                weighted,
                self.config.graph.follow_only,
                domain_rules,
            )
            scan = self._stage(f"scan-{attempt}", lambda task=task: self._run_scan(task))  # type: ignore[misc]
            check_rejected_share(scan, self.config.graph.max_rejected_share)
            hosts = self._stage(f"hosts-{attempt}", self._gather_hosts)
            clashes = scan["clashes"] + hosts["clashes"]
            if not clashes:
                return scan, hosts
            log.warning("%d hosts share an id with another under salt %d", clashes, salt)
            # The next salt is a function of all hosts, in no order: the same however the input is cut.
            salt = hosts["id_sum"] % (1 << 62)
        raise SparkrankError(
            f"host ids: expected distinct 64-bit ids under one of {_SALTS} salts, found {clashes} clashes; "
            "the input holds names forged against the hash"
        )

    def _run_scan(self, task: ScanTask) -> dict[str, Any]:
        with TaskRunner(self.spark, len(self.pieces)) as runner:
            reports = runner.run(task, "scan of the input")
        return {
            "salt": task.salt,
            **{name: sum(report[name] for report in reports) for name in _SUMMED},
            **{name: add_counts([report[name] for report in reports]) for name in _BY_REASON},
            "edge_pieces": [i for i, report in enumerate(reports) if report["edge_rows"]],
            "rejected_pieces": [i for i, r in enumerate(reports) if r["rejected"] or r["rejected_hosts"]],
        }

    def _gather_hosts(self) -> dict[str, Any]:
        with TaskRunner(self.spark, self.plan.stripes) as runner:
            reports = runner.run(HostsTask(self.folder, len(self.pieces)), "hosts of stripes")
        return {name: sum(report[name] for report in reports) for name in ("hosts", "clashes", "id_sum")}

    def _tile(self, scan: dict[str, Any], *, weighted: bool) -> dict[str, Any]:
        n_tiles = self.plan.stripes * self.plan.build_groups
        if not scan["edge_pieces"]:
            return {"tiles": [], "edges": 0}
        with TaskRunner(self.spark, n_tiles) as runner:
            task = TileTask(self.folder, self.plan, scan["edge_pieces"], weighted)
            edges = runner.run(task, "edges of tiles")
        filled = [divmod(tile, self.plan.build_groups) for tile, count in enumerate(edges) if count]
        return {"tiles": filled, "edges": sum(edges)}

    def _peel(self, tiles: dict[str, Any], *, weighted: bool) -> dict[str, Any]:
        pairs = [(stripe, group) for stripe, group in tiles["tiles"]]
        peeling = Peeling(self.folder, self.plan, pairs, weighted)
        with (
            TaskRunner(self.spark, self.plan.stripes, even=True) as stripes,
            TaskRunner(self.spark, len(pairs), even=True) as cells,
        ):
            return peeling.run(stripes, cells)

    def _pack(self, tiles: dict[str, Any], order: dict[str, Any]) -> dict[str, Any]:
        pairs = [(stripe, group) for stripe, group in tiles["tiles"]]
        writer = CellWriter(self.folder, self.plan, pairs, order["phase_starts"])
        with TaskRunner(self.spark, len(pairs)) as runner:
            return {"cells": pairs, "cell_stamps": runner.run(writer, "edges into cells")}


def _graph(folder: GraphFolder, record: dict[str, Any]) -> Graph:
    return Graph(
        folder=folder,
        fingerprint=record["fingerprint"],
        plan=GridPlan(**record["plan"]),
        salt=record["salt"],
        phase_starts=record["phase_starts"],
        core_phase=record["core_phase"],
        cells=[(stripe, group) for stripe, group in record["cells"]],
        rejected_pieces=record["rejected_pieces"],
        counts=record["counts"],
    )
