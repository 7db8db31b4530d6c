"""The stages of a run as the jobs call them: check, build, score, conclude; `ranking` has the one between.

A stage adopts the record of the same stage from an earlier attempt if it was made from the same
things; else it does the work and commits a record of its own.
"""

from __future__ import annotations

import hashlib
import json
import logging
import time
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, cast

import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank import __version__
from sparkrank.config import Config
from sparkrank.entry import JobContext
from sparkrank.errors import InputRefused
from sparkrank.graph.build import Graph, build_graph
from sparkrank.graph.rejected import added_up
from sparkrank.inputs import InputFacts, check_edges, check_hosts
from sparkrank.kernels.floor import detection_floor
from sparkrank.names.lists import HostLists, read_lists
from sparkrank.names.suffixes import SuffixRules, SuffixSections
from sparkrank.places import Place, resolve
from sparkrank.propagate.solve import SolvedHosts, solve_hosts
from sparkrank.publish.by_driver import MOST_ROWS, publish_rows
from sparkrank.publish.by_tasks import publish_parts
from sparkrank.publish.clean import remove_unnamed
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.manifest import Manifest, check_run, write_manifest
from sparkrank.publish.records import StepRecord, adopt, commit_step, missing_file
from sparkrank.publish.write import publish_table
from sparkrank.scores.host_scores import host_scores
from sparkrank.tables import HOST_SCORES, REJECTED_ROWS, arrow_schema

if TYPE_CHECKING:
    from pyspark.sql import DataFrame

log = logging.getLogger(__name__)


@dataclass(frozen=True, kw_only=True)
class RunInputs:
    """What a run reads, checked and read as far as is possible without Spark."""

    config: Config
    edges: InputFacts
    hosts: InputFacts | None
    lists: HostLists
    rules: SuffixRules

    @classmethod
    def check(cls, config: Config) -> RunInputs:
        """Checks every local input; InputRefused or ConfigError by name."""
        sections = cast(SuffixSections, config.names.suffix_sections)
        rules = SuffixRules.load(sections, config.names.extra_suffixes)
        edges = check_edges(config.input.edges)
        hosts = check_hosts(config.input.hosts) if config.input.hosts else None
        lists = read_lists(config, rules)
        return cls(config=config, edges=edges, hosts=hosts, lists=lists, rules=rules)

    def fingerprint(self, *sections: str) -> str:
        """SHA-256 over the inputs, the version, and the named sections of the configuration."""
        known = self.lists.known_spam
        settings = self.config.as_dict()
        parts = {
            "version": __version__,
            "edges": self.edges.fingerprint,
            "hosts": self.hosts.fingerprint if self.hosts else None,
            "core": self.lists.core.fingerprint,
            "known_spam": known.fingerprint if known else None,
            "suffixes": self.rules.fingerprint,
            **{section: settings[section] for section in sections},
        }
        return hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()

    @property
    def run_fingerprint(self) -> str:
        return self.fingerprint("names", "graph", "solve", "mass", "candidates", "evidence")


class InputCheck:
    """The check of a job's inputs before Java starts; keeps what it read for the job's stages."""

    def __init__(self) -> None:
        self._checked: RunInputs | None = None

    def __call__(self, config: Config) -> None:
        self._checked = RunInputs.check(config)

    @property
    def checked(self) -> RunInputs:
        """What the check read; it has run by the time a job's body does."""
        assert self._checked is not None
        return self._checked


def open_run(context: JobContext, inputs: RunInputs) -> Manifest | None:
    """The finished run if it is whole and was made from the same; None where there is work to do.

    RunConflict where the run was made from something else and is not to be replaced.
    """
    run = context.run
    found = check_run(run.output, run.run_id, inputs.run_fingerprint, replace=context.replace)
    if found is None or found.fingerprint != inputs.run_fingerprint:
        remove_unnamed(run)
        return None
    if missing := missing_file(run.output, found.tables):
        log.warning("run %s: %s is missing or has another size; made again", run.run_id, missing)
        return None
    log.info("run %s is complete and unchanged: nothing to do", run.run_id)
    return found


def build(context: JobContext, inputs: RunInputs) -> Graph:
    """The graph of the run, built or recognised."""
    for caution in inputs.edges.cautions:
        log.warning("%s", caution)
    work = resolve(context.config.run.work)
    graph = build_graph(context.spark, context.config, work, inputs.edges, inputs.hosts, inputs.rules)
    counts = graph.counts
    log.info(
        "graph: %s hosts, %s edges; %s rows rejected, %s not followed, %s self-links, %s merged; "
        "%s hosts iterate",
        *(f"{counts[name]:,}" for name in ("hosts", "edges", "rejected_rows", "not_followed_rows")),
        *(f"{counts[name]:,}" for name in ("self_link_rows", "merged_rows", "iterated_hosts")),
    )
    return graph


