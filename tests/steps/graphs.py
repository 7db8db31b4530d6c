"""Small graphs for the tests of the engine: edge tables and lists in files, and the steps over them."""

import contextlib
import hashlib
import itertools
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest
import scipy.sparse
import scipy.sparse.linalg

from sparkrank.config import Config, load_config
from sparkrank.graph.build import Graph, build_graph
from sparkrank.graph.plan import GridPlan
from sparkrank.inputs import check_edges, check_hosts
from sparkrank.names.lists import HostLists, read_lists
from sparkrank.names.suffixes import SuffixRules
from sparkrank.places import resolve
from sparkrank.propagate.solve import SolvedHosts, solve_hosts
from sparkrank.publish.attempts import RunFolder, new_attempt_id
from sparkrank.publish.by_tasks import publish_parts
from sparkrank.publish.entries import TableEntry
from sparkrank.publish.lock import hold_run
from sparkrank.publish.parts import TableParts, read_part
from sparkrank.publish.write import publish_table
from sparkrank.scores.host_scores import host_scores
from sparkrank.tables import TableSpec
from sparkrank.tasks import TaskRunner

RULES = SuffixRules.load("icann+private", ())
"""The public suffix rules as a run has them; loaded once."""

GRID = GridPlan(stripes=4, build_groups=4, solve_groups=2)
"""A grid as large graphs get it: a step adds the parts of two source groups."""

ROUGH_TOLERANCE = 0.02
"""A tolerance that few steps reach: what is compared bit by bit need not be near the answer."""


@contextlib.contextmanager
def tasks_in_process() -> Iterator[None]:
    """Runs numpy tasks in this process, one after the other.

    A task is a function over work files; where it runs must not matter (a test holds both ways
    together), and a Spark job a step costs a small graph a hundred times its arithmetic.
    """
    with pytest.MonkeyPatch.context() as patch:

        def start(self: TaskRunner, spark: object, n_tasks: int, *, even: bool = False) -> None:
            self.n_tasks = n_tasks

        patch.setattr(TaskRunner, "__init__", start)
        patch.setattr(TaskRunner, "run", lambda self, task, what: [task(n) for n in range(self.n_tasks)])
        patch.setattr(TaskRunner, "close", lambda self: None)
        yield


def sparse_solve(
    n: int,
    edges: Mapping[tuple[int, int], float],
    start: np.ndarray,
    damping: float = 0.85,
) -> np.ndarray:
    """x = c·T'x + u solved directly by scipy; `edges` are weights by (source, destination)."""
    pairs = np.array(list(edges), dtype=np.int64).reshape(-1, 2)
    weights = np.array(list(edges.values()), dtype=np.float64)
    out = np.bincount(pairs[:, 0], weights, minlength=n)
    shares = (damping * weights / out[pairs[:, 0]], (pairs[:, 1], pairs[:, 0]))
    matrix = scipy.sparse.identity(n, format="csc") - scipy.sparse.csc_matrix(shares, shape=(n, n))
    return scipy.sparse.linalg.spsolve(matrix, start)


