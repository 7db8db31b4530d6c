"""The stage between scores and manifest: evidence gathered, candidates ranked."""

from __future__ import annotations

import dataclasses
import logging
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sparkrank.config import Candidates, Config
from sparkrank.entry import JobContext
from sparkrank.evidence.attributes import gather_attributes
from sparkrank.evidence.candidates import spam_candidates
from sparkrank.evidence.cautions import CoreStrength, core_strength
from sparkrank.evidence.support import SupportFiles, gather_support
from sparkrank.places import Place, resolve
from sparkrank.publish.by_driver import MOST_ROWS, publish_rows
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.records import StepRecord, adopt, commit_step
from sparkrank.publish.write import publish_table
from sparkrank.stages import RunInputs, build
from sparkrank.tables import CANDIDATE_SUPPORT, SPAM_CANDIDATES, TableSpec

if TYPE_CHECKING:
    from pyspark.sql import DataFrame

log = logging.getLogger(__name__)


def rank(context: JobContext, inputs: RunInputs, scored: StepRecord) -> StepRecord:
    """Publishes ``spam_candidates`` and ``candidate_support``."""
    fingerprint = inputs.run_fingerprint
    if (record := adopt(context.run, "rank_candidates", fingerprint)) is not None:
        log.info("candidates: done before")
        return record
    strength = strength_of_core(context.config, scored)
    found = gather(context, inputs, scored, context.config.candidates, fingerprint[:24])
    measures = found.measures_frame(context.spark)
    rows = scores_frame(context, scored)
    candidates = spam_candidates(rows, measures, context.config.candidates, strength)
    tables = {
        "spam_candidates": publish_table(candidates, SPAM_CANDIDATES, context.run),
        "candidate_support": publish_support(context, found, CANDIDATE_SUPPORT),
    }
    candidates.sparkSession.catalog.clearCache()
    record = StepRecord(
        step="rank_candidates",
        fingerprint=fingerprint,
        tables=tables,
        facts={
            "core_start": strength.start,
            "boosters_hidden_by_core_link": strength.hidden_boosters,
            "cautions": strength.cautions,
            "evidence": found.facts(),
        },
    )
    commit_step(context.run, record)
    found.folder.place.delete_tree()
    return record


def gather(
    context: JobContext,
    inputs: RunInputs,
    scored: StepRecord,
    wanted: Candidates | NDArray[np.int64],
    name: str,
) -> SupportFiles:
    """The support of the wanted hosts (see ``gather_support``), in a folder of this name."""
    found = gather_support(
        context.spark,
        build(context, inputs),
        resolve(context.config.run.work).child("evidence", name),
        _score_files(context, scored),
        inputs.lists.core,
        wanted,
        context.config.evidence,
        damping=context.config.solve.damping,
        good_share=context.config.mass.good_share,
    )
    rules = inputs.rules if context.config.graph.node == "domain" else None
    listed = [*found.measures, *found.support]
    place = found.folder.attributes()
    attributes = gather_attributes(context.spark, inputs.hosts, rules, listed, place)
    return dataclasses.replace(found, attributes=attributes)


def scores_frame(context: JobContext, scored: StepRecord) -> DataFrame:
    """The rows of ``host_scores``."""
    return context.spark.read.parquet(*(place.uri for place in _score_files(context, scored)))


def publish_support(context: JobContext, found: SupportFiles, table: TableSpec) -> TableEntry:
    """Publishes the rows of support: from the driver where they are few."""
    if found.rows <= MOST_ROWS:
        return publish_rows(found.support_table(), table, context.run)
    return publish_table(found.support_frame(context.spark), table, context.run)


def _score_files(context: JobContext, scored: StepRecord) -> list[Place]:
    return [context.run.output.below(file.path) for file in scored.tables["host_scores"].files]


def strength_of_core(config: Config, scored: StepRecord) -> CoreStrength:
    return core_strength(
        good_share=config.mass.good_share,
        n_hosts=scored.facts["graph"]["hosts"],
        n_core=scored.facts["core"]["matched"],
        slices=len(scored.facts["core"]["slices"]),
        damping=config.solve.damping,
        min_relative_mass=config.candidates.min_relative_mass,
    )
