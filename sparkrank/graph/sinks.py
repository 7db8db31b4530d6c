"""Spark rows into work files: one file a partition, written by a numpy task.

A sink is an ``arrow_udf`` over the columns of a partition.  It gathers the batches, hands the columns
and the partition's number to a writer, and returns the writer's short report in the partition's last
row; every other row returns null and is filtered out.  This way needs no pandas, and the rows reach
Python without being pickled.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from typing import TYPE_CHECKING, Any

import pyarrow as pa

from sparkrank.errors import SparkrankError

if TYPE_CHECKING:
    from pyspark.sql import Column, DataFrame

Writer = Callable[[int, list[pa.ChunkedArray]], dict[str, Any]]
"""Takes the partition's number and its columns, writes the files, returns a short JSON-ready report."""


def write_partitions(
    rows: DataFrame, n_partitions: int, partition: Column, writer: Writer, what: str
) -> dict[int, dict[str, Any]]:
    """Sends each row to the partition its ``partition`` column names and runs the writer there.

    Returns the reports by partition; a partition without rows runs no writer and has no report.
    ``what`` names the step in errors.
    """
    from pyspark.sql import functions as sf

    columns = rows.columns
    sink = _make_sink(writer, what)
    reports = (
        rows.repartitionById(n_partitions, partition)
        .select(sink(*[sf.col(name) for name in columns]).alias("report"))
        .where(sf.col("report").isNotNull())
        .collect()
    )
    by_partition = {}
    for row in reports:
        report = json.loads(row["report"])
        by_partition[report.pop("partition")] = report
    return dict(sorted(by_partition.items()))


def _make_sink(writer: Writer, what: str) -> Callable[..., Column]:
    from pyspark.sql import functions as sf

    def sink(batches: Iterator[tuple[pa.Array, ...]]) -> Iterator[pa.Array]:
        from pyspark import TaskContext

        context = TaskContext.get()
        assert context is not None
        gathered: list[tuple[pa.Array, ...]] = []
        held_back = 0
        for batch in batches:
            arrays = batch if isinstance(batch, tuple) else (batch,)
            if held_back:
                yield pa.nulls(held_back, pa.string())
            held_back = len(arrays[0])
            gathered.append(arrays)
        if not held_back:
            return
        columns = [pa.chunked_array(list(chunks)) for chunks in zip(*gathered, strict=True)]
        gathered.clear()
        partition = context.partitionId()
        try:
            report = writer(partition, columns)
        except Exception as error:
            raise SparkrankError(f"{what}, partition {partition}: {type(error).__name__}: {error}") from error
        text = json.dumps({"partition": partition, **report})
        yield pa.array([None] * (held_back - 1) + [text], pa.string())

    # The annotations say iterator-of-tuples to Spark; a local class keeps them literal.
    sink.__annotations__ = {"batches": Iterator[tuple[pa.Array, ...]], "return": Iterator[pa.Array]}
    # Not deterministic in Spark's sense: the optimizer must not evaluate a writing task twice.
    made: Callable[..., Column] = sf.arrow_udf(sink, "string").asNondeterministic()  # type: ignore[attr-defined]
    return made
