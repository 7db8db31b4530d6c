"""Strong links of all candidates → groups of hosts that belong together, reviewed at once.

1. links by source: where each source belongs, which candidates share it       (JoinSources)
2. shared sources by pair of candidates: which pairs are held together         (JoinCandidates)
3. components of candidates, by alternating stars                              (LargeStar, SmallStar)
4. sources join the groups of their candidates; what each group adds up to     (group_members.Describe)
5. rows with names, by stripe of the member                                    (group_members.MemberRows)

The rules are in kernels.belonging and kernels.group_shapes.  Steps 1 to 3 divide sources, pairs and
candidates among any number of parts.  Few links make one part, and then one task does all four.
"""

from __future__ import annotations

import logging
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.evidence.group_members import Describe, MemberRows
from sparkrank.evidence.group_work import GroupWork, read_bucket, write_buckets
from sparkrank.evidence.paths import Gathering
from sparkrank.kernels.belonging import (
    SharedSources,
    held_by_links,
    held_by_sources,
    homes,
    shared_sources,
)
from sparkrank.kernels.components import (
    are_stars,
    both_ends,
    distinct_edges,
    distinct_ends,
    large_star,
    small_star,
)
from sparkrank.places import Place
from sparkrank.tables.groups import FARM_GROUPS
from sparkrank.tables.spec import arrow_schema, spark_schema
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import DataFrame, SparkSession

log = logging.getLogger(__name__)

MOST_LINKS = 1 << 21
"""Strong links of a part, about: their pairs and copies fit some hundred MB."""

Run = Callable[[Callable[[int], Any], str], list[Any]]
"""Runs a task for every part; the second argument names the step."""


@dataclass(frozen=True)
class JoinSources:
    """The strong links of a part of the sources."""

    work: GroupWork

    def __call__(self, part: int) -> None:
        work = self.work
        links = work.links_of_part(part)
        found = homes(links)
        is_leaf = work.own_number(found.source) < 0
        leaves = {name: values[is_leaf] for name, values in found._asdict().items()}
        giver, taker = held_by_links(links, work.own_number(links.source))
        write_arrays(work.homes(part), {**leaves, "giver": giver, "taker": taker})
        shared = shared_sources(links)
        write_buckets(work.shared(part), shared._asdict(), shared.first % work.n_parts, work.n_parts)


@dataclass(frozen=True)
class JoinCandidates:
    """The pairs of candidates whose first falls to a part."""

    work: GroupWork

    def __call__(self, part: int) -> None:
        work = self.work
        shared = read_bucket([work.shared(one) for one in range(work.n_parts)], part)
        first, second = held_by_sources(SharedSources(**shared))
        linked = read_arrays(work.homes(part))
        pairs = distinct_edges(
            np.concatenate((first, linked["giver"])), np.concatenate((second, linked["taker"]))
        )
        work.write_ends(0, part, both_ends(pairs))


@dataclass(frozen=True)
class LargeStar:
    """Large stars of the candidates of a part; says whether their edges were stars before."""

    work: GroupWork
    turn: int

    def __call__(self, part: int) -> bool:
        work = self.work
        found = read_bucket([work.ends(self.turn, one) for one in range(work.n_parts)], part)
        ends = distinct_ends(found["host"], found["neighbour"])
        edges = large_star(ends)
        place = work.edges(self.turn, part)
        write_buckets(place, edges._asdict(), edges.high % work.n_parts, work.n_parts)
        return are_stars(ends)


@dataclass(frozen=True)
class SmallStar:
    """Small stars of the candidates of a part."""

    work: GroupWork
    turn: int

    def __call__(self, part: int) -> None:
        work = self.work
        found = read_bucket([work.edges(self.turn, one) for one in range(work.n_parts)], part)
        edges = small_star(distinct_edges(found["high"], found["low"]))
        work.write_ends(self.turn + 1, part, both_ends(edges))


