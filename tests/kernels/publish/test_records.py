"""Records, manifests, outcomes and cleaning: data first, then one small file that makes it count."""

import json
from collections.abc import Iterator

import pytest

from sparkrank.errors import ConfigError, RunConflict, SparkrankError
from sparkrank.places import Place, resolve
from sparkrank.publish.attempts import RunFolder, new_attempt_id
from sparkrank.publish.clean import remove_unnamed
from sparkrank.publish.entries import FileEntry, TableEntry, fingerprint_of
from sparkrank.publish.lock import hold_run
from sparkrank.publish.manifest import (
    Manifest,
    check_run,
    latest_complete,
    read_manifest,
    write_manifest,
)
from sparkrank.publish.outcome import Outcome, write_outcome
from sparkrank.publish.records import StepRecord, adopt, commit_step, read_steps


@pytest.fixture
def run(tmp_path) -> Iterator[RunFolder]:
    output = resolve(str(tmp_path))
    with hold_run(output, "run-1") as lock:
        yield RunFolder(output=output, run_id="run-1", attempt_id=new_attempt_id(), lock=lock)


def next_attempt(run: RunFolder, run_id: str = "run-1") -> RunFolder:
    return RunFolder(output=run.output, run_id=run_id, attempt_id=new_attempt_id(), lock=run.lock)


def write_data(run: RunFolder, table: str = "host_scores") -> TableEntry:
    """A file in the place of a table's; what is in it does not matter here."""
    path = run.table_name(table) + "/part-00000.parquet"
    stamp = run.output.below(path).write_bytes(b"rows")
    file = FileEntry(path=path, rows=2, bytes=stamp.size, digest="sha256:" + stamp.checksum)
    return TableEntry(name=table, files=(file,), rows=2, digest="d")


def record(entry: TableEntry, fingerprint: str = "f1", step: str = "score_hosts") -> StepRecord:
    return StepRecord(step=step, fingerprint=fingerprint, tables={entry.name: entry}, facts={"steps": 12})


def manifest(run: RunFolder, entry: TableEntry, fingerprint: str = "f1", status="complete") -> Manifest:
    return Manifest(
        run_id=run.run_id,
        attempt=run.attempt_id,
        status=status,
        fingerprint=fingerprint,
        tables={entry.name: entry},
        details={"config": {"run": {"id": run.run_id}}, "graph": {"hosts": 4}},
    )


def file_place(run: RunFolder, entry: TableEntry) -> Place:
    return run.output.below(entry.files[0].path)


def test_attempt_ids_sort_by_time_and_differ() -> None:
    ids = {new_attempt_id() for _ in range(100)}
    assert len(ids) == 100


def test_a_run_id_that_cannot_be_a_name_is_refused(run) -> None:
    with pytest.raises(ConfigError, match=r"run\.id: expected .* found '\.\./x'"):
        next_attempt(run, "../x")


def test_a_committed_step_is_adopted_for_the_same_inputs_only(run) -> None:
    entry = write_data(run)
    assert adopt(run, "score_hosts", "f1") is None
    commit_step(run, record(entry))
    assert adopt(next_attempt(run), "score_hosts", "f1") == record(entry)
    assert adopt(run, "score_hosts", "f2") is None
    assert adopt(run, "build_graph", "f1") is None


@pytest.mark.parametrize("damage", ["removed", "shortened", "record cut"])
def test_a_damaged_step_is_not_adopted(run, damage) -> None:
    entry = write_data(run)
    commit_step(run, record(entry))
    if damage == "removed":
        file_place(run, entry).delete()
    elif damage == "shortened":
        file_place(run, entry).write_bytes(b"row")
    else:
        run.steps.child("score_hosts.json").write_bytes(b'{"format": 1, ')
    assert adopt(run, "score_hosts", "f1") is None


def test_a_manifest_has_the_shape_readers_rely_on(run) -> None:
    entry = write_data(run)
    write_manifest(run, manifest(run, entry))
    data = json.loads(run.output.child("runs", "run-1.json").read_bytes())
    assert data["status"] == "complete"
    assert data["graph"] == {"hosts": 4}
    file = entry.files[0]
    assert data["tables"] == {
        "host_scores": {
            "files": [{"path": file.path, "rows": 2, "bytes": 4, "digest": file.digest}],
            "rows": 2,
            "digest": "d",
        }
    }
    read = read_manifest(run.output, "run-1")
    assert read is not None
    assert read.tables == {"host_scores": entry}
    assert read.details == {"config": {"run": {"id": "run-1"}}, "graph": {"hosts": 4}}


def test_details_may_not_cover_the_manifests_own_keys(run) -> None:
    bad = Manifest(
        run_id="run-1", attempt="", status="held", fingerprint="f", tables={}, details={"status": "x"}
    )
    with pytest.raises(ValueError, match="status"):
        write_manifest(run, bad)
    assert read_manifest(run.output, "run-1") is None