def write_edges(folder: Path, rows: pa.Table | Iterable[Sequence[Any]], *, files: int = 1) -> Path:
    """Writes an edge table as `files` Parquet files of about equal length, each of a few row groups.

    `rows` are a table, or tuples (src, dst), (src, dst, links) or (src, dst, links, rel).
    """
    table = rows if isinstance(rows, pa.Table) else edge_table(list(rows))
    folder.mkdir(parents=True)
    cuts = np.linspace(0, table.num_rows, files + 1).astype(int)
    for number, (low, high) in enumerate(itertools.pairwise(cuts)):
        pq.write_table(
            table.slice(low, high - low),
            folder / f"part-{number}.parquet",
            row_group_size=max(1, (high - low) // 3 + 1),
        )
    return folder


def edge_table(rows: Sequence[Sequence[Any]]) -> pa.Table:
    """Tuples as an edge table; the columns `links` and `rel` are there as far as the tuples reach."""
    kinds = {"src": pa.string(), "dst": pa.string(), "links": pa.int64(), "rel": pa.string()}
    width = max(len(row) for row in rows)
    names = list(kinds)[:width]
    padded = [[*row, *[None] * (width - len(row))] for row in rows]
    return pa.table({name: pa.array([row[i] for row in padded], kinds[name]) for i, name in enumerate(names)})


def write_list(path: Path, rows: Iterable[Sequence[Any]], columns: str = "host,slice,weight") -> Path:
    """Writes a list of hosts as CSV with as many of the columns as the rows have."""
    given = [tuple(row) for row in rows]
    width = len(given[0]) if given else 1
    lines = [",".join(columns.split(",")[:width]), *(",".join(map(str, row)) for row in given)]
    path.write_text("\n".join(lines) + "\n")
    return path


@dataclass(frozen=True, kw_only=True)
class Crawl:
    """Inputs in a folder, and the steps of a run over them, in process."""

    spark: Any
    folder: Path
    edges: Path
    core: Path
    known_spam: Path | None = None
    hosts: Path | None = None
    settings: Mapping[str, Any] = field(default_factory=dict)

    def config(self, **settings: Any) -> Config:
        """The configuration; settings are named section__key, those given here win."""
        given = {
            "run.id": "test",
            "run.output": self.folder / "out",
            "run.work": self.folder / "work",
            "input.edges": self.edges,
            "input.core": self.core,
            "input.known_spam": self.known_spam or '""',
            "input.hosts": self.hosts or '""',
        }
        for key, value in {**self.settings, **settings}.items():
            given[key.replace("__", ".")] = str(value).lower() if isinstance(value, bool) else value
        return load_config(None, [f"{key}={value}" for key, value in given.items()])

    def build(self, *, plan: GridPlan | None = None, **settings: Any) -> Graph:
        config = self.config(**settings)
        edges = check_edges(config.input.edges)
        hosts = check_hosts(config.input.hosts) if config.input.hosts else None
        return build_graph(self.spark, config, resolve(config.run.work), edges, hosts, RULES, plan=plan)

    def lists(self, **settings: Any) -> HostLists:
        return read_lists(self.config(**settings), RULES)

    def solve(self, graph: Graph, **settings: Any) -> SolvedHosts:
        return solve_hosts(self.spark, self.config(**settings), graph, self.lists(**settings))

    def score_parts(self, solved: SolvedHosts) -> TableParts:
        """The parts of `host_scores`, of which it is published."""
        return host_scores(self.spark, solved.solution, solved.sweeps, RULES)

    def score_table(self, solved: SolvedHosts) -> pa.Table:
        """The rows of `host_scores`, by host."""
        parts = self.score_parts(solved)
        found = [read_part(parts.files, part) for part in range(len(parts.rows_by_part))]
        return pa.concat_tables(found).sort_by("host")

    def scores(self, solved: SolvedHosts) -> Any:
        """The DataFrame of `host_scores`."""
        return self.spark.createDataFrame(self.score_table(solved))

    def run(
        self,
        graph: Graph | None = None,
        *,
        plan: GridPlan | None = None,
        by_spark: bool = False,
        **settings: Any,
    ) -> "Scored":
        """Build (or take the graph), solve and score; numpy tasks in this process unless `by_spark`."""
        with contextlib.nullcontext() if by_spark else tasks_in_process():
            graph = graph or self.build(plan=plan, **settings)
            solved = self.solve(graph, **settings)
            table = self.score_table(solved)
        return Scored(graph=graph, solved=solved, table=table)


def publish(crawl: Crawl, rows: Any, table: TableSpec) -> TableEntry:
    """Publishes a DataFrame or parts below the crawl's output; the entry has the ordered rows' digest."""
    output = resolve(crawl.config().run.output)
    with hold_run(output, "test") as lock:
        run = RunFolder(output=output, run_id="test", attempt_id=new_attempt_id(), lock=lock)
        if isinstance(rows, TableParts):
            return publish_parts(crawl.spark, rows, table, run)
        return publish_table(rows, table, run)


def make_crawl(
    spark: Any,
    folder: Path,
    edges: pa.Table | Iterable[Sequence[Any]],
    core: Iterable[Sequence[Any]],
    *,
    known_spam: Iterable[Sequence[Any]] | None = None,
    hosts: Sequence[str] | None = None,
    files: int = 1,
    **settings: Any,
) -> Crawl:
    """Writes the inputs below `folder`, which is made."""
    folder.mkdir(parents=True, exist_ok=True)
    listed = folder / "hosts.parquet"
    if hosts is not None:
        pq.write_table(pa.table({"host": pa.array(hosts, pa.string())}), listed)
    return Crawl(
        spark=spark,
        folder=folder,
        edges=write_edges(folder / "edges", edges, files=files),
        core=write_list(folder / "core.csv", core),
        known_spam=None if known_spam is None else write_list(folder / "known_spam.csv", known_spam),
        hosts=None if hosts is None else listed,
        settings=settings,
    )


@dataclass(frozen=True, kw_only=True)
class Scored:
    """A finished run over a crawl; `table` has one row a host, ordered by host."""

    graph: Graph
    solved: SolvedHosts
    table: pa.Table

    @property
    def hosts(self) -> list[str]:
        return self.table["host"].to_pylist()

    def __getitem__(self, host: str) -> dict[str, Any]:
        """The row of a host."""
        return self.table.slice(self.hosts.index(host), 1).to_pylist()[0]

    def column(self, name: str) -> np.ndarray:
        """Values of a column in the order of `hosts`; nulls of numbers as NaN."""
        return self.table[name].to_numpy()


def file_digests(folder: Path, *, without: Sequence[str] = ()) -> dict[str, str]:
    """SHA-256 of every file below a folder by relative path, but those below the folders named."""
    digests = {}
    for path in sorted(folder.rglob("*")):
        name = path.relative_to(folder)
        if path.is_file() and name.parts[0] not in without:
            digests[str(name)] = hashlib.sha256(path.read_bytes()).hexdigest()
    return digests
