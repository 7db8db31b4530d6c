"""A run started again: nothing to do, other inputs, replaced, gone on with, held by somebody else."""

import subprocess
import sys

import pytest

from tests.jobs.desk import ROOT, RUN, Desk
from tests.jobs.town import write_town

PENDING = "choose another run.id or add --replace\n"


@pytest.mark.usefixtures("no_spark")
@pytest.mark.parametrize("job", ["build_graph", "score_hosts", "rank_candidates", "run_pipeline"])
def test_a_finished_run_is_left_alone_without_spark(finished, tmp_path, capsys, job) -> None:
    desk = finished.copied(tmp_path)
    before = desk.manifest()
    assert desk.start(job) == 0
    assert f" run {RUN} is complete and unchanged: nothing to do\n" in capsys.readouterr().err
    assert desk.manifest() == before
    assert desk.outcomes()[-1]["status"] == "done"


@pytest.mark.usefixtures("no_spark")
@pytest.mark.parametrize("job", ["build_graph", "score_hosts", "rank_candidates", "run_pipeline"])
def test_other_settings_need_replace(finished, tmp_path, capsys, job) -> None:
    desk = finished.copied(tmp_path).having(candidates__min_relative_mass="0.25")
    before = desk.manifest()
    assert desk.start(job) == 5
    place = desk.output / "runs" / f"{RUN}.json"
    assert capsys.readouterr().err == (
        f"sparkrank: run {RUN}: expected a new run or the same inputs, configuration and version; "
        f"found {place} made from others; {PENDING}"
    )
    assert desk.manifest() == before
    assert (desk.outcomes()[-1]["exit_status"], desk.outcomes()[-1]["status"]) == (5, "run conflict")


def test_another_threshold_starts_at_the_ranking(finished, spark, tmp_path, capsys) -> None:
    desk = finished.copied(tmp_path).having(candidates__min_scaled_pagerank="20")
    before = desk.manifest()
    assert desk.start("run_pipeline", "--replace", session=spark) == 0
    progress = capsys.readouterr().err
    assert " scores: done before\n" in progress
    assert " build " not in progress
    assert " step " not in progress
    after = desk.manifest()
    assert after["tables"]["host_scores"] == before["tables"]["host_scores"]
    assert [row["host"] for row in desk.table("spam_candidates")] == ["target.test"]
    assert desk.attempts("spam_candidates") == {f"attempt={after['attempt']}"}
    assert after["config"]["candidates"]["min_scaled_pagerank"] == 20


def test_another_core_starts_at_the_solve(finished, spark, tmp_path, capsys) -> None:
    core = tmp_path / "other.csv"
    core.write_text("host,slice\ntown-0.example,north\ntown-4.example,south\n")
    desk = finished.copied(tmp_path).having(input__core=str(core))
    assert desk.start("run_pipeline", "--replace", session=spark) == 0
    progress = capsys.readouterr().err
    assert " is there already: " in progress
    assert " build " not in progress
    assert " step 1: " in progress
    after = desk.manifest()
    for table in after["tables"]:
        assert desk.attempts(table) == {f"attempt={after['attempt']}"}
    core_hosts = [row["host"] for row in desk.table("host_scores") if row["is_core"]]
    assert core_hosts == ["town-0.example", "town-4.example"]


def test_too_few_steps_are_gone_on_with(finished, spark, tmp_path, capsys) -> None:
    desk = Desk(folder=tmp_path, inputs=finished.inputs, work=finished.work)
    assert desk.start("run_pipeline", "--quiet", "--set=solve.max_steps=3", session=spark) == 4
    error = capsys.readouterr().err
    assert error.startswith(
        "sparkrank: solve: expected an error of at most 1e-06 of PageRank (solve.tolerance) within 3 steps "
        "(solve.max_steps), found "
    )
    assert error.endswith(" after step 3; allow more steps, the steps done are kept, or a larger tolerance\n")
    assert error.count("\n") == 1
    assert (desk.outcomes()[-1]["exit_status"], desk.outcomes()[-1]["status"]) == (4, "not converged")
    assert desk.visible() == []
    assert desk.start("run_pipeline", session=spark) == 0
    progress = capsys.readouterr().err
    assert " solve: going on after step 3\n" in progress
    assert " step 3: " not in progress
    assert " step 4: " in progress
    assert desk.manifest()["columns"][0]["steps"] > 3


@pytest.mark.usefixtures("no_spark")
def test_ranking_needs_scores(tmp_path, capsys) -> None:
    write_town(tmp_path)
    desk = Desk.at(tmp_path)
    assert desk.start("rank_candidates") == 3
    assert capsys.readouterr().err == (
        f"sparkrank: run {RUN}: expected the scores of score_hosts for this configuration and these inputs "
        f"below {desk.output}, found none; run jobs/score_hosts.py or jobs/run_pipeline.py\n"
    )
    assert desk.visible() == []


@pytest.mark.usefixtures("no_spark")
def test_a_run_that_another_process_holds_is_a_conflict(finished, tmp_path, capsys) -> None:
    desk = finished.copied(tmp_path)
    hold = (
        "import sys\nfrom sparkrank.places import resolve\nfrom sparkrank.publish.lock import hold_run\n"
        "with hold_run(resolve(sys.argv[1]), sys.argv[2]):\n    print('held', flush=True)\n    input()\n"
    )
    holder = subprocess.Popen(
        [sys.executable, "-c", hold, str(desk.output), RUN],
        cwd=ROOT,
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    try:
        assert holder.stdout is not None
        assert holder.stdout.readline() == "held\n"
        assert desk.start("run_pipeline") == 5
        error = capsys.readouterr().err
        assert error.startswith(f"sparkrank: run {RUN}: expected no other process at work on it; found ")
        assert error.count("\n") == 1
        assert desk.outcomes()[-1]["exit_status"] == 5
    finally:
        holder.communicate("\n")
    assert desk.start("run_pipeline") == 0
