"""README.md says what the code says, and its examples run."""

import importlib.util
import math
import re
import tomllib
from pathlib import Path
from typing import Any

import pytest

from sparkrank import __version__
from sparkrank.config.sections import SECTIONS, settings_of
from sparkrank.kernels import shape
from sparkrank.names.canonical import REASONS
from sparkrank.tables import TABLES
from tests.jobs.desk import JOBS, ROOT, RUN
from tests.jobs.town import REJECTED

README = (ROOT / "README.md").read_text(encoding="utf-8")


def readme_script() -> Any:
    spec = importlib.util.spec_from_file_location("readme_parts", ROOT / ".ci" / "readme.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_parts_made_from_the_code_are_up_to_date() -> None:
    assert readme_script().with_parts(README) == README, "run: python .ci/readme.py"


def test_every_setting_table_and_reason_is_there() -> None:
    assert all(f"{section}.{key}" in README for section in SECTIONS for key in settings_of(section))
    assert all(f"`{column.name}`" in README for table in TABLES.values() for column in table.columns)
    met = {reason for _, _, reason, _ in REJECTED} | {"not_in_graph", "not_a_domain"}
    assert all(f"| `{reason}` |" in README for reason in met | set(REASONS))
    assert all(f"jobs/{job}.py" in README for job in JOBS)


def test_commands_name_files_that_are_there() -> None:
    for name in re.findall(r"bash (\S+\.sh)", README):
        assert (ROOT / name).is_file(), name


def test_the_version_is_the_same_in_both_places() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    assert project["version"] == __version__


def test_scores_are_never_met_without_their_cautions() -> None:
    for words in ("A score is a lead, not a verdict", "Unknown is not spam"):
        # Before the first command and again in the tables' reference.
        assert README.index(words) < README.index("```")
        assert README.count(words) >= 2


def test_the_formula_of_the_order_is_the_one_in_use(finished) -> None:
    """By the columns of the published rows, and in words beside the code."""
    formula = "priority = s · (V·H)^(1/2) · (1 - d/5) · (1 - 4h/5) · r · log10(1 + M/(1/2 + I))"
    assert formula in README
    assert formula in (shape.__doc__ or "")
    rows = finished.table("spam_candidates")
    assert {row["core_reached"] for row in rows} == {True, False}
    for row in rows:
        alike = math.sqrt(row["source_variety"] * row["alike_sources"])
        amount = math.log10(1 + row["bound_amount"] / (0.5 + row["independent_breadth"]))
        rest = (
            (1 - row["own_domain_share"] / 5)
            * (1 - 4 * row["handed_on_share"] / 5)
            * (1 if row["core_reached"] else 0.85)
        )
        assert row["priority"] == pytest.approx(row["bound_share"] * alike * rest * amount, rel=1e-12)
        assert row["priority"] > 0


def test_the_example_for_pyarrow_runs(finished, capsys) -> None:
    exec(example(finished.output, "pq.read_table"), {})
    assert capsys.readouterr().out.splitlines()[0].startswith("1 target.test ")


def test_the_example_for_spark_runs(finished, spark, capsys) -> None:
    exec(example(finished.output, "spark.sql"), {"spark": spark})
    shown = capsys.readouterr().out
    assert "target.test" in shown
    assert "island.example" not in shown


def example(output: Path, with_words: str) -> str:
    """The README's one Python example with these words, for other results."""
    (code,) = [part for part in re.findall(r"```python\n(.*?)```", README, re.DOTALL) if with_words in part]
    for there, here in (("local_sample/out/tables", str(output)), ("2026-11-harbour", RUN)):
        assert there in code
        code = code.replace(there, here)
    return code
