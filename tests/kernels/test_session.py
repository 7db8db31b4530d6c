"""What is checked and decided before a JVM starts."""

import os
import sys
from pathlib import Path

import pytest

from sparkrank import session
from sparkrank.errors import SparkrankError


@pytest.fixture(autouse=True)
def plain_python(monkeypatch) -> None:
    for name in ("PYSPARK_GATEWAY_PORT", "PYSPARK_SUBMIT_ARGS", "SPARK_CONF_DIR", "SPARK_HOME", "MASTER"):
        monkeypatch.delenv(name, raising=False)


def fake_java(tmp_path: Path, text: str, status: int = 0) -> Path:
    java = tmp_path / "jdk" / "bin" / "java"
    java.parent.mkdir(parents=True)
    java.write_text(f"#!/bin/sh\ncat >&2 <<'END'\n{text}\nEND\nexit {status}\n")
    java.chmod(0o755)
    return java.parent.parent


REMEDY = "install a JDK 17 or 21 and set JAVA_HOME to its folder"


# First lines of `java -version` as the JDKs print them (written from memory).
@pytest.mark.parametrize(
    ("text", "found"),
    [
        ('java version "1.8.0_392"', "8"),
        ('openjdk version "11.0.21" 2023-10-17', "11"),
        ('openjdk version "16" 2021-03-16', "16"),
    ],
)
def test_a_java_that_is_too_old_is_one_line_with_the_remedy(tmp_path, monkeypatch, text, found) -> None:
    home = fake_java(tmp_path, text)
    monkeypatch.setenv("JAVA_HOME", str(home))
    with pytest.raises(SparkrankError) as refusal:
        session.check_java()
    assert str(refusal.value) == (
        f"Java: expected version 17 or later; found {found} at {home}/bin/java; {REMEDY}"
    )
    assert refusal.value.exit_status == 1


@pytest.mark.parametrize(
    "text",
    [
        'openjdk version "17.0.9" 2023-10-17',
        'openjdk version "21" 2023-09-19',
        'Picked up JAVA_TOOL_OPTIONS: -Xmx1g\nopenjdk version "25-ea" 2025-09-16',
    ],
)
def test_a_java_that_is_new_enough_passes(tmp_path, monkeypatch, text) -> None:
    monkeypatch.setenv("JAVA_HOME", str(fake_java(tmp_path, text)))
    session.check_java()


def test_a_missing_java_is_one_line_with_the_remedy(tmp_path, monkeypatch) -> None:
    monkeypatch.delenv("JAVA_HOME", raising=False)
    monkeypatch.setenv("PATH", str(tmp_path))
    with pytest.raises(SparkrankError) as refusal:
        session.check_java()
    assert str(refusal.value) == f"Java: expected version 17 or later; found none by PATH; {REMEDY}"


def test_a_java_home_without_java_is_named(tmp_path, monkeypatch) -> None:
    monkeypatch.setenv("JAVA_HOME", str(tmp_path))
    with pytest.raises(SparkrankError, match=f"found none by JAVA_HOME={tmp_path}; install"):
        session.check_java()


def test_a_java_that_fails_is_not_taken_for_one(tmp_path, monkeypatch) -> None:
    home = fake_java(tmp_path, "Error: could not open jvm.cfg", status=2)
    monkeypatch.setenv("JAVA_HOME", str(home))
    with pytest.raises(SparkrankError, match=r"which does not tell its version \(status 2\)"):
        session.check_java()


def test_an_old_pyspark_is_one_line_with_the_remedy(monkeypatch) -> None:
    import pyspark

    monkeypatch.setattr(pyspark, "__version__", "3.5.1")
    with pytest.raises(SparkrankError) as refusal:
        session.check_pyspark()
    assert str(refusal.value) == (
        f"PySpark: expected version 4.1 or later; found 3.5.1 in {os.path.dirname(pyspark.__file__)}; "
        "install it with: pip install 'sparkrank[local]'"
    )


def test_a_missing_pyspark_is_one_line_with_the_remedy(monkeypatch) -> None:
    monkeypatch.setitem(sys.modules, "pyspark", None)
    with pytest.raises(SparkrankError) as refusal:
        session.check_pyspark()
    assert str(refusal.value) == (
        f"PySpark: expected version 4.1 or later; found none in {sys.executable}; "
        "install it with: pip install 'sparkrank[local]'"
    )


def test_the_master_is_local_unless_something_says_otherwise(tmp_path, monkeypatch) -> None:
    assert session.master_is_local()
    monkeypatch.setenv("PYSPARK_SUBMIT_ARGS", "--master spark://host.test:7077 pyspark-shell")
    assert not session.master_is_local()
    monkeypatch.setenv("PYSPARK_SUBMIT_ARGS", "--conf spark.master=local[4] pyspark-shell")
    assert session.master_is_local()
    monkeypatch.delenv("PYSPARK_SUBMIT_ARGS")
    (tmp_path / "spark-defaults.conf").write_text("# ours\nspark.master   yarn\n")
    monkeypatch.setenv("SPARK_CONF_DIR", str(tmp_path))
    assert not session.master_is_local()


def test_what_the_user_set_wins_but_for_what_results_depend_on(tmp_path, monkeypatch) -> None:
    (tmp_path / "spark-defaults.conf").write_text(
        "spark.driver.memory 3g\nspark.sql.session.timeZone CET\nspark.ui.enabled true\n"
    )
    monkeypatch.setenv("SPARK_CONF_DIR", str(tmp_path))
    settings = session._own_settings(ui=False)
    assert "spark.driver.memory" not in settings
    assert "spark.ui.enabled" not in settings
    assert settings["spark.sql.session.timeZone"] == "UTC"
    assert session._own_settings(ui=True)["spark.ui.enabled"] == "true"


@pytest.mark.parametrize(
    ("memory_gib", "heap_gib"), [(2, 1), (16, 4), (256, 8)], ids=["small", "laptop", "server"]
)
def test_the_heap_is_a_quarter_of_memory_within_bounds(monkeypatch, memory_gib, heap_gib) -> None:
    sizes = {"SC_PAGE_SIZE": 4096, "SC_PHYS_PAGES": memory_gib * (1 << 30) // 4096}
    monkeypatch.setattr(os, "sysconf", sizes.__getitem__)
    # Whatever limit the machine of the tests has is not looked at.
    monkeypatch.setattr(Path, "read_text", lambda path: "max\n")
    assert session.heap_bytes() == heap_gib << 30


def test_a_containers_limit_counts_as_its_memory(monkeypatch) -> None:
    monkeypatch.setattr(os, "sysconf", {"SC_PAGE_SIZE": 4096, "SC_PHYS_PAGES": 1 << 24}.__getitem__)
    monkeypatch.setattr(Path, "read_text", lambda path: str(8 << 30))
    assert session.heap_bytes() == 2 << 30
