"""Cost an edge at several sizes: `python tests/benchmarks/scaling.py --sizes 15e6,66e6,264e6`.

The whole pipeline, eight columns to a proven error of 1e-6, each size a process of its own in turns.  Seconds
without Spark's start, which no graph changes, are divided by distinct edges; so are the bytes of the
graph's work files that stay.  Memory is that of the whole process tree.
"""

import shutil
import tempfile
from pathlib import Path

import measure
from crawl_graph import CrawlSettings, crawl_files
from measure import Facts, median
from pipeline import pipeline


def main() -> None:
    """Measure and report."""
    parser = measure.arguments_of("Measure the pipeline at several sizes.", edges=0)
    parser.add_argument("--sizes", type=lambda text: [float(n) for n in text.split(",")], default=[2e6, 8e6])
    asked = parser.parse_args()
    facts = measure.machine()
    measure.print_machine(facts)
    found: dict[str, list[Facts]] = {}
    settings = [CrawlSettings(edges=int(size), seed=asked.seed) for size in asked.sizes]
    crawls = {f"{one.edges / 1e6:g} M rows": crawl_files(asked.data, one, numeric=False) for one in settings}
    with tempfile.TemporaryDirectory(prefix="scaling-", dir=asked.data) as scratch:

        def run_of(name: str) -> Facts:
            try:
                return pipeline(crawls[name], Path(scratch) / "run", asked)
            finally:
                shutil.rmtree(Path(scratch) / "run", ignore_errors=True)

        found = measure.in_turns({name: lambda name=name: run_of(name) for name in crawls}, asked.turns)
    measure.print_table("the pipeline by size, medians", _table(found))
    measure.print_table("seconds by stage, last turn", _stages(found))
    measure.write_json(asked.json, {"machine": facts, "turns": found})


def _table(found: dict[str, list[Facts]]) -> list[list[object]]:
    rows: list[list[object]] = [
        [
            "graph",
            "hosts",
            "edges",
            "seconds",
            "start",
            "us an edge",
            "B an edge",
            "steps",
            "peak MB",
            "own MB",
        ]
    ]
    for name, turns in found.items():
        last = turns[-1]
        edges = last["graph"]["edges"]
        seconds, start = median(turns, "seconds"), median(turns, "session_seconds")
        peaks = [max(turn[kind] for turn in turns) / 1e6 for kind in ("peak_pss_bytes", "peak_own_bytes")]
        cost = [(seconds - start) / edges * 1e6, last["work_bytes"] / edges]
        steps = last["columns"][0]["steps"]
        rows.append([name, last["graph"]["hosts"], edges, seconds, start, *cost, steps, *peaks])
    return rows


def _stages(found: dict[str, list[Facts]]) -> list[list[object]]:
    names = list(next(iter(found.values()))[-1]["stage_seconds"])
    rows: list[list[object]] = [["graph", *names]]
    rows += [[name, *(turns[-1]["stage_seconds"][stage] for stage in names)] for name, turns in found.items()]
    return rows


if __name__ == "__main__":
    main()
