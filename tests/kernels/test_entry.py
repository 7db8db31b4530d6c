"""The frame of a job without Spark: statuses, the one line, the outcome, the order of checks."""

import json
import os
import sys
from pathlib import Path
from typing import Any

import pytest

from sparkrank import entry
from sparkrank.config import Config
from sparkrank.entry import JobContext, run_job
from sparkrank.errors import InputRefused, NotConverged, RunHeld
from sparkrank.places import resolve
from sparkrank.publish.lock import hold_run


@pytest.fixture(autouse=True)
def no_runtime(monkeypatch) -> None:
    """These jobs need no Java; what `check_runtime` says is tested with the session."""
    monkeypatch.setattr(entry, "check_runtime", lambda: None)


def arguments(tmp_path: Path, *more: str) -> list[str]:
    settings = {
        "run.id": "run-1",
        "run.output": str(tmp_path / "out"),
        "run.work": str(tmp_path / "work"),
        "input.edges": str(tmp_path / "edges"),
        "input.core": str(tmp_path / "core.csv"),
    }
    return [*(f"--set={key}={value}" for key, value in settings.items()), *more]


def run(argv: list[str], body, **more: Any) -> int:
    return run_job("test_job", "A job of the tests.", argv, None, body, example="python jobs/x.py", **more)


def outcome(tmp_path: Path) -> dict[str, Any]:
    (path,) = (tmp_path / "out" / "outcomes").glob("run-1-*.json")
    return dict(json.loads(path.read_bytes()))


def nothing(context: JobContext) -> None:
    return


def test_a_job_that_is_done_says_so_in_its_outcome(tmp_path, capsys) -> None:
    seen: list[JobContext] = []
    assert run(arguments(tmp_path, "--replace"), seen.append) == 0
    assert seen[0].replace
    assert seen[0].run.run_id == seen[0].config.run.id == "run-1"
    found = outcome(tmp_path)
    assert (found["exit_status"], found["status"], found["message"]) == (0, "done", "")
    assert (found["job"], found["attempt"]) == ("test_job", seen[0].run.attempt_id)
    assert capsys.readouterr().err == ""


@pytest.mark.parametrize(
    ("error", "status", "line"),
    [
        (InputRefused("edges: two\nlines"), 3, "sparkrank: edges: two lines\n"),
        (NotConverged("not yet"), 4, "sparkrank: not yet\n"),
        (RunHeld("held by a gate"), 6, "sparkrank: held by a gate\n"),
        (
            KeyboardInterrupt(),
            130,
            "sparkrank: test_job: interrupted; run it again to go on from the last finished step\n",
        ),
    ],
)
def test_a_failure_is_one_line_and_the_status_of_its_kind(tmp_path, capsys, error, status, line) -> None:
    def body(context: JobContext) -> None:
        raise error

    assert run(arguments(tmp_path), body) == status
    assert capsys.readouterr().err == line
    found = outcome(tmp_path)
    assert found["exit_status"] == status
    assert f"sparkrank: {found['message']}\n" == line


def test_an_unexpected_error_is_one_line_and_its_traceback_is_kept(tmp_path, capsys) -> None:
    def body(context: JobContext) -> None:
        raise KeyError("first\nsecond")

    assert run(arguments(tmp_path), body) == 1
    assert capsys.readouterr().err == (
        "sparkrank: test_job: unexpected KeyError: 'first\\nsecond'; "
        f"the traceback is in {tmp_path}/out/outcomes (or add --debug)\n"
    )
    assert "Traceback" in outcome(tmp_path)["details"]


def test_debug_shows_the_traceback(tmp_path, capsys) -> None:
    assert run(arguments(tmp_path, "--debug"), lambda context: 1 / 0) == 1  # type: ignore[arg-type,return-value]
    assert "ZeroDivisionError: division by zero\n" in capsys.readouterr().err


def test_a_refusal_by_a_worker_keeps_its_status_and_words(tmp_path, capsys) -> None:
    def body(context: JobContext) -> None:
        raise RuntimeError(
            "An exception was thrown from the Python worker:\nTraceback (most recent call last):\n"
            '  File "x.py", line 1, in f\nsparkrank.errors.InputRefused: block 3: expected x; found y\n'
        )

    assert run(arguments(tmp_path), body) == 3
    assert capsys.readouterr().err == "sparkrank: block 3: expected x; found y\n"