def test_a_number_that_json_does_not_have_is_refused(run) -> None:
    bad = StepRecord(step="s", fingerprint="f", facts={"bound": float("nan")})
    with pytest.raises(ValueError, match="not JSON compliant"):
        commit_step(run, bad)


def test_a_run_made_from_other_inputs_is_a_conflict_unless_replaced(run) -> None:
    assert check_run(run.output, "run-1", "f1", replace=False) is None
    write_manifest(run, manifest(run, write_data(run)))
    assert check_run(run.output, "run-1", "f1", replace=False) is not None
    assert check_run(run.output, "run-1", "f2", replace=True) is not None
    with pytest.raises(RunConflict) as conflict:
        check_run(run.output, "run-1", "f2", replace=False)
    assert str(conflict.value) == (
        "run run-1: expected a new run or the same inputs, configuration and version; "
        f"found {run.manifest} made from others; choose another run.id or add --replace"
    )


def test_a_damaged_manifest_is_said_not_guessed(run) -> None:
    run.manifest.write_bytes(b"{}")
    with pytest.raises(SparkrankError, match="expected a manifest of format 1; found KeyError: 'format'"):
        read_manifest(run.output, "run-1")


def test_the_latest_complete_run_is_no_held_one(run) -> None:
    assert latest_complete(run.output) is None
    for run_id, status in (("a", "complete"), ("b", "complete"), ("c", "held")):
        other = next_attempt(run, run_id)
        write_manifest(other, manifest(other, write_data(other), status=status))
    found = latest_complete(run.output)
    assert found is not None
    assert found.run_id == "b"


def test_a_lost_lock_commits_nothing(run) -> None:
    class Lost:
        def confirm(self) -> None:
            raise RunConflict("lost")

    lost = RunFolder(output=run.output, run_id="run-1", attempt_id=new_attempt_id(), lock=Lost())
    entry = write_data(lost)
    with pytest.raises(RunConflict):
        commit_step(lost, record(entry))
    with pytest.raises(RunConflict):
        write_manifest(lost, manifest(lost, entry))
    with pytest.raises(RunConflict):
        remove_unnamed(lost)
    assert read_steps(run.output, "run-1") == []
    assert read_manifest(run.output, "run-1") is None
    assert file_place(lost, entry).exists()


def test_what_a_dead_attempt_left_is_invisible_and_cleaned_by_the_next(run) -> None:
    """Death between the data and the record: the files are there, nothing names them."""
    kept = write_data(run, "host_scores")
    commit_step(run, record(kept))
    dead = next_attempt(run)
    left = write_data(dead, "spam_candidates")
    run.steps.child(".rank_candidates.json.00ff.tmp").write_bytes(b"half a rec")
    assert read_manifest(run.output, "run-1") is None
    assert adopt(dead, "rank_candidates", "f1") is None

    later = next_attempt(run)
    own = write_data(later, "spam_candidates")
    other_run = write_data(next_attempt(run, "run-2"))
    assert remove_unnamed(later) == 1
    assert not file_place(run, left).exists()
    assert not run.steps.child(".rank_candidates.json.00ff.tmp").exists()
    for entry in (kept, own, other_run):
        assert file_place(run, entry).exists()
    assert adopt(later, "score_hosts", "f1") == record(kept)


def test_a_replacement_removes_the_older_files_after_its_manifest(run) -> None:
    old = write_data(run)
    commit_step(run, record(old))
    write_manifest(run, manifest(run, old))
    newer = next_attempt(run)
    new = write_data(newer)
    commit_step(newer, record(new, "f2"))
    remove_unnamed(newer)
    assert file_place(run, old).exists()  # the old manifest still names it
    write_manifest(newer, manifest(newer, new, "f2"))
    remove_unnamed(newer)
    assert not file_place(run, old).exists()
    assert file_place(run, new).exists()


def test_an_outcome_says_how_the_attempt_ended(run) -> None:
    write_outcome(
        run.output,
        Outcome(
            run_id="run-1",
            attempt_id=run.attempt_id,
            job="score_hosts",
            exit_status=4,
            message="not converged",
            started_at="2026-11-03T09:15:00Z",
            finished_at="2026-11-03T09:16:00Z",
        ),
    )
    data = json.loads(run.output.child("outcomes", f"run-1-{run.attempt_id}.json").read_bytes())
    assert (data["exit_status"], data["status"], data["message"]) == (4, "not converged", "not converged")


def test_a_fingerprint_does_not_depend_on_the_order_of_keys() -> None:
    assert fingerprint_of({"a": 1, "b": [1, 2.5]}) == fingerprint_of({"b": [1, 2.5], "a": 1})
    assert fingerprint_of({"a": 1}) != fingerprint_of({"a": "1"})
