"""The build: `python tests/benchmarks/build.py --edges 60e6`.

`jobs/build_graph.py` from host names to cells, in a running session, beside the least that any build through
Spark has to do: scan the same table, hash both columns, shuffle the 16 bytes of each row into as many
partitions.
"""

import contextlib
import io
import os
import shutil
import tempfile
import time
from pathlib import Path
from typing import Any

import measure
from crawl_graph import CrawlFiles, CrawlSettings, crawl_files
from engine import overrides
from measure import Facts, median
from spark_runs import session, spark_settings, stages_of, traffic_by_step


def build(spark: Any, files: CrawlFiles, scratch: Path) -> Facts:
    """Seconds of the whole job and of each of its stages, in a fresh output and work folder."""
    from jobs import build_graph

    folder = scratch / "build"
    arguments = [word for value in overrides(files, folder) for word in ("--set", value)]
    said = io.StringIO()
    with measure.PeakMemory(os.getpid()) as memory, contextlib.redirect_stderr(said):
        started, started_at = time.monotonic(), time.time()
        status = build_graph.main([*arguments, "--quiet"], session=spark)
        seconds = time.monotonic() - started
    if status:
        raise RuntimeError(f"build_graph: status {status}: {said.getvalue()}")
    # Each stage ends with its record, so the records' times cut the build into its stages.
    (graph,) = (folder / "work" / "graphs").iterdir()
    ends = sorted((record.stat().st_mtime, record.stem) for record in graph.glob("*.json"))
    starts = [started_at, *(end for end, _ in ends)]
    stages = {name: end - start for start, (end, name) in zip(starts, ends, strict=False)}
    work_bytes = sum(file.stat().st_size for file in graph.rglob("*") if file.is_file())
    shutil.rmtree(folder)
    return {"seconds": seconds, "stages": stages, "work_bytes": work_bytes, **memory.as_facts()}


def shuffle(spark: Any, files: CrawlFiles) -> Facts:
    """Seconds of Spark's own scan, hash and shuffle of the rows, each partition read once and dropped."""
    from pyspark.sql import functions as sf

    from sparkrank.graph.plan import plan_grid

    plan = plan_grid(files.facts["rows"])
    n_partitions = plan.stripes * plan.build_groups
    with measure.PeakMemory(os.getpid()) as memory:
        started = time.monotonic()
        spark.sparkContext.setJobDescription("Spark's scan, hash and shuffle")
        rows = spark.read.parquet(str(files.edges)).select(
            sf.xxhash64("src").alias("src"), sf.xxhash64("dst").alias("dst")
        )
        # A count would let the optimizer leave the columns out.
        rows.repartition(n_partitions, "dst").write.format("noop").mode("overwrite").save()
        seconds = time.monotonic() - started
    spark.sparkContext.setJobDescription(None)
    return {"seconds": seconds, "partitions": n_partitions, **memory.as_facts()}


def main() -> None:
    """Measure and report."""
    parser = measure.arguments_of("Measure the build beside Spark's own scan, hash and shuffle.", edges=2e6)
    asked = parser.parse_args()
    facts = measure.machine()
    measure.print_machine(facts)
    files = crawl_files(asked.data, CrawlSettings(edges=int(asked.edges), seed=asked.seed))
    with tempfile.TemporaryDirectory(prefix="build-", dir=files.folder) as name:
        scratch = Path(name)
        events = scratch / "events"
        with session(spark_settings(events, asked.master, asked.heap)) as spark:
            # Both ways meet a JVM that has read the table before.
            shuffle(spark, files)
            ways = {
                "build": lambda: build(spark, files, scratch),
                "shuffle": lambda: shuffle(spark, files),
            }
            found = measure.in_turns(ways, asked.turns)
        stages = stages_of(events)
    built, shuffled = median(found["build"], "seconds"), median(found["shuffle"], "seconds")
    rows: list[list[object]] = [["way", "seconds", "beside Spark alone", "rows a second", "peak MB"]]
    for label, key, seconds in (
        ("build, names to cells", "build", built),
        ("Spark's scan, hash, shuffle", "shuffle", shuffled),
    ):
        peak = max(turn["peak_pss_bytes"] for turn in found[key]) / 1e6
        rows.append([label, seconds, seconds / shuffled, files.facts["rows"] / seconds, peak])
    measure.print_table("build, medians", rows)
    parts: list[list[object]] = [["stage of the build", "seconds"]]
    parts += [
        [name, median([turn["stages"] for turn in found["build"]], name)]
        for name in found["build"][0]["stages"]
    ]
    measure.print_table("stages, medians", parts)
    measure.print_table("bytes through Spark, all turns together", traffic_by_step(stages))
    print(f"\nwork files: {found['build'][-1]['work_bytes'] / 1e6:,.0f} MB")
    report = {"machine": facts, "input": files.facts, "turns": found, "spark_stages": stages}
    measure.write_json(asked.json, report)


if __name__ == "__main__":
    main()
