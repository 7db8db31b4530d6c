"""The whole way: `python tests/benchmarks/pipeline.py --edges 60e6`.

`jobs/run_pipeline.py` from host names to ranked candidates, eight columns to a proven error of 1e-6, beside a
process that loads the same rows as numeric text into GraphX and does 20 iterations of one column.  Each is a
whole process, from its start to its end.  Afterwards the results of both are held against SciPy: what the
engine says its error is, what it is, and how far 20 iterations come.
"""

import json
import re
import shutil
import statistics
import sys
import tempfile
from pathlib import Path
from typing import Any

import measure
import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
from crawl_graph import CrawlFiles, CrawlSettings, crawl_files, names_of
from engine import overrides
from measure import PROJECT, Facts, median
from peers import WholeGraph, default_heap, read_edges, read_ranks
from spark_runs import spark_settings, stages_of, traffic_by_step

# Lines of progress that end with a stage's seconds.
_STAGES = {
    "scan": r"build scan-\d+:",
    "rest of the build": r"build (?:hosts-\d+|tiles|order|graph):",
    "steps": r"step \d+:",
    "tables": r"(?:rows in \d+ files written|rows written),",
    "evidence": r"sources listed,",
}
# Far below the bound that is checked against it.
_REFERENCE_TOLERANCE = 1e-11


def pipeline(files: CrawlFiles, scratch: Path, asked: Any) -> Facts:
    """One run of the pipeline as a process, in a fresh output and work folder."""
    shutil.rmtree(scratch, ignore_errors=True)
    words = [word for value in overrides(files, scratch) for word in ("--set", value)]
    command = [sys.executable, str(PROJECT / "jobs" / "run_pipeline.py"), *words]
    events = scratch / "events"
    ran = measure.run_process(command, spark_settings(events, asked.master, asked.heap))
    manifest = json.loads((scratch / "tables" / "runs" / "benchmark.json").read_text())
    work = sum(file.stat().st_size for file in (scratch / "work").rglob("*") if file.is_file())
    return {
        "seconds": ran.seconds,
        "session_seconds": float(_seconds_of(ran.said, r"session opened")[0]),
        "stage_seconds": {name: sum(_seconds_of(ran.said, pattern)) for name, pattern in _STAGES.items()},
        "columns": manifest["columns"],
        "graph": manifest["graph"],
        "candidates": manifest["tables"]["spam_candidates"]["rows"],
        "work_bytes": work,
        "spark_stages": stages_of(events),
        **ran.memory,
    }


def _seconds_of(said: str, pattern: str) -> list[float]:
    """The seconds at the ends of the program's lines of progress that match."""
    return [float(found) for found in re.findall(rf"{pattern}.*?([0-9.]+) s\b", said)]


def graphx(files: CrawlFiles, ranks: Path, asked: Any) -> Facts:
    """One process of GraphX: load, 20 iterations, ranks saved."""
    shutil.rmtree(ranks, ignore_errors=True)
    numbers = ["--iterations", str(asked.iterations), "--partitions", str(asked.graphx_partitions)]
    settings = ["--heap", asked.graphx_heap, "--master", asked.master, "--ranks", str(ranks)]
    ran = measure.run_peer(["graphx", "--edges", str(files.numeric), *numbers, *settings])
    return {"seconds": ran.seconds, **ran.answer, **ran.memory}


def engine_errors(files: CrawlFiles, scratch: Path) -> Facts:
    """How far `host_scores` is from SciPy's converged PageRank on the same distinct edges.

    `largest` is over all hosts, of each host's own PageRank, in scaled units: what the engine's bound bounds.
    """
    graph = WholeGraph(*read_edges(files.numeric), distinct=True)
    exact = graph.converged(_REFERENCE_TOLERANCE)
    manifest = json.loads((scratch / "tables" / "runs" / "benchmark.json").read_text())
    paths = [scratch / "tables" / file["path"] for file in manifest["tables"]["host_scores"]["files"]]
    columns = ["host", "scaled_pagerank"]
    tables = [pq.ParquetFile(path).read(columns=columns) for path in paths]
    scores = pa.concat_tables(tables).sort_by("host")
    names = names_of(files.settings).names(graph.ids)
    by_name = pc.sort_indices(names)
    if not names.take(by_name).equals(scores["host"].combine_chunks().cast(pa.string())):
        raise RuntimeError("host_scores and the generated graph have different hosts")
    return _errors(scores["scaled_pagerank"].to_numpy(), exact[by_name.to_numpy()])


