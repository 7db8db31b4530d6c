"""Removes what nothing names: files of dead attempts, and of older ones once a manifest replaced them."""

import logging

from sparkrank.publish.attempts import RunFolder
from sparkrank.publish.manifest import read_manifest
from sparkrank.publish.records import read_steps

_log = logging.getLogger(__name__)


def remove_unnamed(run: RunFolder) -> int:
    """Remove the run's attempt folders that no step record and no manifest names; how many.

    Call it while holding the run: at the start of an attempt, for what a dead one left, and after a
    manifest, for what it replaced. The attempt's own folders stay, since it may not have committed yet.
    Folders of other runs, and tables that are not kept by run and attempt, are never touched.
    """
    run.lock.confirm()
    named = _named_folders(run)
    removed = 0
    for table in run.output.list_folders():
        run_folder = run.output.child(table, f"run_id={run.run_id}")
        for attempt in run_folder.list_folders():
            folder = f"{table}/run_id={run.run_id}/{attempt}"
            is_own = attempt == f"attempt={run.attempt_id}"
            if attempt.startswith("attempt=") and not is_own and folder not in named:
                run_folder.child(attempt).delete_tree()
                removed += 1
    _remove_temporaries(run)
    if removed:
        _log.info("run %s: %d folders of earlier attempts removed", run.run_id, removed)
    return removed


def _remove_temporaries(run: RunFolder) -> None:
    """Remove small files whose writer died before it gave them their final names."""
    for folder, start in ((run.steps, "."), (run.output.child("runs"), f".{run.run_id}.json.")):
        for file in folder.list_files():
            if file.name.startswith(start) and file.name.endswith(".tmp"):
                folder.child(file.name).delete()


def _named_folders(run: RunFolder) -> set[str]:
    tables = [record.tables for record in read_steps(run.output, run.run_id)]
    manifest = read_manifest(run.output, run.run_id)
    if manifest is not None:
        tables.append(manifest.tables)
    return {
        file.path.rpartition("/")[0]
        for by_name in tables
        for entry in by_name.values()
        for file in entry.files
    }
