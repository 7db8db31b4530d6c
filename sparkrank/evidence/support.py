"""Support of many targets at once: where their PageRank comes from, exact under the one linear model.

1. scores back beside the graph, targets chosen            (values)
2. paths followed backwards, a round of tasks a step       (paths)
3. sources of each target by link and by origin            (sources)
4. rows of a group of targets                              (rows)

No edge, and nothing that grows with the graph, comes to the driver.
"""

from __future__ import annotations

import logging
import time
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import write_arrays
from sparkrank.config import Candidates, Evidence
from sparkrank.evidence.attributes import NO_ATTRIBUTES, AttributeFiles
from sparkrank.evidence.folder import EvidenceFolder
from sparkrank.evidence.paths import FollowRest, FollowStep, Gathering, target_ranges
from sparkrank.evidence.rows import GroupRows, RowsReport, support_schema
from sparkrank.evidence.sources import DIRECT, ORIGIN, DirectSources, OriginSources
from sparkrank.evidence.values import LayValues, ScanScores
from sparkrank.graph.build import Graph
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.lists import HostList
from sparkrank.names.octets import octets_of
from sparkrank.places import Place
from sparkrank.tables import CANDIDATE_SUPPORT, spark_schema
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import DataFrame, SparkSession

log = logging.getLogger(__name__)

# A group's direct links and origins fit some hundred MB, and even few targets make some groups.
_GROUP_LINKS = 1 << 21
_GROUP_TARGETS = 1 << 11
# Below so many links a round of tasks costs more than their arithmetic.
_FEW_LINKS = 1 << 14


@dataclass(frozen=True, kw_only=True)
class SupportFiles:
    """What was gathered, in work files; none where there was no target.

    ``steps`` and ``links`` were followed, each link once for every target that it leads to.
    """

    folder: EvidenceFolder
    targets: int
    groups: int
    steps: int
    links: int
    rows: int
    least_share_a_link: float
    gathering: Gathering | None = None
    """None where there was no target."""
    strong_links: list[int] = field(default_factory=list)
    """Number of them by group of targets, for ``find_groups``."""
    attributes: AttributeFiles = NO_ATTRIBUTES

    @property
    def support(self) -> list[Place]:
        return [self.folder.support(group) for group in range(self.groups)]

    @property
    def measures(self) -> list[Place]:
        return [self.folder.measures(group) for group in range(self.groups)]

    def support_frame(self, spark: SparkSession) -> DataFrame:
        """Rows of ``candidate_support``."""
        from pyspark.sql.types import StructType

        declared = spark_schema(CANDIDATE_SUPPORT).fields
        laid = StructType([field for field in declared if field.name != "source_attributes"])
        rows = spark.createDataFrame([], laid)
        if self.support:
            rows = spark.read.schema(laid).parquet(*(place.uri for place in self.support))
        return self.attributes.joined(rows, "source", "source_attributes")

    def support_table(self) -> pa.Table:
        """The same rows here; for few."""
        schema = support_schema()
        parts = [pq.read_table(place.path, filesystem=place.filesystem) for place in self.support]
        rows = pa.concat_tables([schema.empty_table(), *(part.cast(schema) for part in parts)])
        return self.attributes.added(rows, "source", "source_attributes")

    def facts(self) -> dict[str, Any]:
        """What the manifest says of the evidence."""
        return {
            "hosts": self.targets,
            "steps": self.steps,
            "links_followed": self.links,
            "least_share_a_link": self.least_share_a_link,
        }


