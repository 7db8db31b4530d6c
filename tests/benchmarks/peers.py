"""What the engine is measured beside, each in a process of its own: GraphX and SciPy.

    python tests/benchmarks/peers.py graphx --edges edges.txt --iterations 2,2,8
    python tests/benchmarks/peers.py scipy --edges edges.txt --columns 1,4,8

The last line printed is JSON.  GraphX comes inside the pyspark package and is called through py4j; its
numeric text edges keep the rows that repeat, which it counts as links of their own.
"""

import argparse
import json
import os
import shlex
import sys
import time
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.csv as pacsv

Facts = dict[str, Any]

_DAMPING = 0.85


def graphx(
    edges: Path,
    iterations: list[int],
    *,
    master: str,
    heap: str,
    partitions: int,
    ranks: Path | None,
) -> Facts:
    """Loads the edges and runs static PageRank once for each number of iterations.

    Loading ends when edges and vertices are counted, a run when the ranks are; the graph stays cached
    between them.  `seconds_per_iteration` is the slope between the last two runs, so what every run pays once
    (degrees, the final scaling) is not in it; runs before them warm the JVM up.  `ranks` is a folder for the
    last run's ranks, as text.
    """
    settings = ["--master", master, "--driver-memory", heap, "--conf", "spark.ui.enabled=false"]
    settings += ["--conf", "spark.ui.showConsoleProgress=false", "--conf", "spark.driver.host=127.0.0.1"]
    os.environ["PYSPARK_SUBMIT_ARGS"] = f"{shlex.join(settings)} pyspark-shell"
    os.environ.setdefault("SPARK_LOCAL_IP", "127.0.0.1")
    from pyspark import SparkContext

    context = SparkContext(appName="graphx pagerank")
    context.setLogLevel("ERROR")
    jvm = context._jvm
    library = jvm.org.apache.spark.graphx
    level = jvm.org.apache.spark.storage.StorageLevel.MEMORY_ONLY()
    started = time.monotonic()
    # 0 or fewer partitions: as many as the text file has splits.
    graph = library.GraphLoader.edgeListFile(
        context._jsc.sc(), edges.as_uri(), False, partitions, level, level
    )
    facts: Facts = {"edges": graph.edges().count(), "vertices": graph.vertices().count()}
    facts["partitions"] = graph.edges().getNumPartitions()
    facts["load_seconds"] = time.monotonic() - started
    # Implicit arguments of the Scala method: both attributes of a loaded graph are Int.
    tag = jvm.scala.reflect.ClassTag.Int()
    runs = []
    for number in iterations:
        started = time.monotonic()
        ranked = library.lib.PageRank.run(graph, number, 1 - _DAMPING, tag, tag).vertices()
        ranked.count()
        runs.append(time.monotonic() - started)
    facts["iterations"] = iterations
    facts["run_seconds"] = runs
    if len(iterations) > 1:
        facts["seconds_per_iteration"] = (runs[-1] - runs[-2]) / (iterations[-1] - iterations[-2])
    if ranks is not None:
        started = time.monotonic()
        ranked.saveAsTextFile(ranks.as_uri())
        facts["save_seconds"] = time.monotonic() - started
    context.stop()
    return facts


def read_ranks(folder: Path) -> tuple[np.ndarray, np.ndarray]:
    """Ids and ranks that `graphx` saved, in the order of the ids."""
    lines = b"".join(part.read_bytes() for part in sorted(folder.glob("part-*")))
    text = lines.translate(None, delete=b"()")
    options = pacsv.ReadOptions(column_names=["id", "rank"])
    table = pacsv.read_csv(pa.BufferReader(text), read_options=options).sort_by("id")
    return table["id"].to_numpy(), table["rank"].to_numpy()


def read_edges(edges: Path) -> tuple[np.ndarray, np.ndarray]:
    """Source and destination ids of numeric text edges."""
    options = pacsv.ReadOptions(column_names=["src", "dst"])
    parsing = pacsv.ParseOptions(delimiter=" ")
    types = pacsv.ConvertOptions(column_types={"src": pa.int32(), "dst": pa.int32()})
    table = pacsv.read_csv(edges, read_options=options, parse_options=parsing, convert_options=types)
    return table["src"].to_numpy(), table["dst"].to_numpy()


