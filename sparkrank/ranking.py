"""The stage between scores and manifest: evidence gathered, candidates ranked."""

from __future__ import annotations

import dataclasses
import logging

import numpy as np
from numpy.typing import NDArray

from sparkrank.config import Candidates, Config
from sparkrank.entry import JobContext
from sparkrank.evidence.attributes import gather_attributes
from sparkrank.evidence.candidates import ranked, ranked_frame, rows_of, write_rows
from sparkrank.evidence.cautions import CoreStrength, core_strength
from sparkrank.evidence.groups import GroupFiles, find_groups
from sparkrank.evidence.support import SupportFiles, gather_support
from sparkrank.places import Place, resolve
from sparkrank.publish.by_driver import MOST_ROWS, publish_rows
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.records import StepRecord, adopt, commit_step
from sparkrank.publish.write import publish_table
from sparkrank.stages import RunInputs, build
from sparkrank.tables import CANDIDATE_SUPPORT, FARM_GROUPS, SPAM_CANDIDATES

log = logging.getLogger(__name__)


def rank(context: JobContext, inputs: RunInputs, scored: StepRecord) -> StepRecord:
    """Publishes ``spam_candidates``, ``candidate_support`` and ``farm_groups``."""
    fingerprint = inputs.run_fingerprint
    if (record := adopt(context.run, "rank_candidates", fingerprint)) is not None:
        log.info("candidates: done before")
        return record
    strength = strength_of_core(context.config, scored)
    found = gather(context, inputs, scored, context.config.candidates, fingerprint[:24])
    groups = find_groups(context.spark, found.gathering, found.strong_links)
    tables = {
        "spam_candidates": _publish_candidates(context, scored, found, groups, strength),
        "candidate_support": _publish_support(context, found),
        "farm_groups": _publish_groups(context, groups),
    }
    record = StepRecord(
        step="rank_candidates",
        fingerprint=fingerprint,
        tables=tables,
        facts={
            "core_start": strength.start,
            "boosters_hidden_by_core_link": strength.hidden_boosters,
            "cautions": strength.cautions,
            "evidence": {**found.facts(), "groups": groups.groups},
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


def candidate_files(
    context: JobContext,
    scored: StepRecord,
    found: SupportFiles,
    wanted: Candidates | tuple[str, ...],
    strength: CoreStrength,
) -> list[Place]:
    """Files of rows of ``spam_candidates``, without ranks; the support of the wanted hosts was gathered."""
    return write_rows(
        context.spark,
        found.folder,
        _score_files(context, scored),
        found.measures,
        wanted,
        strength,
        context.config.candidates,
    )


def _publish_candidates(
    context: JobContext,
    scored: StepRecord,
    found: SupportFiles,
    groups: GroupFiles,
    strength: CoreStrength,
) -> TableEntry:
    """Publishes the candidates: from the driver where they are few."""
    files = candidate_files(context, scored, found, context.config.candidates, strength)
    if found.targets <= MOST_ROWS:
        rows = groups.added(found.attributes.added(rows_of(files), "host", "attributes"))
        return publish_rows(ranked(rows), SPAM_CANDIDATES, context.run)
    read = context.spark.read.parquet(*(place.uri for place in files))
    rows = found.attributes.joined(read, "host", "attributes")
    rows = ranked_frame(rows.join(groups.candidate_frame(context.spark), "host", "left"))
    entry = publish_table(rows, SPAM_CANDIDATES, context.run)
    context.spark.catalog.clearCache()
    return entry


def _publish_support(context: JobContext, found: SupportFiles) -> TableEntry:
    """Publishes the rows of support: from the driver where they are few."""
    if found.rows <= MOST_ROWS:
        return publish_rows(found.support_table(), CANDIDATE_SUPPORT, context.run)
    return publish_table(found.support_frame(context.spark), CANDIDATE_SUPPORT, context.run)


def _publish_groups(context: JobContext, groups: GroupFiles) -> TableEntry:
    """Publishes the rows of groups, in the same way."""
    if groups.members <= MOST_ROWS:
        return publish_rows(groups.table(), FARM_GROUPS, context.run)
    return publish_table(groups.frame(context.spark), FARM_GROUPS, context.run)


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
