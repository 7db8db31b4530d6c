"""Hosts over both thresholds, core members excluded, in the order in which to look at them.

1. hosts and core members by public suffix, a task a file of ``host_scores``      (CountSuffixes)
2. score rows of the candidates with their measures, reasons and cautions         (CandidateRows)
3. ranks, by falling priority, then host                                          (ranked)
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from sparkrank.config import Candidates
from sparkrank.errors import SparkrankError
from sparkrank.evidence.cautions import CoreStrength, SuffixMembers, bare_suffixes, caution_lists
from sparkrank.evidence.folder import EvidenceFolder
from sparkrank.places import Place
from sparkrank.tables import HOST_SCORES, SPAM_CANDIDATES, arrow_schema
from sparkrank.tasks import TaskRunner

if TYPE_CHECKING:
    from pyspark.sql import DataFrame, SparkSession

OVER_THRESHOLDS = "it is over both thresholds; nothing in its support stands out"
"""The reason of a candidate that has no other."""

# A column of the measures that is none of the rows.
_LOOK_ALIKES = "look_alikes"
# Columns that rows get once they are together.
_LATER = ("rank", "attributes", "farm_group")


def write_rows(
    spark: SparkSession,
    folder: EvidenceFolder,
    scores: list[Place],
    measures: list[Place],
    wanted: Candidates | tuple[str, ...],
    strength: CoreStrength,
    thresholds: Candidates,
) -> list[Place]:
    """Rows of ``spam_candidates`` without ranks, as Parquet files; those of ``wanted`` hosts or of all
    that pass both thresholds.

    ``scores`` are the files of ``host_scores``, ``measures`` those of what the hosts' support adds up to.
    """
    with TaskRunner(spark, len(scores)) as files:
        counted = files.run(CountSuffixes(scores), "candidates: suffixes of hosts")
        task = CandidateRows(
            folder=folder,
            scores=scores,
            measures=measures,
            wanted=wanted,
            bare=frozenset(bare_suffixes(counted)),
            strength=strength,
            min_relative_mass=thresholds.min_relative_mass,
        )
        rows = files.run(task, "candidates: rows")
    return [folder.candidate_rows(number) for number, count in enumerate(rows) if count]


@dataclass(frozen=True)
class CountSuffixes:
    """Hosts and core members of one file by public suffix."""

    scores: list[Place]

    def __call__(self, number: int) -> dict[str | None, SuffixMembers]:
        found = _read(self.scores[number], ["suffix", "is_core"])
        members = found.append_column("members", found["is_core"].cast(pa.int64()))
        sums = members.group_by("suffix", use_threads=False).aggregate(
            [([], "count_all"), ("members", "sum")]
        )
        counts = zip(
            *(sums[name].to_pylist() for name in ("suffix", "count_all", "members_sum")), strict=True
        )
        return {suffix: SuffixMembers(hosts, core) for suffix, hosts, core in counts}


@dataclass(frozen=True, kw_only=True)
class CandidateRows:
    """Writes the rows of one file's candidates; returns how many."""

    folder: EvidenceFolder
    scores: list[Place]
    measures: list[Place]
    wanted: Candidates | tuple[str, ...]
    bare: frozenset[str | None]
    strength: CoreStrength
    min_relative_mass: float

    def __call__(self, number: int) -> int:
        rows = _chosen(self.scores[number], self.wanted)
        if not rows.num_rows:
            return 0
        measures = self._measures(rows["host"])
        columns = {**_columns(rows), **_columns(measures.drop_columns(["host", _LOOK_ALIKES]))}
        columns["reasons"] = _or_over_thresholds(measures["reasons"])
        own = caution_lists(columns, self.bare, self.strength, self.min_relative_mass)
        columns["cautions"] = _joined(own, _array(measures[_LOOK_ALIKES]))
        sink = pa.BufferOutputStream()
        pq.write_table(pa.table(columns), sink, compression="zstd")
        self.folder.candidate_rows(number).write_bytes(sink.getvalue())
        return int(rows.num_rows)

    def _measures(self, hosts: pa.ChunkedArray) -> pa.Table:
        """Measures of the hosts, in their order; SparkrankError where one has none."""
        parts, places = [], []
        for place in self.measures:
            there = pc.index_in(hosts, value_set=_read(place, ["host"])["host"].combine_chunks())
            found = np.flatnonzero(there.is_valid().to_numpy())
            if len(found):
                parts.append(_read(place).take(pa.array(there.take(pa.array(found)).combine_chunks())))
                places.append(found)
        order = np.concatenate(places) if places else np.zeros(0, np.int64)
        if len(order) != len(hosts):
            raise SparkrankError(
                f"candidates: expected the measures of {len(hosts)} hosts, found {len(order)}; "
                "remove the work folder and run again"
            )
        return pa.concat_tables(parts).take(pa.array(np.argsort(order)))


