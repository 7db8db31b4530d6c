"""Tasks over work files as Spark runs them: reports in order, failures by name."""

import dataclasses
from pathlib import Path

import pytest

from sparkrank.graph.folder import GraphFolder
from sparkrank.places import resolve
from sparkrank.tasks import TaskRunner


def test_reports_come_in_the_order_of_the_tasks(spark) -> None:
    with TaskRunner(spark, 5) as runner:
        assert runner.run(lambda number: number * number, "squares") == [0, 1, 4, 9, 16]
        assert runner.run(str, "names") == ["0", "1", "2", "3", "4"]


def test_even_tasks_share_partitions_and_report_alike(spark) -> None:
    """A local master runs each core's share at once; the reports are those of a partition each."""
    cores = spark.sparkContext.defaultParallelism
    with TaskRunner(spark, 7, even=True) as shared, TaskRunner(spark, 7) as apart:
        assert shared._anchor.getNumPartitions() == cores < 7
        assert apart._anchor.getNumPartitions() == 7
        assert shared.run(lambda n: n * n, "squares") == apart.run(lambda n: n * n, "squares")


def test_an_error_says_step_and_task(spark, web_crawl, grid_scored, tmp_path) -> None:
    """A graph whose folder is gone: the worker's error names the work and the number of its task."""
    gone = GraphFolder(place=resolve(str(tmp_path / "gone")))
    graph = dataclasses.replace(grid_scored.graph, folder=gone)
    with pytest.raises(Exception, match=r"hosts of the lists, task \d: FileNotFoundError: ") as failure:
        web_crawl.solve(graph, run__work=tmp_path)
    assert str(Path(gone.ids(0).local_path).parent) in str(failure.value)
