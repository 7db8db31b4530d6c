"""Numpy tasks over work files, scheduled by Spark.

Spark places, retries and counts the tasks; the data stays in files.  A task takes its number, reads
and writes work files, and returns a small report.  The reports come back in task order, so that
whatever the driver adds up, it adds in the same order every time.
"""

from __future__ import annotations

import gc
from collections.abc import Callable, Iterable, Iterator
from typing import TYPE_CHECKING, Any

from sparkrank.errors import InputRefused, SparkrankError

if TYPE_CHECKING:
    from pyspark import RDD
    from pyspark.sql import SparkSession

Report = Any
Task = Callable[[int], Report]


class TaskRunner:
    """Runs tasks 0 … n-1 in Spark partitions: one each, or on a local master as few as there are cores.

    The partitions belong to one persisted, tiny RDD.  Where its pieces are cached tells Spark where a
    task ran last, so that it runs there again, beside the files in that machine's page cache.  Losing
    the pieces costs time, never correctness.

    ``even`` says that all tasks take about as long.  Then a local master runs each core's share in one
    partition, which saves some 25 ms of Spark's and Python's own a task.  On a cluster, where cores come
    and go, each task stays a partition.  What a task computes never depends on it.
    """

    def __init__(self, spark: SparkSession, n_tasks: int, *, even: bool = False) -> None:
        context = spark.sparkContext
        n_partitions = n_tasks
        master = context.master or ""
        if even and (master == "local" or master.startswith("local[")):
            n_partitions = min(n_tasks, context.defaultParallelism)
        self._spark = spark
        self.n_tasks = n_tasks
        self._anchor: RDD[int] = context.parallelize(range(n_tasks), n_partitions)
        self._anchor = self._anchor.mapPartitions(_same).persist()

    def run(self, task: Task, what: str) -> list[Report]:
        """The reports of all tasks in task order; ``what`` names the step in Spark's pages and errors."""
        self._spark.sparkContext.setJobDescription(what)
        try:
            return self._anchor.mapPartitions(_NamedTask(task, what)).collect()
        finally:
            self._spark.sparkContext.setJobDescription(None)  # type: ignore[arg-type]

    def close(self) -> None:
        """Gives the cached pieces back."""
        self._anchor.unpersist()

    def __enter__(self) -> TaskRunner:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()


def _same(numbers: Iterable[int]) -> Iterator[int]:
    return iter(numbers)


class _NamedTask:
    """A task whose failure says which step and which number it was."""

    def __init__(self, task: Task, what: str) -> None:
        self._task = task
        self._what = what

    def __call__(self, numbers: Iterable[int]) -> Iterator[Report]:
        if not gc.get_freeze_count():
            # PySpark collects garbage after every task; what was imported by now never is any.
            gc.freeze()
        for number in numbers:
            try:
                yield self._task(number)
            except InputRefused:
                raise  # its one line is for the user, and names the place in the input itself
            except Exception as error:
                # One line: what the driver shows of a worker's error ends at the first break.
                text = " ".join(str(error).split())
                raise SparkrankError(
                    f"{self._what}, task {number}: {type(error).__name__}: {text}"
                ) from error