def rows_of(places: list[Place]) -> pa.Table:
    """The rows of all files; for few."""
    schema = arrow_schema(SPAM_CANDIDATES)
    laid = pa.schema([field for field in schema if field.name not in _LATER])
    return pa.concat_tables([laid.empty_table(), *(_read(place, laid.names).cast(laid) for place in places)])


def ranked(rows: pa.Table) -> pa.Table:
    """Adds ``rank`` from 1 by falling priority, then host; for few rows."""
    order = pc.sort_indices(rows, [("priority", "descending"), ("host", "ascending")]).to_numpy()
    rank = np.empty(len(order), dtype=np.int32)
    rank[order] = np.arange(1, len(order) + 1, dtype=np.int32)
    return rows.append_column("rank", pa.array(rank))


def ranked_frame(rows: DataFrame) -> DataFrame:
    """As ``ranked``, without bringing all rows to one task."""
    from pyspark.sql import functions as sf

    # Kept, so that both uses below see the same partitions.
    ordered = rows.orderBy(sf.col("priority").desc(), "host").withColumn("part", sf.spark_partition_id())
    ordered = ordered.withColumn("at", sf.monotonically_increasing_id()).persist()
    counts = ordered.groupBy("part").count().orderBy("part").collect()
    before, first = 0, {}
    for row in counts:
        first[row["part"]] = before
        before += row["count"]
    # monotonically_increasing_id is the partition's number shifted by 33 bits, plus the row's.
    within = sf.col("at") - sf.shiftleft(sf.col("part").cast("long"), 33)
    pairs = list(first.items()) or [(0, 0)]
    starts = ordered.sparkSession.createDataFrame(pairs, "part int, first long")
    found = ordered.join(sf.broadcast(starts), "part")
    return found.withColumn("rank", (sf.col("first") + within + 1).cast("int")).drop("part", "at", "first")


def _chosen(place: Place, wanted: Candidates | tuple[str, ...]) -> pa.Table:
    """Score rows of the wanted hosts of one file."""
    if isinstance(wanted, Candidates):
        found = _read(place, ["scaled_pagerank", "relative_mass", "is_core"])
        chosen = found["scaled_pagerank"].to_numpy() >= wanted.min_scaled_pagerank
        chosen &= found["relative_mass"].to_numpy() >= wanted.min_relative_mass
        chosen &= ~found["is_core"].to_numpy()
    else:
        hosts = _read(place, ["host"])["host"]
        chosen = pc.is_in(hosts, value_set=pa.array(wanted, pa.string())).to_numpy()
    at = np.flatnonzero(chosen)
    return _read(place, list(HOST_SCORES.column_names) if len(at) else ["host"]).take(pa.array(at))


def _read(place: Place, columns: Iterable[str] | None = None) -> pa.Table:
    with place.filesystem.open_input_file(place.path) as source:
        names = None if columns is None else list(columns)
        return pq.ParquetFile(source).read(names, use_threads=False)


def _columns(table: pa.Table) -> dict[str, pa.Array]:
    return {name: _array(table[name]) for name in table.column_names}


def _array(column: pa.ChunkedArray) -> pa.Array:
    return pa.concat_arrays(column.chunks) if column.num_chunks else pa.array([], column.type)


def _or_over_thresholds(reasons: pa.ChunkedArray) -> pa.Array:
    """The reasons, or where there is none the one that always holds."""
    none = pc.equal(pc.list_value_length(reasons), 0)
    return _array(pc.if_else(none, pa.scalar([OVER_THRESHOLDS], reasons.type), reasons))


def _joined(first: pa.Array, second: pa.Array) -> pa.Array:
    """Lists of texts, row by row one behind the other."""
    lengths = [part.value_lengths().to_numpy() for part in (first, second)]
    texts = pa.concat_arrays([part.flatten().cast(pa.string()) for part in (first, second)])
    # By row; a stable sort leaves the first list's texts before the second's.
    rows = np.concatenate([np.repeat(np.arange(len(first)), part) for part in lengths])
    offsets = np.zeros(len(first) + 1, dtype=np.int32)
    np.cumsum(lengths[0] + lengths[1], out=offsets[1:])
    return pa.ListArray.from_arrays(pa.array(offsets), texts.take(pa.array(np.argsort(rows, kind="stable"))))