class WholeGraph:
    """Tᵀ of a graph in memory as SciPy's CSR; `ids` are the hosts that have a row, ascending.

    `distinct` merges repeated rows and drops self-links, as the engine does; without it they stay and count,
    as in GraphX.
    """

    def __init__(self, src: np.ndarray, dst: np.ndarray, *, distinct: bool) -> None:
        from scipy import sparse

        n_ids = int(max(src.max(), dst.max())) + 1
        seen = np.zeros(n_ids, dtype=bool)
        seen[src] = True
        seen[dst] = True
        self.ids = np.flatnonzero(seen)
        place = np.cumsum(seen, dtype=np.int32) - np.int32(1)
        if distinct:
            linking = src != dst
            src, dst = src[linking], dst[linking]
        shape = (len(self.ids), len(self.ids))
        # Building CSR adds up repeated rows.
        links = sparse.csr_array((np.ones(len(src)), (place[dst], place[src])), shape=shape)
        if distinct:
            links.data[:] = 1.0
        out_weight = np.bincount(links.indices, weights=links.data, minlength=shape[0])
        links.data /= out_weight[links.indices]
        self.matrix = links

    def converged(self, tolerance: float) -> np.ndarray:
        """PageRank by iteration of x = c·Tᵀx + 1 until no host changes by more than the tolerance of it.

        Scaled units: a host without in-links has 1; hosts without out-links leak.  Shape (hosts,).
        """
        score = np.ones(len(self.ids))
        while True:
            before, score = score, _DAMPING * (self.matrix @ score) + 1.0
            if np.abs(score - before).max() <= tolerance:
                return score


def scipy_products(edges: Path, columns: list[int], repeats: int) -> Facts:
    """Median seconds of CSR × dense on the whole graph, in SciPy's one thread, by number of columns."""
    started = time.monotonic()
    graph = WholeGraph(*read_edges(edges), distinct=True)
    facts: Facts = {
        "edges": int(graph.matrix.nnz),
        "hosts": len(graph.ids),
        "load_seconds": time.monotonic() - started,
        "seconds": {},
    }
    for k in columns:
        state = np.random.default_rng(0).random((len(graph.ids), k))
        if k == 1:
            state = state[:, 0]
        seconds = []
        for _ in range(repeats + 1):
            started = time.monotonic()
            graph.matrix @ state
            seconds.append(time.monotonic() - started)
        # The first product also meets the pages of its result for the first time.
        facts["seconds"][str(k)] = float(np.median(seconds[1:]))
    return facts


def _numbers(text: str) -> list[int]:
    return [int(number) for number in text.split(",")]


def default_heap() -> str:
    """Half of the machine's memory, at most the 12 GB that GraphX needs for some 60 million edges."""
    memory = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    return f"{min(12 << 10, memory >> 21)}m"


def main() -> None:
    """Run one peer; the last line printed is JSON."""
    parser = argparse.ArgumentParser(description="Measure GraphX or SciPy on numeric text edges.")
    parser.add_argument("peer", choices=("graphx", "scipy"))
    parser.add_argument("--edges", type=Path, required=True, help="text file: one `src dst` of ids a line")
    parser.add_argument(
        "--iterations", type=_numbers, default=[2, 2, 8], help="GraphX: one run for each number"
    )
    parser.add_argument("--ranks", type=Path, help="GraphX: folder for the last run's ranks")
    parser.add_argument("--partitions", type=int, default=-1, help="GraphX: edge partitions, -1 for splits")
    parser.add_argument("--heap", default=default_heap(), help="GraphX: heap of its JVM")
    parser.add_argument("--master", default="local[*]", help="GraphX: Spark's master")
    parser.add_argument("--columns", type=_numbers, default=[1, 4, 8], help="SciPy: numbers of columns")
    parser.add_argument("--repeats", type=int, default=5, help="SciPy: products for each number")
    asked = parser.parse_args()
    edges = asked.edges.resolve()
    if asked.peer == "scipy":
        facts = scipy_products(edges, asked.columns, asked.repeats)
    else:
        facts = graphx(
            edges,
            asked.iterations,
            master=asked.master,
            heap=asked.heap,
            partitions=asked.partitions,
            ranks=asked.ranks and asked.ranks.resolve(),
        )
    sys.stdout.flush()
    print(json.dumps(facts))


if __name__ == "__main__":
    main()