def hold_together(work: GroupWork, run: Run) -> int:
    """Steps 1 to 3; the turn before which the edges between candidates were stars."""
    run(JoinSources(work), "groups: sources")
    run(JoinCandidates(work), "groups: candidates")
    turn = 0
    while not all(run(LargeStar(work, turn), "groups: large stars")):
        run(SmallStar(work, turn), "groups: small stars")
        turn += 1
    return turn


@dataclass(frozen=True)
class InOneTask:
    """Steps 1 to 4, for one part."""

    work: GroupWork

    def __call__(self, _: int) -> int:
        turn = hold_together(self.work, lambda task, what: [task(0)])
        return Describe(self.work, turn)(0)


@dataclass(frozen=True, kw_only=True)
class GroupFiles:
    """Groups in work files: ``rows`` of ``farm_groups``, and ``candidates`` with the groups they are in."""

    groups: int
    members: int
    rows: list[Place]
    candidates: list[Place]

    def table(self) -> pa.Table:
        """Rows of ``farm_groups``, in no order."""
        schema = arrow_schema(FARM_GROUPS)
        found = [pq.read_table(place.path, filesystem=place.filesystem) for place in self.rows]
        return pa.concat_tables([schema.empty_table(), *(table.cast(schema) for table in found)])

    def frame(self, spark: SparkSession) -> DataFrame:
        """The same rows, for many."""
        if not self.rows:
            return spark.createDataFrame([], spark_schema(FARM_GROUPS))
        return spark.read.schema(spark_schema(FARM_GROUPS)).parquet(*(place.uri for place in self.rows))

    def added(self, rows: pa.Table) -> pa.Table:
        """Rows of candidates with a last column ``farm_group``."""
        none = pa.table({"host": pa.array([], pa.string()), "farm_group": pa.array([], pa.string())})
        found = [pq.read_table(place.path, filesystem=place.filesystem) for place in self.candidates]
        known = pa.concat_tables(
            [none, *(table.select(none.schema.names).cast(none.schema) for table in found)]
        )
        at = pc.index_in(rows["host"], value_set=known["host"])
        return rows.append_column("farm_group", known["farm_group"].take(at))

    def candidate_frame(self, spark: SparkSession) -> DataFrame:
        """``host`` and ``farm_group`` of the candidates that are in one."""
        schema = "host string, farm_group string"
        if not self.candidates:
            return spark.createDataFrame([], schema)
        return spark.read.schema(schema).parquet(*(place.uri for place in self.candidates))


NO_GROUPS = GroupFiles(groups=0, members=0, rows=[], candidates=[])


def find_groups(
    spark: SparkSession,
    gathering: Gathering | None,
    strong_links: list[int],
    *,
    most_links: int = MOST_LINKS,
) -> GroupFiles:
    """Groups of the candidates whose strong links were written (``write_strong_links``).

    ``gathering`` is None where there was no candidate; ``strong_links[i]`` is the number of links in file i.
    """
    started = time.monotonic()
    n_links = sum(strong_links)
    if gathering is None or n_links == 0:
        return NO_GROUPS
    work = GroupWork(gathering, len(strong_links), -(-n_links // most_links))
    if work.n_parts == 1:
        with TaskRunner(spark, 1) as one:
            (n_groups,) = one.run(InOneTask(work), "groups: all steps")
    else:
        with TaskRunner(spark, work.n_parts, even=True) as parts:
            turn = hold_together(work, parts.run)
        with TaskRunner(spark, 1) as one:
            (n_groups,) = one.run(Describe(work, turn), "groups: description")
    if n_groups == 0:
        return NO_GROUPS
    stripes = gathering.graph.plan.stripes
    with TaskRunner(spark, stripes, even=True) as by_stripe:
        members = by_stripe.run(MemberRows(work), "groups: rows")
    log.info(
        "groups: %s of %s hosts, from %s strong links, %.1f s",
        f"{n_groups:,}",
        f"{sum(members):,}",
        f"{n_links:,}",
        time.monotonic() - started,
    )
    rows = [work.rows(stripe) for stripe in range(stripes) if members[stripe] > 0]
    return GroupFiles(groups=n_groups, members=sum(members), rows=rows, candidates=[work.candidates])
