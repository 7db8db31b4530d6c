"""The grid and the cluster change nothing: values across grids, bits within one."""

import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from sparkrank.graph.plan import GridPlan
from sparkrank.tables import HOST_SCORES
from tests.conftest import PROJECT_ROOT
from tests.steps.graphs import GRID, ROUGH_TOLERANCE, Crawl, Scored, file_digests, make_crawl, publish
from tests.steps.webs import GOOD_SHARE

ROUGH = {"graph__weighting": "links", "solve__tolerance": ROUGH_TOLERANCE}
# These say how the input is cut: into files, or into pieces.
OF_THE_CUT = ("graph.json", "scan-1.json")


def recut(web_crawl: Crawl, web: Any, folder: Path, *, files: int, seed: int) -> Crawl:
    """The same inputs with the rows in another order and in so many files."""
    return make_crawl(
        web_crawl.spark,
        folder,
        web.edge_table(seed),
        web.core,
        known_spam=[(host,) for host in web.known_spam],
        hosts=[*web.isolated, "hub.example"],
        files=files,
        mass__good_share=GOOD_SHARE,
    )


def work_files(scored: Scored) -> dict[str, str]:
    """Digests of all files of the graph and the solve, but for those that say how the input is cut."""
    graph = file_digests(Path(scored.graph.folder.place.local_path), without=OF_THE_CUT)
    assert set(graph) >= {"hosts-1.json", "tiles.json", "order.json", "cells/000-000.cell"}
    solve = file_digests(Path(scored.solved.solution.solve.folder.place.local_path))
    assert "records/solution.json" in solve
    return {**{f"graph/{name}": digest for name, digest in graph.items()}, **solve}


@pytest.fixture
def seven_partitions(spark) -> Iterator[None]:
    """Seven partitions a shuffle, none of them joined."""
    settings = {
        "spark.sql.shuffle.partitions": "7",
        "spark.sql.adaptive.enabled": "false",
    }
    before = {key: spark.conf.get(key) for key in settings}
    for key, value in settings.items():
        spark.conf.set(key, value)
    yield
    for key, value in before.items():
        spark.conf.set(key, value)


def test_a_grid_has_the_values_of_one_stripe(web_crawl, links_scored, grid_scored) -> None:
    assert grid_scored.graph.plan == GRID
    # One stripe, as many steps: sums in another order, and nothing else.
    single = web_crawl.run(links_scored.graph, **ROUGH)
    assert single.graph.plan == GridPlan(stripes=1, build_groups=1, solve_groups=1)
    assert single.solved.solution.steps == grid_scored.solved.solution.steps
    for name in ("pagerank", "scaled_pagerank", "trust", "known_spam_mass"):
        np.testing.assert_allclose(grid_scored.column(name), single.column(name), rtol=1e-12, atol=0)
    for name in ("relative_mass", "relative_mass_low", "relative_mass_high"):
        np.testing.assert_allclose(grid_scored.column(name), single.column(name), rtol=1e-12, atol=1e-12)
    for name in ("in_degree", "out_degree", "is_core", "core_reached"):
        assert grid_scored.column(name).tolist() == single.column(name).tolist()
    assert grid_scored.table["core_distance"] == single.table["core_distance"]


@pytest.mark.parametrize(("files", "piece_rows"), [(2, 10**6), (7, 100)])
def test_files_pieces_and_tasks_in_process_give_the_same_bits(
    web, web_crawl, grid_scored, monkeypatch, tmp_path, files, piece_rows
) -> None:
    """Other files, rows in another order, a scan in many pieces, and no Spark around the tasks."""
    monkeypatch.setattr("sparkrank.graph.pieces._LEAST_ROWS", piece_rows)
    crawl = recut(web_crawl, web, tmp_path, files=files, seed=files)
    scored = crawl.run(plan=GRID, **ROUGH)
    assert scored.graph.fingerprint != grid_scored.graph.fingerprint
    assert scored.graph.counts == grid_scored.graph.counts
    assert work_files(scored) == work_files(grid_scored)


def test_table_digests_depend_on_no_number_of_partitions(
    spark, web_crawl, grid_scored, seven_partitions
) -> None:
    seven = publish(web_crawl, web_crawl.scores(grid_scored.solved), HOST_SCORES)
    spark.conf.set("spark.sql.shuffle.partitions", "1")
    one = publish(web_crawl, web_crawl.scores(grid_scored.solved), HOST_SCORES)
    assert (len(seven.files), len(one.files)) == (7, 1)
    assert seven.digest == one.digest
    # As a run publishes them: from parts, without a shuffle.
    by_tasks = publish(web_crawl, web_crawl.score_parts(grid_scored.solved), HOST_SCORES)
    assert by_tasks.digest == seven.digest
    assert by_tasks.rows == seven.rows == len(grid_scored.hosts)


# The same run in a process of its own with one core.
ALONE = """
import sys
from pathlib import Path
from sparkrank.graph.plan import GridPlan
from sparkrank.session import open_session
from sparkrank.tables import HOST_SCORES
from tests.steps.graphs import Crawl, GRID, publish

folder, work = Path(sys.argv[1]), sys.argv[2]
spark = open_session("alone")
crawl = Crawl(
    spark=spark, folder=Path(work), edges=folder / "edges", core=folder / "core.csv",
    known_spam=folder / "known_spam.csv", hosts=folder / "hosts.parquet",
    settings={"mass__good_share": float(sys.argv[3]), "graph__weighting": "links",
              "solve__tolerance": float(sys.argv[4])},
)
scored = crawl.run(plan=GRID, by_spark=True)
print("digest", publish(crawl, crawl.score_parts(scored.solved), HOST_SCORES).digest)
spark.stop()
"""


@pytest.mark.slow
@pytest.mark.parametrize("master", ["local[1]", "local[3]"])
def test_the_number_of_cores_changes_no_bit(master, web_crawl, grid_scored, tmp_path) -> None:
    given = [str(web_crawl.folder), str(tmp_path), str(GOOD_SHARE), str(ROUGH_TOLERANCE)]
    environment = {**os.environ, "PYTHONPATH": str(PROJECT_ROOT)}
    environment["PYSPARK_SUBMIT_ARGS"] = f"--master {master} --driver-memory 1g pyspark-shell"
    done = subprocess.run(
        [sys.executable, "-c", ALONE, *given], capture_output=True, text=True, env=environment, check=False
    )
    assert done.returncode == 0, done.stderr
    digest = next(line.split()[1] for line in done.stdout.splitlines() if line.startswith("digest"))
    assert digest == publish(web_crawl, web_crawl.score_parts(grid_scored.solved), HOST_SCORES).digest
    (solve,) = (tmp_path / "work" / "solves").iterdir()
    expected = file_digests(Path(grid_scored.solved.solution.solve.folder.place.local_path))
    assert file_digests(solve) == expected
