"""The first README command on the bundled sample, and what the planted truth says of its result."""

import csv
import json
import subprocess
from collections import Counter
from pathlib import Path
from typing import Any

import pyarrow.parquet as pq
import pytest

from tests.jobs.desk import ROOT, user_environment


def run_sample(folder: Path) -> subprocess.CompletedProcess[str]:
    """The command as the README has it, with results outside the checkout."""
    elsewhere = [f"--set=run.output={folder}/tables", f"--set=run.work={folder}/work"]
    return subprocess.run(
        ["bash", "local_sample/run.sh", *elsewhere],
        cwd=ROOT,
        env=user_environment(),
        capture_output=True,
        text=True,
        check=False,
    )


@pytest.fixture(scope="module")
def sample(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str]:
    """The folder of the sample's results and what the command printed."""
    folder = tmp_path_factory.mktemp("sample")
    done = run_sample(folder)
    assert done.returncode == 0, done.stderr
    return folder / "tables", done.stdout


@pytest.fixture(scope="module")
def manifest(sample: tuple[Path, str]) -> dict[str, Any]:
    return dict(json.loads((sample[0] / "runs" / "2026-11-harbour.json").read_bytes()))


@pytest.fixture(scope="module")
def truth() -> dict[str, dict[str, str]]:
    """Role, shape and group of each host as they were planted."""
    with (ROOT / "local_sample" / "input" / "truth.csv").open(encoding="utf-8", newline="") as file:
        return {row["host"]: row for row in csv.DictReader(file)}


def rows_of(sample: tuple[Path, str], manifest: dict[str, Any], table: str) -> list[dict[str, Any]]:
    files = manifest["tables"][table]["files"]
    return [row for file in files for row in pq.ParquetFile(sample[0] / file["path"]).read().to_pylist()]


def test_it_prints_the_first_candidates_with_their_cautions(sample, manifest) -> None:
    lines = sample[1].splitlines()
    start = next(i for i, line in enumerate(lines) if line.startswith("rank  host"))
    candidates = rows_of(sample, manifest, "spam_candidates")
    groups = {row["group"]: row for row in rows_of(sample, manifest, "farm_groups")}
    for line, row in zip(lines[start + 1 : start + 11], candidates, strict=False):
        cells = line.split()
        assert (int(cells[0]), cells[1]) == (row["rank"], row["host"])
        assert cells[2] == f"{row['scaled_pagerank']:,.1f}"
        assert cells[3] == f"{row['relative_mass']:.3f}"
        group = groups.get(row["farm_group"])
        shown = "none" if group is None else f"of {group['hosts']:,} hosts, {group['shape']}"
        assert line.endswith(f"  {len(row['cautions'])}  {shown}")
    assert "A score is a lead, not a verdict; unknown is not spam." in lines
    assert str(sample[0] / "runs" / "2026-11-harbour.json") in sample[1]
    for name, table in manifest["tables"].items():
        assert f"{sample[0]}/{table['files'][0]['path'].rpartition('/')[0]}" in sample[1], name


def test_a_second_run_does_nothing_and_says_so(sample) -> None:
    done = run_sample(sample[0].parent)
    assert done.returncode == 0, done.stderr
    assert done.stderr.endswith(" run 2026-11-harbour is complete and unchanged: nothing to do\n")
    assert done.stderr.count("\n") == 1
    assert done.stdout == sample[1]


def test_the_graph_has_every_planted_host(sample, manifest, truth) -> None:
    assert {row["host"] for row in rows_of(sample, manifest, "host_scores")} == set(truth)


def test_candidates_against_the_planted_truth(sample, manifest, truth) -> None:
    candidates = {row["host"] for row in rows_of(sample, manifest, "spam_candidates")}
    found = Counter(truth[host]["role"] for host in candidates)
    farm = sum(found[role] for role in ("target", "booster", "feeder"))
    # An invented web: the shares say whether the program still does what it did, nothing of a real web.
    targets = {host for host, row in truth.items() if row["role"] == "target"}
    fed_by_core = {host for host in targets if truth[host]["shape"] == "abused_core"}
    assert len(candidates & (targets - fed_by_core)) / len(targets - fed_by_core) >= 0.85
    assert farm / len(candidates) >= 0.6
    # Communities beyond the core's reach are listed, too: unknown, not spam, and the rows say so.
    assert found["community"] >= 5
    for row in rows_of(sample, manifest, "spam_candidates"):
        unknown = any("unknown, not spam" in text for text in row["cautions"])
        assert unknown == (not row["core_reached"])
        if truth[row["host"]]["role"] == "community":
            assert unknown
    # The head of the list is what people look at.
    first = [row["host"] for row in rows_of(sample, manifest, "spam_candidates") if row["rank"] <= 20]
    assert sum(host in targets for host in first) >= 14


def test_an_abused_core_page_hides_its_farm(sample, manifest, truth) -> None:
    scores = {row["host"]: row for row in rows_of(sample, manifest, "host_scores")}
    hidden = [
        scores[h] for h, row in truth.items() if (row["role"], row["shape"]) == ("target", "abused_core")
    ]
    assert len(hidden) == 4
    assert all(row["scaled_pagerank"] >= 10 for row in hidden)
    assert all(row["relative_mass"] < 0.2 for row in hidden)
    negative = [row for row in hidden if row["trust"] > row["scaled_pagerank"]]
    assert negative
    # Without a listed booster nothing keeps the mass above p - t, and that is below 0.
    assert all(row["relative_mass"] < 0 for row in negative if row["known_spam_mass"] == 0)


def test_core_and_counts(sample, manifest) -> None:
    assert manifest["core"]["matched"] + manifest["core"]["unmatched"] == manifest["core"]["listed"]
    share = 0.85 * manifest["graph"]["hosts"] / manifest["core"]["matched"]
    assert manifest["core"]["core_start"] == pytest.approx(share, rel=1e-12)
    graph = manifest["graph"]
    dropped = ("rejected_rows", "not_followed_rows", "self_link_rows", "merged_rows")
    assert graph["rows"] == graph["edges"] + sum(graph[name] for name in dropped)
    assert sum(graph["rejected"].values()) == graph["rejected_rows"] > 1000
