"""Mistakes that are found before Spark: the one line, the status, and nothing half-written."""

from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from tests.jobs.desk import JOBS, Desk
from tests.jobs.town import write_town

pytestmark = pytest.mark.usefixtures("no_spark")

WRITE_AGAIN = "; write it again, or hide it with a name that begins with _"


@pytest.fixture
def desk(tmp_path: Path) -> Desk:
    write_town(tmp_path)
    return Desk.at(tmp_path)


def refused(desk: Desk, capsys, status: int, line: str, job: str = "run_pipeline") -> None:
    """The job ends with the status and exactly this line, says so in its outcome, and shows no run."""
    assert desk.start(job) == status
    assert capsys.readouterr().err == f"sparkrank: {line}\n"
    assert desk.visible() == []
    if status != 2:
        (outcome,) = desk.outcomes()
        assert (outcome["exit_status"], outcome["message"], outcome["job"]) == (status, line, job)


@pytest.mark.parametrize("job", JOBS)
def test_missing_edges(desk, capsys, job) -> None:
    path = desk.inputs / "edges.parquet"
    path.unlink()
    line = f"input.edges at {path}: expected a file or folder, found nothing there; check the path"
    refused(desk, capsys, 3, line, job)


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (b"", "an empty file"),
        (b"src,dst\na.example,b.example\n", "a file of another format"),
        (None, "a file that is cut short (its footer is missing)"),
    ],
    ids=["empty", "text", "truncated"],
)
def test_edges_that_are_no_parquet(desk, capsys, content, found) -> None:
    path = desk.inputs / "edges.parquet"
    path.write_bytes(path.read_bytes()[:-100] if content is None else content)
    line = (
        f"input.edges at {path}: edges.parquet: expected a readable Parquet file, found: {found}{WRITE_AGAIN}"
    )
    refused(desk, capsys, 3, line)


