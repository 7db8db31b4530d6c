"""One holder a run: `flock` where files are mounted, a lease on an object store.

flock is free the moment its holder dies. A lease is a small file with the holder's nonce and a
counter that the holder raises every interval; whoever finds it takes it over only after the
counter stood still for three intervals of its own monotonic clock, so clocks need not agree. An
object store as pyarrow reaches it has no conditional put: two takers can both write, and the one
that reads another's nonce afterwards gives way. What remains is harmless, because attempts write to
folders of their own and every commit reads the nonce again.
"""

import contextlib
import errno
import fcntl
import json
import logging
import os
import secrets
import threading
import time
from collections.abc import Iterator
from typing import Protocol

from sparkrank.errors import ConfigError, RunConflict
from sparkrank.places import Place

_log = logging.getLogger(__name__)

# Ten seconds between signs of life: a dead holder costs the next one half a minute, a living one
# may pause for a garbage collection or a slow put without losing the run.
LEASE_INTERVAL_SECONDS = 10.0
_STILL_INTERVALS = 3


class RunLock(Protocol):
    """The right to write a run, as long as `confirm` returns."""

    def confirm(self) -> None:
        """Return if the run is still held by this process, else raise RunConflict."""


@contextlib.contextmanager
def hold_run(
    output: Place, run_id: str, *, interval_seconds: float = LEASE_INTERVAL_SECONDS
) -> Iterator[RunLock]:
    """Hold the run while the block runs; RunConflict at once if a living process holds it."""
    if output.is_local:
        with _hold_flock(output.child("locks", f"{run_id}.lock"), run_id) as lock:
            yield lock
    else:
        lease = Lease(output.child("locks", f"{run_id}.json"), run_id, interval_seconds)
        lease.acquire()
        try:
            yield lease
        finally:
            lease.release()


def _busy(run_id: str, place: Place, holder: str) -> RunConflict:
    return RunConflict(
        f"run {run_id}: expected no other process at work on it; found {place} held by {holder}; "
        "wait for it to end or choose another run.id"
    )


def _own_name() -> str:
    return f"process {os.getpid()} on {os.uname().nodename}"


class _FileLock:
    """A held flock. The kernel keeps it; there is nothing to ask again."""

    def confirm(self) -> None:
        return


@contextlib.contextmanager
def _hold_flock(place: Place, run_id: str) -> Iterator[_FileLock]:
    path = place.local_path
    os.makedirs(os.path.dirname(path), exist_ok=True)
    # The file stays: removing it would let two processes lock two files of one name.
    descriptor = os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
    try:
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            holder = os.pread(descriptor, 200, 0).decode("utf-8", "replace").strip()
            raise _busy(run_id, place, holder or "another process") from None
        except OSError as error:
            name = errno.errorcode.get(error.errno or 0, str(error.errno))
            raise ConfigError(
                f"run.output: expected a file system with flock at {place}; found {name}; "
                "choose an output on another file system"
            ) from error
        os.ftruncate(descriptor, 0)
        os.pwrite(descriptor, _own_name().encode(), 0)
        yield _FileLock()
    finally:
        os.close(descriptor)


class Lease:
    """A lease on a store without locks; `acquire`, then `confirm` before each commit, `release`."""

    def __init__(self, place: Place, run_id: str, interval_seconds: float) -> None:
        self._place = place
        self._run_id = run_id
        self._interval_seconds = interval_seconds
        self._nonce = secrets.token_hex(16)
        self._counter = 0
        self._last_beat_seconds = 0.0
        self._writing = threading.Lock()
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._keep, name=f"lease-{run_id}", daemon=True)

    def acquire(self) -> None:
        """Take the lease, waiting out a dead holder; RunConflict if a holder shows life."""
        seen = self._read()
        if seen is not None:
            _log.info("run %s: waiting to see whether %s is alive", self._run_id, seen[2])
            deadline = time.monotonic() + _STILL_INTERVALS * self._interval_seconds
            while time.monotonic() < deadline:
                time.sleep(self._interval_seconds / 4)
                now = self._read()
                if now is None:
                    break
                if now != seen:
                    raise _busy(self._run_id, self._place, now[2])
        self._write()
        # A second taker may have written meanwhile: whoever wrote last keeps it.
        time.sleep(self._interval_seconds / 2)
        self._check()
        self._thread.start()

    def confirm(self) -> None:
        """Read the nonce again; RunConflict if it is another's.

        A holder that slept through its own intervals gives a new sign of life first, so that no
        taker's clock runs out between this answer and the commit.
        """
        if time.monotonic() - self._last_beat_seconds > self._interval_seconds:
            self._beat()
        self._check()

    def release(self) -> None:
        """End the signs of life and remove the lease if it is still this holder's."""
        self._stop.set()
        if self._thread.is_alive():
            self._thread.join()
        found = self._read()
        if found is not None and found[0] == self._nonce:
            self._place.delete()

    def _keep(self) -> None:
        while not self._stop.wait(self._interval_seconds):
            try:
                self._beat()
            except RunConflict:
                return  # `confirm` says so before the next commit
            except OSError as error:
                _log.warning("run %s: no sign of life written (%s); trying again", self._run_id, error)

    def _beat(self) -> None:
        with self._writing:
            self._check()
            self._counter += 1
            self._write()

    def _check(self) -> None:
        found = self._read()
        if found is None or found[0] != self._nonce:
            raise _busy(self._run_id, self._place, found[2] if found else "nobody: the lease was removed")

    def _read(self) -> tuple[str, int, str] | None:
        """Nonce, counter and holder of the lease; None where there is none."""
        try:
            data = json.loads(self._place.read_bytes())
            return str(data["nonce"]), int(data["counter"]), str(data["holder"])
        except FileNotFoundError:
            return None
        except (ValueError, KeyError, TypeError):
            return "", 0, "a lease that cannot be read"

    def _write(self) -> None:
        data = {"nonce": self._nonce, "counter": self._counter, "holder": _own_name()}
        self._place.write_bytes(json.dumps(data).encode())
        self._last_beat_seconds = time.monotonic()
