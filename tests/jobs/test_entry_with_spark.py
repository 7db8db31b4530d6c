"""A tiny job as a user starts it: its own process, its own JVM, the same status by both ways."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]

# It says what it found on standard output, then refuses from inside a worker.
JOB = """
import sys
from sparkrank.entry import run_job
from sparkrank.errors import InputRefused

def refuse(row):
    raise InputRefused(f"block {row[0]}: expected nothing; found a row in {sys.executable}")

def body(context):
    spark = context.spark
    heap = spark.sparkContext._jvm.java.lang.Runtime.getRuntime().maxMemory()
    keys = ("spark.master", "spark.sql.session.timeZone", "spark.sql.ansi.enabled", "spark.ui.enabled")
    print(*(spark.conf.get(key) for key in keys), heap >> 30, flush=True)
    spark.range(1).rdd.foreach(refuse)

if __name__ == "__main__":
    sys.exit(run_job("tiny", "Refuses.", None, None, body, example="python tiny.py"))
"""


def start(tmp_path: Path, *before: str) -> subprocess.CompletedProcess[str]:
    job = tmp_path / "tiny.py"
    job.write_text(JOB)
    settings = {
        "run.id": "run-1",
        "run.output": str(tmp_path / "out"),
        "run.work": str(tmp_path / "work"),
        "input.edges": str(tmp_path / "edges"),
        "input.core": str(tmp_path / "core.csv"),
    }
    dropped = ("PYSPARK_PYTHON", "SPARK_LOCAL_IP")
    environment = {key: value for key, value in os.environ.items() if key not in dropped}
    environment["PYTHONPATH"] = str(ROOT)
    return subprocess.run(
        [*before, str(job), "--quiet", *(f"--set={key}={value}" for key, value in settings.items())],
        capture_output=True,
        text=True,
        env=environment,
        check=False,
    )


def test_under_plain_python_the_program_sets_what_spark_needs(tmp_path) -> None:
    done = start(tmp_path, sys.executable)
    lines = done.stderr.splitlines()
    assert done.returncode == 3, done.stderr
    assert lines[-1] == f"sparkrank: block 0: expected nothing; found a row in {sys.executable}"
    # The JVM itself prints the one line before; nobody can switch it off.
    assert [line for line in lines[:-1] if "incubator modules" not in line] == []
    master, zone, ansi, ui, heap_gib = done.stdout.split()
    assert (master, zone, ansi, ui) == ("local[*]", "UTC", "true", "false")
    assert 1 <= int(heap_gib) <= 8
    assert len(list((tmp_path / "out" / "outcomes").glob("run-1-*.json"))) == 1


@pytest.mark.slow
def test_under_spark_submit_the_status_is_the_same(tmp_path) -> None:
    import pyspark

    submit = Path(pyspark.__file__).parent / "bin" / "spark-submit"
    done = start(
        tmp_path,
        str(submit),
        *("--master", "local[2]", "--driver-memory", "1g", "--conf", "spark.ui.enabled=false"),
        *("--conf", f"spark.pyspark.python={sys.executable}", "--conf", "spark.driver.host=127.0.0.1"),
    )
    assert done.returncode == 3, done.stderr
    lines = [line for line in done.stderr.splitlines() if line.startswith("sparkrank: ")]
    assert lines == [f"sparkrank: block 0: expected nothing; found a row in {sys.executable}"]
    assert "local[2] UTC true" in done.stdout
    # What was given holds, and a heap that is the default one is said.
    assert "heap: expected 1.5 GiB or more for local mode; found 1024 MiB; " in done.stdout