@pytest.mark.parametrize(
    ("argv", "line"),
    [
        (["--nonsense"], "sparkrank: arguments: unrecognized arguments: --nonsense; see --help\n"),
        (["--config"], "sparkrank: arguments: argument --config: expected one argument; see --help\n"),
    ],
)
def test_wrong_arguments_are_one_line(capsys, argv, line) -> None:
    assert run(argv, nothing) == 2
    assert capsys.readouterr().err == line


def test_a_wrong_value_is_refused_before_anything_is_made(tmp_path, capsys) -> None:
    assert run(arguments(tmp_path, "--set", "solve.damping=1.5"), nothing) == 2
    error = capsys.readouterr().err
    assert error.startswith("sparkrank: solve.damping in --set: ")
    assert error.count("\n") == 1
    assert os.listdir(tmp_path) == []


def test_help_names_the_example(capsys) -> None:
    assert run(["--help"], nothing) == 0
    assert "example: python jobs/x.py" in capsys.readouterr().out


@pytest.mark.parametrize("key", ["run.output", "run.work"])
def test_a_place_that_nobody_reaches_is_refused_by_name(tmp_path, capsys, key) -> None:
    assert run(arguments(tmp_path, f"--set={key}=ftp://host.test/x"), nothing) == 2
    assert capsys.readouterr().err.startswith(
        f"sparkrank: {key}: ftp://host.test/x: expected a local path or"
    )


def test_an_output_that_is_a_file_is_refused(tmp_path, capsys) -> None:
    (tmp_path / "out").write_text("")
    assert run(arguments(tmp_path), nothing) == 2
    assert capsys.readouterr().err.startswith(
        f"sparkrank: run.output: expected a folder that can be written at {tmp_path}/out; found "
    )


def test_inputs_are_checked_before_java_and_the_lock(tmp_path, capsys, monkeypatch) -> None:
    order: list[str] = []
    monkeypatch.setattr(entry, "check_runtime", lambda: order.append("java"))

    def refuse(config: Config) -> None:
        order.append("inputs")
        raise InputRefused("input.edges: nothing there")

    assert run(arguments(tmp_path), nothing, check_inputs=refuse) == 3
    assert order == ["inputs"]
    assert not (tmp_path / "out" / "locks").exists()
    assert outcome(tmp_path)["exit_status"] == 3


def test_a_run_held_by_another_is_a_conflict(tmp_path, capsys) -> None:
    with hold_run(resolve(str(tmp_path / "out")), "run-1"):
        assert run(arguments(tmp_path), nothing) == 5
    assert capsys.readouterr().err.startswith(
        "sparkrank: run run-1: expected no other process at work on it;"
    )
    assert outcome(tmp_path)["exit_status"] == 5
    assert run(arguments(tmp_path), nothing) == 0


def test_progress_is_one_line_a_message_and_quiet_on_request(tmp_path, capsys) -> None:
    import logging

    def body(context: JobContext) -> None:
        logging.getLogger("sparkrank.steps").info("graph: 4 hosts")

    assert run(arguments(tmp_path), body) == 0
    time, text = capsys.readouterr().err.split(" ", 1)
    assert (len(time), text) == (8, "graph: 4 hosts\n")
    assert run(arguments(tmp_path, "--quiet"), body) == 0
    assert capsys.readouterr().err == ""


def test_a_missing_java_ends_a_job_with_one_line(tmp_path, capsys, monkeypatch) -> None:
    from sparkrank import session

    monkeypatch.setattr(entry, "check_runtime", session.check_java)
    monkeypatch.setenv("JAVA_HOME", str(tmp_path / "none"))
    assert run(arguments(tmp_path), nothing) == 1
    assert capsys.readouterr().err == (
        f"sparkrank: Java: expected version 17 or later; found none by JAVA_HOME={tmp_path}/none; "
        "install a JDK 17 or 21 and set JAVA_HOME to its folder\n"
    )


def test_the_steps_before_spark_do_not_import_it() -> None:
    import subprocess

    code = "import sys, sparkrank.entry; sys.exit('pyspark' in sys.modules)"
    root = Path(__file__).resolve().parents[2]
    assert subprocess.run([sys.executable, "-c", code], cwd=root, check=False).returncode == 0
