"""Jobs in processes of their own: by python, by spark-submit, killed on the way, without Java."""

import contextlib
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.jobs.desk import JOBS, ROOT, Desk, user_environment


def own_desk(finished: Desk, folder: Path) -> Desk:
    """The inputs and settings of the finished run, with results and work files of its own."""
    return Desk(folder=folder, inputs=finished.inputs, work=folder / "work", settings=finished.settings)


def kill_when(process: subprocess.Popen[str], seen: Callable[[], bool]) -> None:
    """SIGKILL the job, and nobody else, as soon as something is seen; wait until its JVM is gone, too."""
    deadline = time.monotonic() + 300
    while not seen():
        assert process.poll() is None, process.communicate()
        assert time.monotonic() < deadline
        time.sleep(0.01)
    process.kill()
    process.communicate()
    # The job leads its process group; the JVM ends once it sees that its starter is gone.
    while time.monotonic() < deadline:
        with contextlib.suppress(PermissionError):
            try:
                os.killpg(process.pid, 0)
            except ProcessLookupError:
                return
        time.sleep(0.05)
    raise AssertionError("the JVM of a killed job is still there")


def start_and_kill(desk: Desk, cwd: Path, seen: Callable[[], bool]) -> None:
    process = subprocess.Popen(
        desk.command("run_pipeline"),
        cwd=cwd,
        env=user_environment(),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    kill_when(process, seen)
    assert process.returncode == -signal.SIGKILL


def test_killed_and_started_again_from_another_folder(finished, tmp_path) -> None:
    desk = own_desk(finished, tmp_path / "desk")
    desk.folder.mkdir()
    # Tables are being written: data of a dead attempt, and no record of the step yet.
    start_and_kill(desk, tmp_path, lambda: bool(desk.attempts("host_scores")))
    (dead,) = desk.attempts("host_scores")
    assert not (desk.output / "runs").exists()
    done = desk.start_process(cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert desk.digests() == finished.digests()
    assert " is there already: " in done.stderr
    assert " solve: done before, " in done.stderr
    for table in desk.manifest()["tables"]:
        assert dead not in desk.attempts(table)
        assert len(desk.attempts(table)) == 1
    # One line a message; the JVM itself prints the one about its modules.
    lines = [line for line in done.stderr.splitlines() if "incubator modules" not in line]
    assert all(line[:8].replace(":", "").isdigit() for line in lines), done.stderr
    assert sorted(path.name for path in tmp_path.iterdir()) == ["desk"]


@pytest.mark.slow
@pytest.mark.parametrize(
    ("pattern", "files"),
    [
        *(("work/graphs/*/*.json", stage) for stage in range(1, 6)),
        ("work/solves/*/records/step-00002.json", 1),
        ("work/solves/*/records/solution.json", 1),
        ("out/steps/*/score_hosts.json", 1),
        ("out/spam_candidates/run_id=*/attempt=*", 1),
    ],
)
def test_killed_anywhere_the_next_run_ends_the_same(finished, tmp_path, pattern, files) -> None:
    desk = own_desk(finished, tmp_path)
    start_and_kill(desk, tmp_path, lambda: len(list(tmp_path.glob(pattern))) >= files)
    done = desk.start_process(cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert desk.digests() == finished.digests()
    assert all(len(desk.attempts(table)) == 1 for table in desk.manifest()["tables"])


@pytest.mark.parametrize(
    "master",
    # Executors of their own get nothing but what Spark sends them.
    ["local[3]", pytest.param("local-cluster[2,1,1024]", marks=pytest.mark.slow)],
)
def test_spark_submit_gives_the_same_tables(finished, tmp_path, monkeypatch, master) -> None:
    import pyspark

    monkeypatch.setenv("SPARK_WORKER_DIR", str(tmp_path / "executors"))
    desk = own_desk(finished, tmp_path)
    submit = Path(pyspark.__file__).parent / "bin" / "spark-submit"
    done = desk.start_process(
        str(submit),
        *("--master", master, "--driver-memory", "2g", "--conf", "spark.ui.enabled=false"),
        *("--conf", "spark.driver.host=127.0.0.1", "--conf", f"spark.pyspark.python={sys.executable}"),
        cwd=tmp_path,
    )
    assert done.returncode == 0, done.stderr
    assert desk.digests() == finished.digests()
    assert desk.outcomes()[-1]["status"] == "done"


@pytest.mark.parametrize("job", JOBS)
def test_help_tells_arguments_and_an_example(job) -> None:
    done = subprocess.run(
        [sys.executable, str(ROOT / "jobs" / f"{job}.py"), "--help"],
        capture_output=True,
        text=True,
        env={"PATH": ""},
        check=False,
    )
    assert (done.returncode, done.stderr) == (0, "")
    assert f"example: python jobs/{job}.py --config local_sample/config.toml" in done.stdout
    assert all(f"--{name}" in done.stdout for name in ("config", "set", "replace", "quiet"))


def without_java(folder: Path) -> dict[str, str]:
    """An environment with a shell's bare needs and no Java."""
    folder.mkdir()
    for name in ("bash", "dirname", "cksum", "cat"):
        found = shutil.which(name)
        assert found is not None
        (folder / name).symlink_to(found)
    environment = {key: value for key, value in user_environment().items() if key != "JAVA_HOME"}
    return {**environment, "PATH": str(folder)}


NO_JAVA = (
    "sparkrank: Java: expected version 17 or later; found none by PATH; "
    "install a JDK 17 or 21 and set JAVA_HOME to its folder\n"
)


def test_without_java_a_job_ends_with_one_line(finished, tmp_path) -> None:
    desk = own_desk(finished, tmp_path)
    done = subprocess.run(
        desk.command("run_pipeline"),
        env=without_java(tmp_path / "bin"),
        capture_output=True,
        text=True,
        check=False,
    )
    assert (done.returncode, done.stdout, done.stderr) == (1, "", NO_JAVA)
    assert desk.visible() == []
    assert desk.outcomes()[-1]["exit_status"] == 1


@pytest.mark.parametrize("script", ["local_sample/run.sh", "tests/run.sh"])
def test_without_java_a_script_ends_with_one_line(tmp_path, script) -> None:
    done = subprocess.run(
        ["bash", str(ROOT / script)],
        env=without_java(tmp_path / "bin"),
        capture_output=True,
        text=True,
        check=False,
    )
    assert (done.returncode, done.stdout, done.stderr) == (1, "", NO_JAVA)


def test_an_old_python_is_one_line(tmp_path) -> None:
    # A copy without .venv, in which only a Python of long ago is found.
    for name in ("local_sample/run.sh", ".ci/python.sh", "pyproject.toml"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        shutil.copy(ROOT / name, tmp_path / name)
    environment = without_java(tmp_path / "bin")
    del environment["SPARKRANK_PYTHON"]
    (tmp_path / "bin" / "head").symlink_to(shutil.which("head") or "")
    old = tmp_path / "bin" / "python3"
    old.write_text('#!/bin/sh\n[ "$1" = --version ] && echo Python 3.9.2 && exit 0\nexit 1\n')
    old.chmod(0o755)
    done = subprocess.run(
        ["bash", str(tmp_path / "local_sample" / "run.sh")],
        env=environment,
        capture_output=True,
        text=True,
        check=False,
    )
    assert (done.returncode, done.stdout) == (1, "")
    assert done.stderr == (
        "sparkrank: Python: expected version 3.11 or later in PATH; found Python 3.9.2; "
        "install it, or set SPARKRANK_PYTHON to one that has the project's packages\n"
    )
