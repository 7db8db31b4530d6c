"""Configuration: every refusal by its exact message."""

from pathlib import Path

import pytest

from sparkrank.config import load_config
from tests.kernels.test_config import MINIMAL, REQUIRED, refusal, write


@pytest.mark.parametrize(
    ("override", "message"),
    [
        (
            "solve.damping=0",
            "expected a number above 0 and below 1, found 0; change it or leave it out for 0.85",
        ),
        (
            "solve.damping=1.0",
            "expected a number above 0 and below 1, found 1.0; change it or leave it out for 0.85",
        ),
        (
            "solve.damping=nan",
            "expected a number above 0 and below 1, found nan; change it or leave it out for 0.85",
        ),
        (
            "solve.damping=true",
            "expected a number above 0 and below 1, found true; change it or leave it out for 0.85",
        ),
        (
            "solve.damping=high",
            'expected a number above 0 and below 1, found "high"; change it or leave it out for 0.85',
        ),
        (
            "solve.damping=",
            "expected a number above 0 and below 1, found an empty text; change it or leave it out for 0.85",
        ),
        (
            "mass.good_share=0",
            "expected a number above 0 and at most 1, found 0; change it or leave it out for 0.85",
        ),
        (
            "mass.good_share=1.01",
            "expected a number above 0 and at most 1, found 1.01; change it or leave it out for 0.85",
        ),
        (
            "candidates.min_scaled_pagerank=-0.1",
            "expected a number of at least 0, found -0.1; change it or leave it out for 10.0",
        ),
        (
            "candidates.min_scaled_pagerank=inf",
            "expected a number of at least 0, found inf; change it or leave it out for 10.0",
        ),
        (
            "candidates.min_relative_mass=1.5",
            "expected a number of at most 1, found 1.5; change it or leave it out for 0.5",
        ),
        (
            "candidates.min_relative_mass=-inf",
            "expected a number of at most 1, found -inf; change it or leave it out for 0.5",
        ),
        ("solve.tolerance=0.0", "expected a number above 0, found 0.0; change it or leave it out for 1e-06"),
        (
            "solve.max_steps=0",
            "expected a whole number of at least 1, found 0; change it or leave it out for 200",
        ),
        (
            "solve.max_steps=2.0",
            "expected a whole number of at least 1, found 2.0; change it or leave it out for 200",
        ),
        (
            "solve.max_columns=1",
            "expected a whole number of at least 2, found 1; change it or leave it out for 8",
        ),
        (
            "solve.max_columns=true",
            "expected a whole number of at least 2, found true; change it or leave it out for 8",
        ),
        (
            "graph.max_rejected_share=-0.1",
            "expected a number from 0 to 1, found -0.1; change it or leave it out for 0.2",
        ),
        (
            "graph.max_rejected_share=1.1",
            "expected a number from 0 to 1, found 1.1; change it or leave it out for 0.2",
        ),
        ("graph.follow_only=1", "expected true or false, found 1; change it or leave it out for true"),
        (
            "graph.follow_only=True",
            'expected true or false, found "True"; change it or leave it out for true',
        ),
        (
            "graph.node=page",
            'expected "host" or "domain", found "page"; change it or leave it out for "host"',
        ),
        (
            "graph.weighting=log",
            'expected "uniform" or "links", found "log"; change it or leave it out for "uniform"',
        ),
        (
            "names.suffix_sections=private",
            'expected "icann+private" or "icann", found "private"; '
            'change it or leave it out for "icann+private"',
        ),
        (
            "names.extra_suffixes=ac.example",
            'expected a list of texts such as ["pages.example", "*.shops.example"], none empty, '
            'found "ac.example"; change it or leave it out for []',
        ),
        (
            'names.extra_suffixes=["a", 1]',
            'expected a list of texts such as ["pages.example", "*.shops.example"], none empty, '
            'found ["a", 1]; change it or leave it out for []',
        ),
        ("run.output=", "expected a path or URI, found an empty text; change it"),
        ("input.core=a\nb", 'expected a path or URI, found "a\\x0ab"; change it'),
    ],
)
def test_refused_values(override: str, message: str) -> None:
    name = override.partition("=")[0]
    assert refusal(None, *REQUIRED, override) == f"{name} in --set: {message}"


