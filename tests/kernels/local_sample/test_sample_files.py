"""The committed input files: made by the generator, small, of reserved names, and what they claim to be."""

import csv
import re
import tomllib
from collections import Counter
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest
from scenario import FARM_SHAPES, LOOKALIKES, Scenario, Settings, generate, write_inputs
from scenario.honest import SLICES

from sparkrank.names.canonical import canonical_host

PARTS = ("part=0", "part=1", "part=2", "part=3")


def edge_file(folder: Path, part: str) -> Path:
    return folder / "edges" / "crawl=2026-11" / part / "links.parquet"


@pytest.fixture(scope="module")
def rows(sample_folder: Path) -> list[tuple[str | None, str | None, int | None, str | None]]:
    tables = [pq.ParquetFile(edge_file(sample_folder / "input", part)).read() for part in PARTS]
    table = pa.concat_tables(tables)
    return list(zip(*(table[name].to_pylist() for name in ("src", "dst", "links", "rel")), strict=True))


@pytest.fixture(scope="module")
def canonical(
    rows: list[tuple[str | None, str | None, int | None, str | None]],
) -> dict[str | None, str | None]:
    values = {value for source, destination, _, _ in rows for value in (source, destination)}
    return {value: None if value is None else canonical_host(value).host for value in values}


def test_the_generator_makes_the_committed_files(
    scenario: Scenario, sample_folder: Path, tmp_path: Path
) -> None:
    write_inputs(scenario, tmp_path)
    made = sorted(path.relative_to(tmp_path) for path in tmp_path.rglob("*") if path.is_file())
    committed = sample_folder / "input"
    assert made == sorted(path.relative_to(committed) for path in committed.rglob("*") if path.is_file())
    for path in made:
        if path.suffix == ".csv":
            assert (tmp_path / path).read_bytes() == (committed / path).read_bytes(), path
        else:
            # Rows, not bytes: another release of pyarrow may write other bytes.
            assert pq.ParquetFile(tmp_path / path).read().equals(pq.ParquetFile(committed / path).read()), (
                path
            )


def test_the_same_settings_give_the_same_bytes(scenario: Scenario, tmp_path: Path) -> None:
    again = generate(Settings())
    for folder, one in (("first", scenario), ("second", again)):
        write_inputs(one, tmp_path / folder)
    for part in PARTS:
        first, second = (edge_file(tmp_path / folder, part) for folder in ("first", "second"))
        assert first.read_bytes() == second.read_bytes()


def test_the_files_stay_small(sample_folder: Path) -> None:
    sizes = [path.stat().st_size for path in (sample_folder / "input").rglob("*") if path.is_file()]
    assert sum(sizes) <= 4_000_000


def test_edge_columns(sample_folder: Path) -> None:
    for part in PARTS:
        schema = pq.ParquetFile(edge_file(sample_folder / "input", part)).schema_arrow
        assert {field.name: str(field.type) for field in schema} == {
            "src": "string",
            "dst": "string",
            "links": "int64",
            "rel": "string",
        }


def test_all_names_are_reserved(scenario: Scenario) -> None:
    # RFC 2606 and 6761 for names, RFC 5737 and 3849 for addresses.
    reserved = re.compile(
        r".*\.(example|test)|localhost|192\.0\.2\.\d+|198\.51\.100\.\d+|\[2001:db8::[0-9a-f]+\]"
    )
    assert [name for name in scenario.graph.hosts if not reserved.fullmatch(name)] == []


