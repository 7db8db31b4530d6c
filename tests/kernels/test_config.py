"""Configuration: defaults of the documented example, every refusal by its exact message, overrides."""

import dataclasses
import json
import os
import unicodedata
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.config import Config, describe_config, load_config
from sparkrank.config.sections import SECTIONS, settings_of
from sparkrank.errors import ConfigError

MINIMAL = """
[run]
id = "2026-11-harbour"
output = "out/tables"
work = "out/work"
[input]
edges = "input/edges"
core = "input/core.csv"
"""
REQUIRED = ["run.id=r", "run.output=/o", "run.work=/w", "input.edges=/e", "input.core=/c"]


def write(folder: Path, text: str | bytes) -> str:
    path = folder / "config.toml"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return str(path)


def refusal(path: str | None, *overrides: str, local_master: bool = True) -> str:
    with pytest.raises(ConfigError) as caught:
        load_config(path, overrides, local_master=local_master)
    assert caught.value.exit_status == 2
    message = str(caught.value)
    assert is_one_safe_line(message)
    return message


def is_one_safe_line(message: str) -> bool:
    return not [char for char in message if unicodedata.category(char) in ("Cc", "Cs", "Zl", "Zp")]


def test_defaults_are_the_documented_ones(tmp_path: Path) -> None:
    config = load_config(write(tmp_path, MINIMAL))
    assert config.as_dict() == {
        "run": {
            "id": "2026-11-harbour",
            "output": f"{tmp_path}/out/tables",
            "work": f"{tmp_path}/out/work",
        },
        "input": {
            "edges": f"{tmp_path}/input/edges",
            "core": f"{tmp_path}/input/core.csv",
            "known_spam": "",
            "hosts": "",
        },
        "names": {"suffix_sections": "icann+private", "extra_suffixes": []},
        "graph": {
            "node": "host",
            "weighting": "uniform",
            "follow_only": True,
            "max_rejected_share": 0.2,
        },
        "solve": {"damping": 0.85, "tolerance": 1e-6, "max_steps": 200, "max_columns": 8},
        "mass": {"good_share": 0.85},
        "candidates": {"min_scaled_pagerank": 10.0, "min_relative_mass": 0.5},
        "evidence": {
            "followed_links": 10_000,
            "all_followed_links": 16_777_216,
            "max_steps": 20,
            "listed_sources": 100,
        },
    }
    assert json.loads(json.dumps(config.as_dict())) == config.as_dict()


def test_defaults_pass_their_own_checks() -> None:
    for section in SECTIONS:
        for declared, default in settings_of(section).values():
            if default is not dataclasses.MISSING:
                assert declared.accepts(default)


def test_config_is_frozen() -> None:
    config = load_config(None, REQUIRED)
    with pytest.raises(dataclasses.FrozenInstanceError):
        config.solve.damping = 0.5  # type: ignore[misc]


def test_paths_count_from_the_file_and_uris_pass(tmp_path: Path) -> None:
    path = write(tmp_path, MINIMAL)
    config = load_config(os.path.relpath(path), ["input.edges=../e", "input.core=s3://crawl/core.csv"])
    assert config.input.edges == str(tmp_path.parent / "e")
    assert config.input.core == "s3://crawl/core.csv"
    assert load_config(None, [*REQUIRED, "input.edges=e"]).input.edges == f"{os.getcwd()}/e"


def test_byte_order_mark_is_no_part_of_the_file(tmp_path: Path) -> None:
    assert load_config(write(tmp_path, b"\xef\xbb\xbf" + MINIMAL.encode())).run.id == "2026-11-harbour"


def test_overrides_win_and_the_last_counts(tmp_path: Path) -> None:
    path = write(tmp_path, MINIMAL + "[solve]\ndamping = 0.5\n")
    config = load_config(path, ["solve.damping=0.6", "solve.damping=0.7", "run.id=2026-11-01"])
    assert (config.solve.damping, config.run.id) == (0.7, "2026-11-01")


@pytest.mark.parametrize(
    ("override", "section", "key", "value"),
    [
        ("solve.damping=0.5", "solve", "damping", 0.5),
        ("candidates.min_scaled_pagerank=3", "candidates", "min_scaled_pagerank", 3.0),
        ("candidates.min_scaled_pagerank=0", "candidates", "min_scaled_pagerank", 0.0),
        ("candidates.min_relative_mass=-1e9", "candidates", "min_relative_mass", -1e9),
        ("candidates.min_relative_mass=1", "candidates", "min_relative_mass", 1.0),
        ("mass.good_share=1", "mass", "good_share", 1.0),
        ("graph.max_rejected_share=0", "graph", "max_rejected_share", 0.0),
        ("graph.max_rejected_share=1.0", "graph", "max_rejected_share", 1.0),
        ("graph.follow_only=false", "graph", "follow_only", False),
        ("graph.node=domain", "graph", "node", "domain"),
        ('graph.node="domain"', "graph", "node", "domain"),
        ("solve.max_steps=1", "solve", "max_steps", 1),
        ("solve.max_columns=2", "solve", "max_columns", 2),
        ("run.id=2026", "run", "id", "2026"),
        ("run.id=true", "run", "id", "true"),
        ("input.known_spam=", "input", "known_spam", ""),
        ("input.known_spam=/a=b", "input", "known_spam", "/a=b"),
        (
            'names.extra_suffixes=["ac.example", "*.x.test"]',
            "names",
            "extra_suffixes",
            ("ac.example", "*.x.test"),
        ),
    ],
)
def test_accepted_overrides(override: str, section: str, key: str, value: object) -> None:
    found = getattr(getattr(load_config(None, [*REQUIRED, override]), section), key)
    assert found == value
    assert type(found) is type(value)


def test_reference_has_every_setting() -> None:
    reference = describe_config()
    names = [f"{section}.{key}" for section in SECTIONS for key in settings_of(section)]
    assert len(names) == 24
    for name in names:
        assert reference.count(f"  {name} (") == 1
    assert "run.id (required)" in reference
    assert 'input.hosts (default "")' in reference
    assert "solve.tolerance (default 1e-06)" in reference
    assert max(map(len, reference.splitlines())) <= 100


@given(st.text())
def test_any_override_is_used_or_refused_in_one_line(override: str) -> None:
    try:
        config = load_config(None, [*REQUIRED, override])
    except ConfigError as error:
        refused = str(error)
    else:
        assert isinstance(config, Config)
        return
    assert is_one_safe_line(refused)


@given(
    st.sampled_from([f"{section}.{key}" for section in SECTIONS for key in settings_of(section)]),
    st.one_of(st.text(), st.floats().map(str), st.integers().map(str), st.just("[[[")),
)
def test_any_value_is_of_its_type_or_refused_by_name(name: str, text: str) -> None:
    section, _, key = name.partition(".")
    try:
        config = load_config(None, [*REQUIRED, f"{name}={text}"])
    except ConfigError as error:
        refused = str(error)
    else:
        value = getattr(getattr(config, section), key)
        reference = getattr(getattr(load_config(None, REQUIRED), section), key)
        assert type(value) is type(reference)
        return
    assert refused.startswith(name)
    assert is_one_safe_line(refused)


@given(st.floats(min_value=0, max_value=1, exclude_min=True, exclude_max=True))
def test_numbers_survive_the_round_trip(damping: float) -> None:
    assert load_config(None, [*REQUIRED, f"solve.damping={damping!r}"]).solve.damping == damping