@pytest.mark.parametrize(
    "run_id", ["", ".", "..", "../x", "a/b", "A", "-a", "_a", "a" * 65, "a\n", "ä", "a b"]
)
def test_run_id_cannot_climb_out(run_id: str) -> None:
    shown = f'"{run_id}"'.replace("\n", "\\x0a") if run_id else "an empty text"
    assert refusal(None, *REQUIRED, f"run.id={run_id}") == (
        "run.id in --set: expected 1 to 64 of a-z, 0-9, '.', '_' and '-', the first a letter or digit, "
        f"found {shown}; change it"
    )


def test_whole_numbers_of_any_length_are_refused_in_words(tmp_path: Path) -> None:
    path = write(tmp_path, MINIMAL + f"[solve]\ndamping = {'9' * 4000}\n")
    assert refusal(path) == (
        f"solve.damping in {path}: expected a number above 0 and below 1, "
        "found a whole number of more than 40 digits; change it or leave it out for 0.85"
    )


def test_unknown_names_come_with_the_nearest(tmp_path: Path) -> None:
    path = write(tmp_path, MINIMAL + "[solve]\ndampning = 0.5\n")
    assert refusal(path) == (
        f"solve.dampning in {path}: expected one of damping, tolerance, max_steps, max_columns, "
        "found an unknown key; did you mean solve.damping?"
    )
    path = write(tmp_path, MINIMAL + "[candidate]\n")
    assert refusal(path) == (
        f"section candidate in {path}: expected one of run, input, names, graph, solve, mass, candidates, "
        "evidence, found an unknown section; did you mean candidates?"
    )
    path = write(tmp_path, "damping = 0.5\n" + MINIMAL)
    assert refusal(path) == (
        f"damping in {path}: expected every key under a section, found it outside; "
        "did you mean solve.damping?"
    )
    path = write(tmp_path, "solve = 0.5\n" + MINIMAL)
    assert refusal(path) == (
        f"section solve in {path}: expected a table, found a single value; write [solve] on its own line"
    )
    assert refusal(None, "mass.damping=0.5") == (
        "mass.damping in --set: expected one of good_share, found an unknown key; did you mean solve.damping?"
    )
    assert refusal(None, "zzzz.qqqq=1") == (
        "section zzzz in --set: expected one of run, input, names, graph, solve, mass, candidates, "
        "evidence, found an unknown section; remove it"
    )


@pytest.mark.parametrize(
    "override", ["", "damping", "damping=1", "solve=1", "solve.damping", "a.b.c=1", "=1"]
)
def test_overrides_of_another_form(override: str) -> None:
    assert refusal(None, override) == (
        f'--set "{override}": expected section.key=value, found another form; '
        "write for example --set solve.damping=0.85"
    )


def test_missing_required_key() -> None:
    assert refusal(None, *REQUIRED[1:]) == (
        "run.id is missing: expected 1 to 64 of a-z, 0-9, '.', '_' and '-', the first a letter or digit, "
        "found nothing; write it under [run] in the configuration or give --set run.id=…"
    )
    assert refusal(None, *REQUIRED[:4]) == (
        "input.core is missing: expected a path or URI, found nothing; "
        "write it under [input] in the configuration or give --set input.core=…"
    )


def test_unreadable_files(tmp_path: Path) -> None:
    path = str(tmp_path / "none.toml")
    assert refusal(path) == f"configuration {path}: expected a TOML file, found nothing there; check --config"
    assert refusal(str(tmp_path)) == (
        f"configuration {tmp_path}: expected a readable TOML file, found: Is a directory; correct the file"
    )
    path = write(tmp_path, "[run\n")
    assert refusal(path) == (
        f"configuration {path}: expected a readable TOML file, "
        "found: Expected ']' at the end of a table declaration (at line 1, column 5); correct the file"
    )
    path = write(tmp_path, b"\xff\xfe[run]")
    assert refusal(path).startswith(
        f"configuration {path}: expected a readable TOML file, found: 'utf-8' codec"
    )
    path = write(tmp_path, f"x = {'[' * 5000}")
    assert refusal(path).startswith(f"configuration {path}: expected a readable TOML file, found: ")


def test_relative_paths_need_a_local_master(tmp_path: Path) -> None:
    assert refusal(write(tmp_path, MINIMAL), local_master=False) == (
        'run.output: expected an absolute path or a URI, found "out/tables"; '
        "relative paths work with a local master only"
    )
    assert load_config(None, REQUIRED, local_master=False).run.work == "/w"


def test_places_out_of_reach_are_refused_by_name() -> None:
    assert refusal(None, *REQUIRED, "run.output=ftp://x/y").startswith("run.output: ftp://x/y: expected ")