def score(context: JobContext, inputs: RunInputs) -> StepRecord:
    """Publishes ``host_scores`` and ``rejected_rows``."""
    fingerprint = inputs.fingerprint("names", "graph", "solve", "mass")
    if (record := adopt(context.run, "score_hosts", fingerprint)) is not None:
        log.info("scores: done before")
        return record
    graph = build(context, inputs)
    started = time.monotonic()
    solved = solve_hosts(context.spark, context.config, graph, inputs.lists)
    scores = host_scores(context.spark, solved.solution, solved.sweeps, inputs.rules)
    tables = {
        "host_scores": publish_parts(context.spark, scores, HOST_SCORES, context.run),
        "rejected_rows": _publish_rejected(context, graph, inputs, solved),
    }
    log.info("scores: %.1f s", time.monotonic() - started)
    facts = {"graph": graph.counts, "core": solved.core_facts(), "columns": solved.column_facts()}
    record = StepRecord(step="score_hosts", fingerprint=fingerprint, tables=tables, facts=facts)
    commit_step(context.run, record)
    # The table has it all now, and the states of a solve are many times a graph's size.
    solved.solution.solve.folder.place.delete_tree()
    return record


def scored_before(context: JobContext, inputs: RunInputs) -> StepRecord:
    """The record of ``score_hosts`` for these inputs; InputRefused where it has not run."""
    record = adopt(context.run, "score_hosts", inputs.fingerprint("names", "graph", "solve", "mass"))
    if record is None:
        raise InputRefused(
            f"run {context.run.run_id}: expected the scores of score_hosts for this configuration and these "
            f"inputs below {context.run.output}, found none; run jobs/score_hosts.py or jobs/run_pipeline.py"
        )
    return record


def conclude(context: JobContext, inputs: RunInputs, scored: StepRecord, ranked: StepRecord) -> Manifest:
    """Writes the manifest, which makes the run count, and removes what it replaces."""
    known = inputs.lists.known_spam
    core = inputs.lists.core
    core_strength_facts = dict(ranked.facts)
    evidence = core_strength_facts.pop("evidence")
    floor = detection_floor(
        min_scaled_pagerank=context.config.candidates.min_scaled_pagerank,
        min_relative_mass=context.config.candidates.min_relative_mass,
        damping=context.config.solve.damping,
        core_start=core_strength_facts["core_start"],
    )
    manifest = Manifest(
        run_id=context.run.run_id,
        attempt=context.run.attempt_id,
        status="complete",
        fingerprint=inputs.run_fingerprint,
        tables={**scored.tables, **ranked.tables},
        details={
            "version": __version__,
            "config": context.config.as_dict(),
            "inputs": {
                "edges": {"fingerprint": inputs.edges.fingerprint, "rows": inputs.edges.rows},
                "hosts": _facts(inputs.hosts),
                "core": {"fingerprint": core.fingerprint, "rows": core.rows},
                "known_spam": known and {"fingerprint": known.fingerprint, "rows": known.rows},
            },
            "graph": scored.facts["graph"],
            "core": {**scored.facts["core"], **core_strength_facts},
            "evidence": evidence,
            "detection_floor": floor.as_dict(),
            "columns": scored.facts["columns"],
        },
    )
    written = write_manifest(context.run, manifest)
    remove_unnamed(context.run)
    log.info(
        "run %s: %s candidates of %s hosts",
        written.run_id,
        *(f"{written.tables[name].rows:,}" for name in ("spam_candidates", "host_scores")),
    )
    return written


def _facts(facts: InputFacts | None) -> dict[str, Any] | None:
    return None if facts is None else {"fingerprint": facts.fingerprint, "rows": facts.rows}


def _publish_rejected(
    context: JobContext, graph: Graph, inputs: RunInputs, solved: SolvedHosts
) -> TableEntry:
    """Rejected values of the tables and of the lists: from the driver unless they are very many."""
    lists = [inputs.lists.core, *filter(None, [inputs.lists.known_spam])]
    rejections = [r for one in lists for r in one.rejections] + list(solved.members.unmatched)
    schema = arrow_schema(REJECTED_ROWS)
    rows = [{name: getattr(one, name) for name in schema.names} for one in rejections]
    listed = pa.Table.from_pylist(rows, schema)
    places = [graph.folder.rejected(piece) for piece in graph.rejected_pieces]
    in_pieces = sum(pq.read_metadata(place.path, filesystem=place.filesystem).num_rows for place in places)
    if listed.num_rows + in_pieces <= MOST_ROWS:
        parts = [pq.read_table(place.path, filesystem=place.filesystem) for place in places]
        return publish_rows(
            added_up([listed, *(part.cast(schema) for part in parts)]), REJECTED_ROWS, context.run
        )
    return publish_table(_many_rejected(context, listed, places), REJECTED_ROWS, context.run)


def _many_rejected(context: JobContext, listed: pa.Table, places: list[Place]) -> DataFrame:
    from pyspark.sql import functions as sf

    found = context.spark.createDataFrame(listed)
    found = found.union(context.spark.read.parquet(*(place.uri for place in places)).select(*found.columns))
    # The same value may have been met in several pieces.
    return found.groupBy("source", "row_value", "reason").agg(sf.sum("rows").alias("rows"))
