"""One multiplication: `python tests/benchmarks/step.py --edges 60e6 --columns 1,4,8`.

The engine's own committed steps, with states and cells in a work folder, beside SciPy's CSR × dense on the
whole graph in one thread and GraphX's PageRank per iteration.  Beside the times: the rate at which numpy
gathers from a cache-resident array (no step can be faster), Spark's share of a step, state traffic.
"""

import contextlib
import os
import statistics
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import measure
import numpy as np
from crawl_graph import CrawlFiles, CrawlSettings, crawl_files
from engine import overrides, steps_of, watched_tasks
from measure import Facts, median
from peers import default_heap
from spark_runs import session, spark_settings

_GATHER_SOURCES = 1 << 16  # the engine's own sub-block: half a megabyte
_GATHER_EDGES = 1 << 17


def gather_rate() -> float:
    """Elements a second that `numpy.take` fetches from an array that fits the core's cache, one thread."""
    random = np.random.default_rng(0)
    values = random.random(_GATHER_SOURCES)
    places = random.integers(0, _GATHER_SOURCES, _GATHER_EDGES)
    out = np.empty(_GATHER_EDGES)
    rates = []
    for _ in range(200):
        started = time.perf_counter()
        values.take(places, out=out, mode="clip")
        rates.append(_GATHER_EDGES / (time.perf_counter() - started))
    return float(statistics.median(rates))


class Engine:
    """The built graph, ready for solves of any number of columns."""

    def __init__(self, spark: Any, files: CrawlFiles, folder: Path) -> None:
        from sparkrank.config import load_config
        from sparkrank.graph.build import build_graph
        from sparkrank.places import resolve
        from sparkrank.stages import RunInputs

        self._spark = spark
        config = load_config(None, overrides(files, folder))
        inputs = RunInputs.check(config)
        self._work = resolve(config.run.work)
        self._config, self._lists = config, inputs.lists
        self.graph = build_graph(spark, config, self._work, inputs.edges, None, inputs.rules)
        self._solves = 0

    def steps(self, n_columns: int, n_steps: int) -> Facts:
        """Figures of a solve of so many steps: medians over its steps but the first and the last."""
        from sparkrank.errors import NotConverged
        from sparkrank.propagate.folder import SolveFolder
        from sparkrank.propagate.layers import Solve
        from sparkrank.propagate.solver import solve_columns

        self._solves += 1
        folder = SolveFolder(place=self._work.child("solves", f"{n_columns}-columns-{self._solves}"))
        folder.place.delete_tree()
        solve = Solve(self.graph, folder, self._columns(n_columns, folder), self._config.solve.damping)
        # No two steps are equal so early, so the steps asked for are done, and no more.
        stops = contextlib.suppress(NotConverged)
        with measure.PeakMemory(os.getpid()) as memory, watched_tasks() as runs, stops:
            solve_columns(self._spark, solve, tolerance=0.0, max_steps=n_steps)
        steps = steps_of(runs)
        last = folder.record(f"step-{n_steps:05d}")
        written = [folder.state(n_steps, stripe).size() or 0 for stripe in range(self.graph.plan.stripes)]
        folder.place.delete_tree()
        seconds = median(steps, "seconds")
        cores = self._spark.sparkContext.defaultParallelism
        read = {kind: median([s["mapped_bytes"] for s in steps], kind) for kind in steps[-1]["mapped_bytes"]}
        return {
            "seconds": seconds,
            "task_seconds": median(steps, "task_seconds"),
            "spark_share": 1 - statistics.median(s["busiest_worker_seconds"] / s["seconds"] for s in steps),
            "edges": last["edges"],
            "edge_columns_per_second_and_core": last["edges"] * n_columns / seconds / cores,
            "state_bytes": sum(written),
            "mapped_bytes": read,
            "state_copies_read": read.get("states", 0) / sum(written),
            **memory.as_facts(),
        }

    def _columns(self, n_columns: int, folder: Any) -> Any:
        from sparkrank.names.slices import plan_slices
        from sparkrank.propagate.columns import Columns, plan_columns
        from sparkrank.propagate.members import match_lists

        core = self._lists.core.hosts
        members = match_lists(self._spark, self.graph, folder, self._lists)
        if n_columns == 1:
            # PageRank alone: core members start in column 0, as every host does.
            return Columns(
                slices=(),
                slice_shares=(),
                column_of_entry=np.zeros(core.num_rows, np.int64),
                start_of_entry=np.ones(core.num_rows),
                has_known_spam=False,
            )
        slices = plan_slices(members.weight_of, n_columns - 1)
        return plan_columns(
            core["slice"].to_pylist(),
            core["weight"].to_numpy(),
            dict(slices.column_of),
            slices.names,
            members.weight_of,
            good_share=self._config.mass.good_share,
            n_hosts=self.graph.n_hosts,
            has_known_spam=False,
        )


