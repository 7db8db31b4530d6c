"""Support of hosts of a small graph: the tasks run in this process over a graph that was scored."""

import contextlib
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from sparkrank.config import Candidates, Evidence
from sparkrank.evidence.support import SupportFiles, gather_support
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.octets import octets_of
from sparkrank.places import resolve
from tests.steps.graphs import Crawl, Scored, tasks_in_process

EXACT = {"followed_links": 10**16, "all_followed_links": 10**19, "max_steps": 200, "listed_sources": 10**6}
"""Every path, until rounding is all that is left of it."""

ALL = Candidates(min_scaled_pagerank=0.0, min_relative_mass=-1e9)


def evidence(**settings: int) -> Evidence:
    return Evidence(**settings)


def host_ids(scored: Scored, hosts: list[str]) -> np.ndarray:
    return xxh64(*octets_of(pa.array(hosts, pa.string())), scored.graph.salt)


def gather(
    crawl: Crawl,
    scored: Scored,
    folder: Path,
    wanted: Any = ALL,
    *,
    files: int = 2,
    by_spark: bool = False,
    **settings: int,
) -> SupportFiles:
    """Gathers evidence from the rows of `host_scores`, in so many files."""
    folder.mkdir(parents=True, exist_ok=True)
    places = []
    cuts = np.linspace(0, scored.table.num_rows, files + 1).astype(int)
    for number in range(files):
        path = folder / f"scores-{number}.parquet"
        pq.write_table(scored.table.slice(cuts[number], cuts[number + 1] - cuts[number]), path)
        places.append(resolve(str(path)))
    if isinstance(wanted, list):
        wanted = host_ids(scored, wanted)
    with contextlib.nullcontext() if by_spark else tasks_in_process():
        return gather_support(
            crawl.spark,
            scored.graph,
            resolve(str(folder / "work")),
            places,
            crawl.lists().core,
            wanted,
            evidence(**settings),
            damping=scored.solved.solution.solve.damping,
            good_share=scored.solved.good_share,
        )


def assert_same_rows(found: list[dict[str, Any]], expected: list[dict[str, Any]]) -> None:
    """Numbers but for rounding, everything else exactly."""
    assert len(found) == len(expected)
    for first, second in zip(found, expected, strict=True):
        assert first.keys() == second.keys()
        for name, value in first.items():
            if isinstance(value, float):
                assert value == pytest.approx(second[name], rel=1e-9, abs=1e-12), name
            else:
                assert value == second[name], (name, first, second)


def rows_of(places: list[Any]) -> list[dict[str, Any]]:
    """Rows of Parquet work files."""
    return [row for place in places for row in pq.read_table(place.local_path).to_pylist()]
