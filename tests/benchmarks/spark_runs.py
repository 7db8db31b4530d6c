"""Spark as the benchmarks run it: the program's own session, and its event log for bytes by stage."""

import contextlib
import json
import os
import shlex
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from measure import HERE, PROJECT, Facts


def spark_settings(events: Path, master: str, heap: str | None) -> dict[str, str]:
    """Environment under which jobs and sessions started later use this master, heap and event log.

    Workers can import the benchmarks' modules, too.
    """
    events.mkdir(parents=True, exist_ok=True)
    settings = [
        *("--master", master),
        *(("--driver-memory", heap) if heap else ()),
        *("--conf", "spark.eventLog.enabled=true"),
        *("--conf", f"spark.eventLog.dir={events}"),
        # One plain file an application, so that it can be read while it grows.
        *("--conf", "spark.eventLog.rolling.enabled=false"),
        *("--conf", "spark.eventLog.compress=false"),
    ]
    paths = [str(PROJECT), str(HERE), *filter(None, [os.environ.get("PYTHONPATH")])]
    return {
        "PYSPARK_SUBMIT_ARGS": f"{shlex.join(settings)} pyspark-shell",
        "PYTHONPATH": os.pathsep.join(paths),
        "SPARK_LOCAL_IP": "127.0.0.1",
    }


_METRICS = {
    "internal.metrics.input.recordsRead": "read_rows",
    "internal.metrics.input.bytesRead": "read_bytes",
    "internal.metrics.output.bytesWritten": "written_bytes",
    "internal.metrics.shuffle.write.bytesWritten": "shuffled_bytes",
    "internal.metrics.memoryBytesSpilled": "spilled_bytes",
    "internal.metrics.executorRunTime": "task_ms",
}


def stages_of(events: Path) -> list[Facts]:
    """What Spark's event logs in a folder say of each finished stage, in the order of their ends.

    A stage has `what` (the job's description, else the stage's name), `tasks`, `seconds`, rows read, bytes
    read, written, shuffled and spilled through Spark.  Work files that tasks open themselves are not among
    them; of local Parquet files Spark 4.3 was seen to count little more than the footers.
    """
    stages = []
    for log in sorted(events.iterdir()):
        described: dict[int, str] = {}
        for line in log.read_text().split("\n"):
            if not line.startswith('{"Event":"SparkListenerStage'):
                continue
            event = json.loads(line)
            properties = event.get("Properties") or {}
            if event["Event"] == "SparkListenerStageSubmitted":
                text = properties.get("spark.job.description")
                described[event["Stage Info"]["Stage ID"]] = text or event["Stage Info"]["Stage Name"]
            elif event["Event"] == "SparkListenerStageCompleted":
                stages.append(_stage(event["Stage Info"], described))
    return stages


def _stage(info: Facts, described: dict[int, str]) -> Facts:
    found = dict.fromkeys(_METRICS.values(), 0)
    for metric in info["Accumulables"]:
        if metric["Name"] in _METRICS:
            found[_METRICS[metric["Name"]]] += int(metric["Value"])
    return {
        "what": described.get(info["Stage ID"], info["Stage Name"]),
        "tasks": info["Number of Tasks"],
        "seconds": (info["Completion Time"] - info["Submission Time"]) / 1000,
        **found,
    }


def traffic_by_step(stages: list[Facts]) -> list[list[object]]:
    """Rows for a table: stages with the same description, numbers in it left out, added up."""
    totals: dict[str, Facts] = {}
    for stage in stages:
        name = " ".join(word for word in stage["what"].split() if not word.strip(":,").isdigit())
        total = totals.setdefault(name, {"stages": 0, **dict.fromkeys(_METRICS.values(), 0), "seconds": 0.0})
        total["stages"] += 1
        for key in (*_METRICS.values(), "seconds"):
            total[key] += stage[key]
    rows: list[list[object]] = [
        ["stages of", "stages", "seconds", "task s", "read M rows", "written MB", "shuffled MB", "spilled MB"]
    ]
    for name, total in totals.items():
        counts = ("read_rows", "written_bytes", "shuffled_bytes", "spilled_bytes")
        sizes = [total[count] / 1e6 for count in counts]
        rows.append([name[:48], total["stages"], total["seconds"], total["task_ms"] / 1000, *sizes])
    return rows


@contextlib.contextmanager
def session(environment: dict[str, str]) -> Iterator[Any]:
    """A session as the program's own jobs open it, under the settings of `spark_settings`."""
    os.environ.update(environment)
    sys.path.insert(0, str(PROJECT))
    from sparkrank.session import open_session

    spark = open_session("benchmark")
    try:
        yield spark
    finally:
        spark.stop()