def graphx_errors(files: CrawlFiles, ranks: Path) -> Facts:
    """How far GraphX's ranks are from SciPy's converged PageRank of the same rows, both adding up to 1."""
    graph = WholeGraph(*read_edges(files.numeric), distinct=False)
    exact = graph.converged(_REFERENCE_TOLERANCE)
    ids, found = read_ranks(ranks)
    if not np.array_equal(ids, graph.ids):
        raise RuntimeError("GraphX and the generated graph have different hosts")
    return _errors(found / found.sum(), exact / exact.sum())


def _errors(found: np.ndarray, exact: np.ndarray) -> Facts:
    difference = np.abs(found - exact)
    return {
        "largest": float((difference / exact).max()),
        "median": float(np.median(difference / exact)),
        "of_the_sum": float(difference.sum() / exact.sum()),
    }


def main() -> None:
    """Measure and report."""
    parser = measure.arguments_of("Measure the whole pipeline beside a GraphX job.", edges=2e6)
    parser.add_argument("--iterations", type=int, default=20, help="iterations of GraphX")
    parser.add_argument("--graphx-heap", default=default_heap())
    parser.add_argument("--graphx-partitions", type=int, default=-1, help="edge partitions, -1 for splits")
    asked = parser.parse_args()
    facts = measure.machine()
    measure.print_machine(facts)
    settings = CrawlSettings(edges=int(asked.edges), seed=asked.seed)
    files = crawl_files(asked.data, settings, numeric=True)
    with tempfile.TemporaryDirectory(prefix="pipeline-", dir=files.folder) as name:
        run, ranks = Path(name) / "run", Path(name) / "ranks"
        ways = {
            "pipeline": lambda: pipeline(files, run, asked),
            "graphx": lambda: graphx(files, ranks, asked),
        }
        found = measure.in_turns(ways, asked.turns)
        errors = {"pipeline": engine_errors(files, run), "graphx": graphx_errors(files, ranks)}
    _report(found, errors, asked.iterations)
    measure.write_json(asked.json, {"machine": facts, "input": files.facts, "turns": found, "errors": errors})


def _report(found: dict[str, list[Facts]], errors: dict[str, Facts], iterations: int) -> None:
    last = found["pipeline"][-1]
    bound = max(column["error_bound"] for column in last["columns"])
    steps, columns = last["columns"][0]["steps"], len(last["columns"])
    theirs = median(found["graphx"], "seconds")
    header = ["process", "columns", "seconds", "ratio", "peak MB", "own MB", "largest error", "its bound"]
    rows: list[list[object]] = [header]
    for label, key, n_columns, proven in (
        (f"pipeline, {steps} steps", "pipeline", columns, f"{bound:.1e}"),
        (f"GraphX, {iterations} iterations", "graphx", 1, "none"),
    ):
        turns = found[key]
        seconds = median(turns, "seconds")
        peaks = [max(turn[kind] for turn in turns) / 1e6 for kind in ("peak_pss_bytes", "peak_own_bytes")]
        error = f"{errors[key]['largest']:.1e}"
        rows.append([label, n_columns, seconds, seconds / theirs, *peaks, error, proven])
    measure.print_table("whole processes, medians; errors of PageRank, as shares of it", rows)
    parts = {key: median(found["graphx"], f"{key}_seconds") for key in ("load", "save")}
    parts["iterations"] = statistics.median(turn["run_seconds"][-1] for turn in found["graphx"])
    print("\nGraphX: " + ", ".join(f"{name} {seconds:.1f} s" for name, seconds in parts.items()))
    graph = last["graph"]
    print(f"graph: {graph['hosts']:,} hosts, {graph['edges']:,} edges; {last['candidates']:,} candidates")
    print(f"work files at the end: {last['work_bytes'] / 1e6:,.0f} MB")
    measure.print_table(
        "the pipeline's bytes through Spark, last turn", traffic_by_step(last["spark_stages"])
    )


if __name__ == "__main__":
    main()