def test_one_truncated_file_of_many_is_named(desk, capsys) -> None:
    folder = desk.inputs / "edges"
    folder.mkdir()
    whole = (desk.inputs / "edges.parquet").read_bytes()
    (folder / "part-0.parquet").write_bytes(whole)
    (folder / "part-1.parquet").write_bytes(whole[: len(whole) // 2])
    line = (
        f"input.edges at {folder}: part-1.parquet: expected a readable Parquet file, "
        f"found: a file that is cut short (its footer is missing){WRITE_AGAIN}"
    )
    refused(desk.having(input__edges=str(folder)), capsys, 3, line)


def test_an_empty_folder_of_edges(desk, capsys) -> None:
    folder = desk.inputs / "none"
    folder.mkdir()
    line = f"input.edges at {folder}: expected at least one file, found an empty folder; check the path"
    refused(desk.having(input__edges=str(folder)), capsys, 3, line)


TEXT, NUMBER = pa.string(), pa.int64()


@pytest.mark.parametrize(
    ("columns", "end"),
    [
        ({"src": TEXT, "dst": TEXT}, ": expected at least one row, found none; check the path"),
        (
            {"source": TEXT, "dst": TEXT},
            ": edges.parquet: expected a column src (text), found source, dst; name the column src",
        ),
        (
            {"src": TEXT, "dst": NUMBER},
            ": edges.parquet: expected column dst to be text, found int64; convert the column",
        ),
        (
            {"src": TEXT, "dst": TEXT, "links": pa.float64()},
            ": edges.parquet: expected column links to be a whole number, found double; convert the column",
        ),
        (
            {"src": TEXT, "dst": TEXT, "rel": NUMBER},
            ": edges.parquet: expected column rel to be text, found int64; convert the column",
        ),
    ],
    ids=["no rows", "no src", "dst of numbers", "links of fractions", "rel of numbers"],
)
def test_edges_of_another_form(desk, capsys, columns, end) -> None:
    path = desk.inputs / "edges.parquet"
    pq.write_table(pa.schema(columns).empty_table(), path)
    refused(desk, capsys, 3, f"input.edges at {path}{end}")


@pytest.mark.parametrize(
    ("content", "end"),
    [
        (None, "expected a file or folder, found nothing there; check the path"),
        (
            "",
            "expected a header row with a column host, found an empty file; "
            "begin the list with: host or host,slice,weight",
        ),
        (
            "town-0.example\ntown-1.example\n",
            "expected a header row with a column host, found town-0.example; "
            "begin the list with: host or host,slice,weight",
        ),
        (
            "host\n",
            "expected at least one usable host, found 0 rows, none usable; "
            "trust starts from these hosts, add some",
        ),
        (
            "host\nno host\n",
            "expected at least one usable host, found 1 rows, none usable, "
            'the first of them "no host": not_bare; trust starts from these hosts, add some',
        ),
        (
            "host,slice\ntown-0.example,north\nTown-0.Example.,south\n",
            "expected one slice a host, found town-0.example "
            'in "north" (row 2) and "south" (row 3); keep one',
        ),
        (
            "host,weight\ntown-0.example,-1\n",
            'expected a weight above 0, found "-1" in row 2; correct it or leave it empty for 1',
        ),
    ],
    ids=["missing", "empty", "no header", "header only", "no host in it", "two slices", "weight"],
)
def test_a_core_that_cannot_be_used(desk, capsys, content, end) -> None:
    path = desk.inputs / "core.csv"
    path.unlink()
    if content is not None:
        path.write_text(content)
    refused(desk, capsys, 3, f"input.core at {path}: {end}")


def test_a_host_in_core_and_known_spam(desk, capsys) -> None:
    spam = desk.inputs / "spam.csv"
    spam.write_text("host\nbooster-0.test\ntown-3.example\n")
    line = (
        "input.core and input.known_spam: expected no host in both, found town-3.example "
        "(row 3 and row 3); remove it from one of them"
    )
    refused(desk.having(input__known_spam=str(spam)), capsys, 3, line)


@pytest.mark.parametrize(
    ("key", "value", "end"),
    [
        (
            "solve.damping",
            "1",
            "expected a number above 0 and below 1, found 1; change it or leave it out for 0.85",
        ),
        (
            "solve.damping",
            "0",
            "expected a number above 0 and below 1, found 0; change it or leave it out for 0.85",
        ),
        (
            "mass.good_share",
            "0",
            "expected a number above 0 and at most 1, found 0; change it or leave it out for 0.85",
        ),
        (
            "mass.good_share",
            "1.01",
            "expected a number above 0 and at most 1, found 1.01; change it or leave it out for 0.85",
        ),
        (
            "run.id",
            "../elsewhere",
            "expected 1 to 64 of a-z, 0-9, '.', '_' and '-', the first a letter or digit, "
            'found "../elsewhere"; change it',
        ),
    ],
)
@pytest.mark.parametrize("job", JOBS)
def test_values_out_of_range(desk, capsys, job, key, value, end) -> None:
    refused(desk.having(**{key: value}), capsys, 2, f"{key} in --set: {end}", job)
    assert not desk.output.exists()


def test_unknown_keys_in_file_and_argument(desk, capsys) -> None:
    line = (
        "solve.dampening in --set: expected one of damping, tolerance, max_steps, max_columns, "
        "found an unknown key; did you mean solve.damping?"
    )
    refused(desk.having(solve__dampening="0.85"), capsys, 2, line)
    config = desk.inputs / "town.toml"
    config.write_text("[solver]\ndamping = 0.85\n")
    assert desk.start("run_pipeline", "--config", str(config)) == 2
    assert capsys.readouterr().err == (
        f"sparkrank: section solver in {config}: expected one of run, input, names, graph, solve, mass, "
        "candidates, evidence, found an unknown section; did you mean solve?\n"
    )
    assert not desk.output.exists()