def _ways(engine: Engine, files: CrawlFiles, asked: Any) -> dict[str, Callable[[], Facts]]:
    ways: dict[str, Callable[[], Facts]] = {}
    for k in asked.columns:
        ways[f"engine {k}"] = lambda k=k: engine.steps(k, asked.steps)
    numeric = ["--edges", str(files.numeric)]
    if "scipy" in asked.peers:
        columns = ",".join(map(str, asked.columns))
        ways["scipy"] = lambda: _peer(["scipy", *numeric, "--columns", columns])
    if "graphx" in asked.peers:
        settings = ["--heap", asked.graphx_heap, "--master", asked.master]
        settings += ["--partitions", str(asked.graphx_partitions)]
        ways["graphx"] = lambda: _peer(["graphx", *numeric, *settings])
    return ways


def _peer(arguments: list[str]) -> Facts:
    ran = measure.run_peer(arguments)
    return {**ran.answer, **ran.memory}


def _table(found: dict[str, list[Facts]], columns: list[int]) -> list[list[object]]:
    rows: list[list[object]] = [["way", "columns", "seconds", "beside the engine", "edges", "peak MB"]]
    for k in columns:
        turns = found[f"engine {k}"]
        engine = median(turns, "seconds")
        rows.append(["engine, iterated hosts", k, engine, 1.0, turns[0]["edges"], _peak(turns)])
        if "scipy" in found:
            seconds = statistics.median(turn["seconds"][str(k)] for turn in found["scipy"])
            edges = found["scipy"][0]["edges"]
            rows.append(["SciPy, one thread, whole graph", k, seconds, seconds / engine, edges, "-"])
        if "graphx" in found:
            seconds = k * median(found["graphx"], "seconds_per_iteration")
            name = "GraphX, an iteration" + (f" × {k}" if k > 1 else "")
            edges, peak = found["graphx"][0]["edges"], _peak(found["graphx"])
            rows.append([name, k, seconds, seconds / engine, edges, peak])
    return rows


def _peak(turns: list[Facts]) -> float:
    return max(turn["peak_pss_bytes"] for turn in turns) / 1e6


def _engine_table(found: dict[str, list[Facts]], columns: list[int], stripes: int) -> list[list[object]]:
    rows: list[list[object]] = [
        [
            "engine",
            "M edge-columns/s/core",
            "Spark's share",
            "task s a step",
            "state MB written",
            "state MB mapped",
            f"copies mapped (D = {stripes})",
            "cells MB mapped",
        ]
    ]
    for k in columns:
        turns = found[f"engine {k}"]
        mapped = turns[-1]["mapped_bytes"]
        rows.append(
            [
                f"{k} columns",
                median(turns, "edge_columns_per_second_and_core") / 1e6,
                f"{median(turns, 'spark_share'):.0%}",
                median(turns, "task_seconds"),
                median(turns, "state_bytes") / 1e6,
                mapped.get("states", 0) / 1e6,
                median(turns, "state_copies_read"),
                mapped.get("cells", 0) / 1e6,
            ]
        )
    return rows


def main() -> None:
    """Measure and report."""
    parser = measure.arguments_of("Measure one step of the solve beside SciPy and GraphX.", edges=2e6)
    parser.add_argument("--columns", type=lambda text: [int(k) for k in text.split(",")], default=[1, 4, 8])
    parser.add_argument("--steps", type=int, default=8, help="steps of each solve, at least 3")
    parser.add_argument("--peers", type=lambda text: text.split(","), default=["scipy", "graphx"])
    parser.add_argument("--graphx-heap", default=default_heap())
    parser.add_argument("--graphx-partitions", type=int, default=-1, help="edge partitions, -1 for splits")
    asked = parser.parse_args()
    if asked.steps < 3 or not all(1 <= k <= 8 for k in asked.columns):
        parser.error("expected at least 3 steps, and 1 to 8 columns: the core has seven slices")
    facts = measure.machine()
    measure.print_machine(facts)
    settings = CrawlSettings(edges=int(asked.edges), seed=asked.seed)
    files = crawl_files(asked.data, settings, numeric=bool(asked.peers))
    with tempfile.TemporaryDirectory(prefix="step-", dir=files.folder) as scratch:
        environment = spark_settings(Path(scratch) / "events", asked.master, asked.heap)
        with session(environment) as spark:
            engine = Engine(spark, files, Path(scratch))
            found = measure.in_turns(_ways(engine, files, asked), asked.turns)
            counts, stripes = engine.graph.counts, engine.graph.plan.stripes
    rate = gather_rate()
    print(f"\ngraph: {counts['hosts']:,} hosts, {counts['edges']:,} distinct edges, {stripes} stripes")
    print(f"numpy.take from a cache-resident array: {rate / 1e6:,.0f} M elements/s in one thread")
    measure.print_table("one multiplication, medians", _table(found, asked.columns))
    measure.print_table("the engine's steps, medians", _engine_table(found, asked.columns, stripes))
    report = {"machine": facts, "graph": counts, "gather_elements_per_second": rate, "turns": found}
    measure.write_json(asked.json, report)


if __name__ == "__main__":
    main()
