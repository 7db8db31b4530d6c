"""One holder a run: flock between processes, the lease on a store without locks."""

import contextlib
import json
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from sparkrank.errors import RunConflict
from sparkrank.places import Place, resolve
from sparkrank.publish.lock import Lease, hold_run

ROOT = Path(__file__).resolve().parents[3]

# Holds the run, starts a child that outlives it (as a JVM may), says so, and waits to be killed.
HOLDER = """
import subprocess, sys, time
from sparkrank.places import resolve
from sparkrank.publish.lock import hold_run
with hold_run(resolve(sys.argv[1]), "run-1"):
    child = subprocess.Popen(["sleep", "30"])
    print(child.pid, flush=True)
    time.sleep(60)
"""


@contextlib.contextmanager
def holder(output: Path) -> Iterator[subprocess.Popen[str]]:
    process = subprocess.Popen(
        [sys.executable, "-c", HOLDER, str(output)], stdout=subprocess.PIPE, text=True, cwd=ROOT
    )
    assert process.stdout is not None
    child = int(process.stdout.readline())
    try:
        yield process
    finally:
        process.kill()
        process.wait()
        process.stdout.close()
        os.kill(child, signal.SIGKILL)


def test_a_run_has_one_holder_until_that_dies(tmp_path) -> None:
    output = resolve(str(tmp_path))
    with holder(tmp_path) as process:
        with pytest.raises(RunConflict) as busy, hold_run(output, "run-1"):
            pass
        assert str(busy.value) == (
            f"run run-1: expected no other process at work on it; found {tmp_path}/locks/run-1.lock "
            f"held by process {process.pid} on {os.uname().nodename}; "
            "wait for it to end or choose another run.id"
        )
        with hold_run(output, "run-2") as other:
            other.confirm()
        process.send_signal(signal.SIGKILL)
        process.wait()
        with hold_run(output, "run-1") as lock:
            lock.confirm()


def test_a_run_is_free_after_its_holder_ends(tmp_path) -> None:
    output = resolve(str(tmp_path))
    for _ in range(2):
        with hold_run(output, "run-1") as lock:
            lock.confirm()


INTERVAL_SECONDS = 0.2


@pytest.fixture
def store(monkeypatch) -> Place:
    from pyarrow.fs import _MockFileSystem

    filesystem = _MockFileSystem()
    monkeypatch.setattr("sparkrank.places._open_filesystem", lambda root: filesystem)
    return Place(uri="mock://box/out", path="box/out")


def lease(store: Place) -> Lease:
    return Lease(store.child("locks", "run-1.json"), "run-1", INTERVAL_SECONDS)


def test_a_living_lease_is_refused(store) -> None:
    with hold_run(store, "run-1", interval_seconds=INTERVAL_SECONDS) as lock:
        lock.confirm()
        with pytest.raises(RunConflict, match="held by process"):
            lease(store).acquire()


def test_a_released_lease_is_free_at_once(store) -> None:
    with hold_run(store, "run-1", interval_seconds=INTERVAL_SECONDS):
        pass
    assert not store.child("locks", "run-1.json").exists()
    started = time.monotonic()
    with hold_run(store, "run-1", interval_seconds=INTERVAL_SECONDS):
        assert time.monotonic() - started < 2 * INTERVAL_SECONDS


def test_a_lease_that_stands_still_is_taken_over_after_three_intervals(store) -> None:
    dead = {"nonce": "n", "counter": 7, "holder": "process 1 on gone.test"}
    store.child("locks", "run-1.json").write_bytes(json.dumps(dead).encode())
    started = time.monotonic()
    with hold_run(store, "run-1", interval_seconds=INTERVAL_SECONDS) as lock:
        assert time.monotonic() - started >= 3 * INTERVAL_SECONDS
        lock.confirm()


def test_a_holder_whose_lease_was_taken_may_not_commit(store) -> None:
    with hold_run(store, "run-1", interval_seconds=INTERVAL_SECONDS) as lock:
        taker = {"nonce": "other", "counter": 0, "holder": "process 2 on other.test"}
        store.child("locks", "run-1.json").write_bytes(json.dumps(taker).encode())
        with pytest.raises(RunConflict, match=r"held by process 2 on other\.test"):
            lock.confirm()
    # What it gave up it does not remove either.
    assert json.loads(store.child("locks", "run-1.json").read_bytes()) == taker


def test_of_two_takers_at_once_one_holds(store) -> None:
    leases = [lease(store), lease(store)]
    results: list[str] = []

    def take(one: Lease) -> None:
        try:
            one.acquire()
            results.append("held")
        except RunConflict:
            results.append("refused")

    threads = [threading.Thread(target=take, args=(one,)) for one in leases]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    for one in leases:
        one.release()
    assert sorted(results) == ["held", "refused"]
