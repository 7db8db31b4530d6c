"""Hosts over both thresholds, core members excluded, in the order in which to look at them."""

from __future__ import annotations

from typing import TYPE_CHECKING

from sparkrank.config import Candidates
from sparkrank.evidence.cautions import CoreStrength, bare_suffixes, caution_column

if TYPE_CHECKING:
    from pyspark.sql import DataFrame

OVER_THRESHOLDS = "it is over both thresholds; nothing in its support stands out"
"""The reason of a candidate that has no other."""


def spam_candidates(
    scores: DataFrame, measures: DataFrame, thresholds: Candidates, strength: CoreStrength
) -> DataFrame:
    """The table ``spam_candidates`` from the rows of ``host_scores`` and the candidates' measures."""
    from pyspark.sql import functions as sf

    over = (
        (sf.col("scaled_pagerank") >= thresholds.min_scaled_pagerank)
        & (sf.col("relative_mass") >= thresholds.min_relative_mass)
        & ~sf.col("is_core")
    )
    return _ranked(with_evidence(scores.where(over), scores, measures, strength, thresholds))


def with_evidence(
    chosen: DataFrame,
    scores: DataFrame,
    measures: DataFrame,
    strength: CoreStrength,
    thresholds: Candidates,
) -> DataFrame:
    """Some rows of ``host_scores`` with their measures, reasons and cautions."""
    from pyspark.sql import functions as sf

    bare = bare_suffixes(scores).withColumn("is_bare", sf.lit(True))
    chosen = chosen.join(measures, "host", "left")
    chosen = chosen.join(sf.broadcast(bare), sf.col("suffix").eqNullSafe(sf.col("bare_suffix")), "left")
    chosen = chosen.withColumn("is_bare_suffix", sf.coalesce(sf.col("is_bare"), sf.lit(False)))
    chosen = chosen.withColumn("cautions", caution_column(strength, thresholds.min_relative_mass))
    none = sf.size("reasons") == 0
    reasons = sf.when(none, sf.array(sf.lit(OVER_THRESHOLDS))).otherwise(sf.col("reasons"))
    chosen = chosen.withColumn("reasons", reasons)
    return chosen.drop("look_alikes", "bare_suffix", "is_bare", "is_bare_suffix")


def _ranked(chosen: DataFrame) -> DataFrame:
    """Adds ``rank`` from 1 by falling priority, then host, without bringing all rows to one task."""
    from pyspark.sql import functions as sf

    # Kept, so that both uses below see the same partitions.
    ordered = chosen.orderBy(sf.col("priority").desc(), "host").withColumn("part", sf.spark_partition_id())
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
    ranked = ordered.join(sf.broadcast(starts), "part")
    return ranked.withColumn("rank", (sf.col("first") + within + 1).cast("int")).drop("part", "at", "first")