def gather_support(
    spark: SparkSession,
    graph: Graph,
    place: Place,
    scores: list[Place],
    core: HostList,
    wanted: Candidates | NDArray[np.int64],
    settings: Evidence,
    *,
    damping: float,
    good_share: float,
) -> SupportFiles:
    """Gathers the support of the wanted hosts below ``place``; ``scores`` are the files of host_scores.

    ``wanted`` are the thresholds that targets pass (core members never do), or the ids of the targets.
    """
    folder = EvidenceFolder(place=place)
    place.delete_tree()
    started = time.monotonic()
    with (
        TaskRunner(spark, len(scores)) as files,
        TaskRunner(spark, graph.plan.stripes, even=True) as stripes,
    ):
        files.run(ScanScores(folder, scores, graph.salt, graph.plan.stripes), "evidence: scores")
        _write_core(folder, core, graph.salt)
        laid = stripes.run(LayValues(folder, graph, len(scores), wanted), "evidence: targets")
        counts = [one.targets for one in laid]
        n_targets = sum(counts)
        share = max(1.0 / settings.followed_links, n_targets / settings.all_followed_links)
        log.info("evidence: %s hosts, %.1f s", f"{n_targets:,}", time.monotonic() - started)
        if not n_targets:
            return _nothing(folder, share)
        gathering = Gathering(
            graph=graph,
            folder=folder,
            damping=damping,
            target_counts=counts,
            least_share_a_link=share,
            max_steps=settings.max_steps,
            all_trust=good_share * graph.n_hosts,
            core_weight=sum(one.core_weight for one in laid),
        )
        kept, links = _follow(spark, gathering, stripes)
        groups = target_ranges(gathering.targets.in_degree + _GROUP_LINKS // _GROUP_TARGETS, _GROUP_LINKS)
        chunks = _gather_sources(gathering, stripes, kept, groups, settings.listed_sources)
    task = GroupRows(gathering, groups, chunks, len(kept), settings.listed_sources)
    reports = _write_rows(spark, task)
    listed = sum(report.support for report in reports)
    log.info("evidence: %s sources listed, %.1f s in all", f"{listed:,}", time.monotonic() - started)
    return SupportFiles(
        folder=folder,
        targets=n_targets,
        groups=len(groups),
        steps=len(kept) - 1,
        links=links,
        rows=listed,
        gathering=gathering,
        strong_links=[report.strong_links for report in reports],
        least_share_a_link=share,
    )


def _write_rows(spark: SparkSession, task: GroupRows) -> list[RowsReport]:
    """Rows of all groups of targets; a report each."""
    with TaskRunner(spark, len(task.groups)) as groups:
        return groups.run(task, "evidence: rows")


def _nothing(folder: EvidenceFolder, share: float) -> SupportFiles:
    """What there is where no host is a target."""
    return SupportFiles(
        folder=folder, targets=0, groups=0, steps=0, links=0, rows=0, least_share_a_link=share
    )


def _write_core(folder: EvidenceFolder, core: HostList, salt: int) -> None:
    hosts = core.hosts["host"].cast(pa.string()).combine_chunks()
    ids = xxh64(*octets_of(hosts), salt)
    write_arrays(folder.core_list(), {"ids": ids, "weight": core.hosts["weight"].to_numpy()})


def _follow(spark: SparkSession, gathering: Gathering, stripes: TaskRunner) -> tuple[list[list[int]], int]:
    """Steps until nothing is worth following; files left by step and stripe, and links followed."""
    kept: list[list[int]] = []
    sent = [0] * gathering.graph.plan.stripes
    links = followed = 0
    while len(kept) <= gathering.max_steps and (not kept or any(sent)):
        first = len(kept)
        if kept and followed < _FEW_LINKS:
            with TaskRunner(spark, 1) as one:
                (done,) = one.run(FollowRest(gathering, first, sent), "evidence: the last links back")
        else:
            done = [stripes.run(FollowStep(gathering, first, sent), f"evidence: {first} links back")]
        for step, reports in enumerate(done, first):
            kept.append([report.kept_chunks for report in reports])
            sent = [report.sent_chunks for report in reports]
            followed = sum(report.links for report in reports)
            links += followed
            pairs = sum(report.pairs for report in reports)
            log.info(
                "evidence: %d links back: %s pairs, %s links followed", step, f"{pairs:,}", f"{followed:,}"
            )
            if step > 0:
                gathering.folder.place.child("sent", f"{step - 1:03d}").delete_tree()
    return kept, links


def _gather_sources(
    gathering: Gathering,
    stripes: TaskRunner,
    kept: list[list[int]],
    groups: list[tuple[int, int]],
    listed: int,
) -> dict[str, list[int]]:
    """Files of each kind by stripe."""
    none = [0] * len(kept[0])
    direct = DirectSources(gathering, kept[1] if len(kept) > 1 else none, groups, listed)
    return {
        DIRECT: stripes.run(direct, "evidence: direct sources"),
        ORIGIN: stripes.run(OriginSources(gathering, kept, groups, listed), "evidence: origins"),
    }
