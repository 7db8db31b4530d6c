"""Ids that clash: another salt, the same scores."""

import dataclasses

import numpy as np
import pyarrow.parquet as pq
import pytest

from sparkrank.arrays import read_arrays
from sparkrank.errors import SparkrankError
from sparkrank.graph import hosts, piece_names
from sparkrank.graph.plan import GridPlan
from sparkrank.kernels.xxhash import xxh64
from sparkrank.propagate import members
from tests.steps.graphs import make_crawl, tasks_in_process, write_edges

SMALL_GRID = GridPlan(stripes=4, build_groups=2, solve_groups=2)
FIRST_SALT = 42
SECOND_HASH = 0x5EED  # the seed that tells two names of one id apart


def coarse_under(*salts: int):
    """The hash with 256 values only under some salts; under all but the second hash's without any."""

    def hashed(data: np.ndarray, offsets: np.ndarray, seed: int) -> np.ndarray:
        ids = xxh64(data, offsets, seed)
        is_coarse = seed in salts if salts else seed != SECOND_HASH
        return ids >> 56 << 56 if is_coarse else ids

    return hashed


def hash_with(monkeypatch: pytest.MonkeyPatch, hashed) -> None:
    """Takes effect in this process: where `tasks_in_process` holds."""
    for module in (piece_names, hosts, members):
        monkeypatch.setattr(module, "xxh64", hashed)


def test_after_a_clash_another_salt_gives_the_same_scores(
    web_crawl, even_scored, monkeypatch, tmp_path
) -> None:
    hash_with(monkeypatch, coarse_under(FIRST_SALT))
    scored = web_crawl.run(plan=SMALL_GRID, run__work=tmp_path)
    assert scored.graph.salt != even_scored.graph.salt == FIRST_SALT
    assert scored.hosts == even_scored.hosts
    assert scored.graph.counts == even_scored.graph.counts
    for name in ("scaled_pagerank", "trust", "known_spam_mass"):
        np.testing.assert_allclose(scored.column(name), even_scored.column(name), rtol=1e-11, atol=0)


def test_the_next_salt_depends_on_no_cut(web_crawl, web, monkeypatch, tmp_path) -> None:
    hash_with(monkeypatch, coarse_under(FIRST_SALT))
    monkeypatch.setattr("sparkrank.graph.pieces._LEAST_ROWS", 100)
    edges = write_edges(tmp_path / "edges", web.edge_table(seed=5), files=7)
    recut = dataclasses.replace(web_crawl, edges=edges)
    with tasks_in_process():
        one = web_crawl.build(run__work=tmp_path / "one")
        other = recut.build(plan=SMALL_GRID, run__work=tmp_path / "other")
    assert one.salt == other.salt != FIRST_SALT


def test_names_that_clash_under_every_salt_are_an_error(spark, monkeypatch, tmp_path) -> None:
    hash_with(monkeypatch, coarse_under())
    rows = [(f"h{i}.example", f"h{i + 1}.example") for i in range(600)]
    with tasks_in_process(), pytest.raises(SparkrankError) as refusal:
        make_crawl(spark, tmp_path, rows, [("h1.example",)]).build()
    message = str(refusal.value)
    assert message.startswith("host ids: expected distinct 64-bit ids under one of 3 salts, found ")
    assert message.endswith(" clashes; the input holds names forged against the hash")


def test_ids_are_what_sql_makes_of_the_names(spark, even_scored) -> None:
    """Spark's xxhash64 is the oracle of the ids, and with them of the order of every sum."""
    folder = even_scored.graph.folder
    names = pq.read_table(folder.names(0).local_path)["host"].to_pylist()
    rows = spark.createDataFrame([(name,) for name in names], "host string")
    by_sql = [row[0] for row in rows.selectExpr("xxhash64(host)").collect()]
    assert read_arrays(folder.ids(0))["ids"].tolist() == by_sql == sorted(by_sql)