def test_the_rows_mean_the_graph(
    scenario: Scenario,
    rows: list[tuple[str | None, str | None, int | None, str | None]],
    canonical: dict[str | None, str | None],
) -> None:
    # Read the rows one by one, by the rules for edges and with the program's own names, and compare with
    # the graph that the generator planted before it spoilt the spelling.
    hosts, pairs = set(), set()
    rejected = 0
    for source_value, destination_value, links, rel in rows:
        source, destination = canonical[source_value], canonical[destination_value]
        if source is None or destination is None or links is None or links <= 0:
            rejected += 1
            continue
        hosts |= {source, destination}
        marks = set(re.split(r"[\s,]+", (rel or "").lower()))
        if not marks & {"nofollow", "ugc", "sponsored"} and source != destination:
            pairs.add((source, destination))
    graph = scenario.graph
    assert hosts == set(graph.hosts)
    planted = zip(graph.sources.tolist(), graph.destinations.tolist(), strict=True)
    assert pairs == {(graph.hosts[source], graph.hosts[destination]) for source, destination in planted}
    assert 0.005 < rejected / len(rows) < 0.02


def test_the_dirt_is_there(
    rows: list[tuple[str | None, str | None, int | None, str | None]],
    canonical: dict[str | None, str | None],
) -> None:
    reasons = Counter(
        canonical_host(value).reason
        for value, host in canonical.items()
        if value is not None and host is None
    )
    assert len(reasons) >= 8
    values = set(canonical)
    assert None in values
    assert "" in values
    assert max(len(value) for value in values if value is not None) == 10_000
    assert any(value is not None and value.startswith("=HYPERLINK") for value in values)
    rels = {rel for *_, rel in rows}
    assert {None, "nofollow", "UGC", "sponsored noopener", "NoFollow, External"} <= rels
    # Repeated in other partitions, and hosts that link to themselves.
    pairs = Counter((canonical[source], canonical[destination]) for source, destination, _, _ in rows)
    assert sum(count > 1 for count in pairs.values()) > 5_000
    assert sum(source is not None and source == destination for source, destination in pairs) > 20


def test_truth_covers_every_host_and_every_shape(scenario: Scenario) -> None:
    truth = scenario.truth
    assert truth["host"].to_pylist() == list(scenario.graph.hosts)
    assert len(set(scenario.graph.hosts)) == truth.num_rows
    roles = set(truth["role"].to_pylist())
    assert roles == {"target", "booster", "feeder", "abused", "lookalike", "community", "good"}
    shapes = set(truth["shape"].to_pylist())
    assert set(FARM_SHAPES) | set(LOOKALIKES) <= shapes
    farms = {
        (shape, group)
        for role, shape, group in zip(
            *(truth[name].to_pylist() for name in ("role", "shape", "group")), strict=True
        )
        if role == "target"
    }
    assert Counter(shape for shape, _ in farms) == dict.fromkeys(FARM_SHAPES, 4)


def test_the_lists(scenario: Scenario, sample_folder: Path) -> None:
    with (sample_folder / "input" / "core.csv").open(encoding="utf-8", newline="") as file:
        entries = list(csv.DictReader(file))
    assert list(entries[0]) == ["host", "slice", "weight", "reviewed_on", "reviewer", "note"]
    assert {entry["slice"] for entry in entries} == set(SLICES)
    graph = scenario.graph
    planted = {graph.hosts[host] for hosts in graph.core.values() for host in hosts.tolist()}
    listed = {canonical_host(entry["host"]).host for entry in entries}
    assert planted <= listed
    assert len(listed - planted) == 3, "three entries are in no crawl"
    assert sum(entry["host"] not in planted for entry in entries) > 10, "entries in other spellings"
    roles = dict(zip(graph.hosts, scenario.truth["role"].to_pylist(), strict=True))
    with (sample_folder / "input" / "known_spam.csv").open(encoding="utf-8", newline="") as file:
        known = [entry["host"] for entry in csv.DictReader(file)]
    assert len(known) > 100
    assert {roles[host] for host in known} <= {"target", "booster", "feeder"}
    assert not planted & set(known)


def test_the_configuration_names_these_files(sample_folder: Path) -> None:
    config = tomllib.loads((sample_folder / "config.toml").read_text(encoding="utf-8"))
    for key in ("edges", "core", "known_spam"):
        assert (sample_folder / config["input"][key]).exists(), key
    assert "pages-harbourhost.example" in config["names"]["extra_suffixes"]
    assert "driftpages.example" not in config["names"]["extra_suffixes"]
