"""The engine under measurement: its settings for a generated graph, and what its tasks really do.

Workers import this module, so it must be on their path (`spark_runs.spark_settings` puts it there).
"""

import contextlib
import os
import re
import sys
import time
from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from unittest import mock

from crawl_graph import CrawlFiles
from crawl_names import GROUPS
from measure import Facts

_STEP = re.compile(r"step (\d+)\b")
_WORK_FILE = re.compile(r"/(?:graphs|solves)/[^/]+/([^/]+)/")

# Work files mapped since the task began and their bytes; None while no task is watched.
_mapped: dict[str, int] | None = None
_is_watching = False


def overrides(files: CrawlFiles, folder: Path, columns: int = 8) -> list[str]:
    """Settings of a run of this graph with its output and work in `folder`, as `--set` takes them."""
    suffixes = ", ".join(f'"{group}"' for group in GROUPS)
    return [
        "run.id=benchmark",
        f"run.output={folder / 'tables'}",
        f"run.work={folder / 'work'}",
        f"input.edges={files.edges}",
        f"input.core={files.core}",
        f"names.extra_suffixes=[{suffixes}]",
        f"solve.max_columns={columns}",
        "solve.tolerance=1e-6",
    ]


@dataclass(kw_only=True)
class TaskRun:
    """One round of numpy tasks: when it began, how long each worker worked, what was mapped."""

    what: str
    started: float
    worker_seconds: dict[int, float] = field(default_factory=lambda: defaultdict(float))
    mapped: dict[str, int] = field(default_factory=lambda: defaultdict(int))


@contextlib.contextmanager
def watched_tasks() -> Iterator[list[TaskRun]]:
    """The rounds of tasks that run inside the block, each task timed in its worker."""
    from sparkrank.tasks import TaskRunner

    runs: list[TaskRun] = []
    run = TaskRunner.run

    def watched(self: TaskRunner, task: Any, what: str) -> list[Any]:
        seen = TaskRun(what=what, started=time.monotonic())
        reports = []
        for worker, seconds, mapped, report in run(self, _WatchedTask(task), what):
            seen.worker_seconds[worker] += seconds
            for kind, size in mapped.items():
                seen.mapped[kind] += size
            reports.append(report)
        runs.append(seen)
        return reports

    with mock.patch.object(TaskRunner, "run", watched):
        yield runs


class _WatchedTask:
    """A task that also returns its worker, its seconds and the work bytes it mapped, by folder."""

    def __init__(self, task: Any) -> None:
        self._task = task

    def __call__(self, number: int) -> tuple[int, float, dict[str, int], Any]:
        global _mapped, _is_watching
        if not _is_watching:
            sys.addaudithook(_note_mapping)
            _is_watching = True
        _mapped = {}
        started = time.perf_counter()
        report = self._task(number)
        seconds = time.perf_counter() - started
        by_kind: dict[str, int] = defaultdict(int)
        for path, size in _mapped.items():
            if found := _WORK_FILE.search(path):
                by_kind[found.group(1)] += size
        _mapped = None
        return os.getpid(), seconds, dict(by_kind), report


def _note_mapping(event: str, arguments: tuple[Any, ...]) -> None:
    # Mapped reads are invisible to every counter of bytes read; the mapping itself is not.
    if event == "mmap.__new__" and _mapped is not None and arguments[0] >= 0:
        path = os.readlink(f"/proc/self/fd/{arguments[0]}")
        # A task that maps a file twice reads the same pages.
        _mapped[path] = arguments[1] or os.path.getsize(path)


def steps_of(runs: list[TaskRun]) -> list[Facts]:
    """Each step but the first and the last: seconds from its start to the next one's, and its parts.

    The first step also opens the cells.  `busiest_worker_seconds` is the task time of the worker that had
    most of it; the rest of the step is Spark's scheduling, the driver's sums and the record.
    """
    by_step: dict[int, list[TaskRun]] = defaultdict(list)
    for run in runs:
        if found := _STEP.match(run.what):
            by_step[int(found.group(1))].append(run)
    steps = []
    for number, following in zip(sorted(by_step)[1:], sorted(by_step)[2:], strict=False):
        step = by_step[number]
        workers: dict[int, float] = defaultdict(float)
        mapped: dict[str, int] = defaultdict(int)
        busiest = 0.0
        for run in step:
            # A step of several rounds waits for the busiest worker of each.
            busiest += max(run.worker_seconds.values())
            for worker, seconds in run.worker_seconds.items():
                workers[worker] += seconds
            for kind, size in run.mapped.items():
                mapped[kind] += size
        steps.append(
            {
                "step": number,
                "seconds": by_step[following][0].started - step[0].started,
                "busiest_worker_seconds": busiest,
                "task_seconds": sum(workers.values()),
                "mapped_bytes": dict(mapped),
            }
        )
    return steps
