"""What the benchmarks share: the machine, alternating turns, peak memory, Spark's event log, the report.

A benchmark compares *ways* of doing the same thing in turns (first way, second way, …, first way again), so
that a machine that slows down or a cache that warms up meets all of them alike.  Medians are reported, with
their ratio to the first way.
"""

import argparse
import contextlib
import json
import os
import platform
import shlex
import statistics
import subprocess
import sys
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

from crawl_graph import default_data

PROJECT = Path(__file__).resolve().parents[2]
HERE = Path(__file__).resolve().parent
_POLL_SECONDS = 0.2

Facts = dict[str, Any]


def arguments_of(description: str, *, edges: float) -> argparse.ArgumentParser:
    """The parser with the options that all benchmarks have."""
    parser = argparse.ArgumentParser(description=description)
    parser.add_argument("--edges", type=float, default=edges, help="rows of the edge table, such as 60e6")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--turns", type=int, default=3, help="turns of every way; medians are reported")
    parser.add_argument("--data", type=Path, default=default_data(), help="folder that keeps the graphs")
    parser.add_argument("--json", type=Path, metavar="FILE", help="write all figures there, too")
    parser.add_argument("--master", default="local[*]", help="Spark's master, the same for all ways")
    parser.add_argument("--heap", help="heap of the engine's JVM; the program's own choice if not given")
    return parser


def machine() -> Facts:
    """Cores, memory, processor, versions and the command line."""
    model = platform.processor() or platform.machine()
    with contextlib.suppress(OSError, StopIteration):
        lines = Path("/proc/cpuinfo").read_text().splitlines()
        model = next(line.partition(":")[2].strip() for line in lines if line.startswith("model name"))
    java = subprocess.run(["java", "-version"], capture_output=True, text=True, check=False).stderr
    packages = {}
    for name in ("numpy", "pyarrow", "pyspark", "scipy"):
        with contextlib.suppress(PackageNotFoundError):
            packages[name] = version(name)
    memory = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    return {
        "cores": len(os.sched_getaffinity(0)),
        "memory_gib": round(memory / 2**30, 1),
        "processor": model,
        "load_before": round(os.getloadavg()[0], 2),
        "java": java.splitlines()[0] if java else "none",
        "python": platform.python_version(),
        **packages,
        "command": shlex.join(["python", *sys.argv]),
    }


def in_turns(ways: dict[str, Callable[[], Facts]], turns: int) -> dict[str, list[Facts]]:
    """Runs every way `turns` times, alternating; what each returned, by way."""
    found: dict[str, list[Facts]] = {name: [] for name in ways}
    for turn in range(turns):
        for name, way in ways.items():
            started = time.monotonic()
            found[name].append(way())
            seconds = time.monotonic() - started
            print(f"turn {turn + 1}/{turns}: {name}, {seconds:.1f} s", file=sys.stderr, flush=True)
    return found


def median(turns: list[Facts], key: str) -> float:
    """Median over the turns of one figure."""
    return float(statistics.median(turn[key] for turn in turns))


@dataclass
class PeakMemory:
    """Largest memory of a process and all that descend from it, polled while a block runs.

    `pss_bytes` sums the proportional set size: pages shared by several processes, such as mapped work
    files, count once.  `own_bytes` is the part of it that belongs to no file (heaps, arrays), which the
    system cannot drop under pressure.
    """

    pid: int
    pss_bytes: int = 0
    own_bytes: int = 0
    _done: threading.Event = field(default_factory=threading.Event)

    def __enter__(self) -> "PeakMemory":
        self._thread = threading.Thread(target=self._poll, daemon=True)
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._done.set()
        self._thread.join()

    def as_facts(self) -> Facts:
        return {"peak_pss_bytes": self.pss_bytes, "peak_own_bytes": self.own_bytes}

    def _poll(self) -> None:
        while not self._done.wait(_POLL_SECONDS):
            sizes = [_memory_of(pid) for pid in _family(self.pid)]
            self.pss_bytes = max(self.pss_bytes, sum(pss for pss, _ in sizes))
            self.own_bytes = max(self.own_bytes, sum(own for _, own in sizes))


def _family(pid: int) -> set[int]:
    """The process and its descendants."""
    parents = {}
    for entry in os.scandir("/proc"):
        if entry.name.isdigit():
            with contextlib.suppress(OSError, ValueError, IndexError):
                stat = Path(entry.path, "stat").read_text()
                # The command, in parentheses, may hold anything.
                parents[int(entry.name)] = int(stat.rpartition(")")[2].split()[1])
    family, before = {pid}, 0
    while len(family) > before:
        before = len(family)
        family |= {child for child, parent in parents.items() if parent in family}
    return family


def _memory_of(pid: int) -> tuple[int, int]:
    """PSS and its anonymous part, in bytes; nothing for a process that has ended."""
    sizes = {"Pss:": 0, "Pss_Anon:": 0}
    with contextlib.suppress(OSError):
        for line in Path(f"/proc/{pid}/smaps_rollup").read_text().splitlines():
            name, _, rest = line.partition(" ")
            if name in sizes:
                sizes[name] = int(rest.split()[0]) * 1024
    return sizes["Pss:"], sizes["Pss_Anon:"]


@dataclass(frozen=True, kw_only=True)
class Finished:
    """A process that ended well: its time from start to end and its peak memory."""

    seconds: float
    memory: Facts
    answer: Facts
    """What it printed as JSON on its last line; empty where it printed nothing."""
    said: str
    """Its standard error."""


def run_process(command: list[str], environment: dict[str, str] | None = None) -> Finished:
    """Runs a command to its end; RuntimeError with what it said where it fails."""
    started = time.monotonic()
    process = subprocess.Popen(
        command,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, **(environment or {})},
        cwd=PROJECT,
    )
    with PeakMemory(process.pid) as memory:
        output, errors = process.communicate()
    seconds = time.monotonic() - started
    if process.returncode:
        raise RuntimeError(f"{shlex.join(command)}: status {process.returncode}\n{errors[-4000:]}")
    last = output.splitlines()[-1] if output.strip() else ""
    # People get other last lines.
    answer = json.loads(last) if last.startswith("{") else {}
    return Finished(seconds=seconds, memory=memory.as_facts(), answer=answer, said=errors)


def run_peer(arguments: list[str]) -> Finished:
    """Runs one of the peers in a process of its own."""
    return run_process([sys.executable, str(HERE / "peers.py"), *arguments])


def print_table(title: str, rows: list[list[object]]) -> None:
    """A table with a header row; numbers are right-aligned."""
    cells = [[_shown(value) for value in row] for row in rows]
    widths = [max(len(row[at]) for row in cells) for at in range(len(cells[0]))]
    print(f"\n{title}")
    for row in cells:
        first, *rest = (
            cell.ljust(w) if at == 0 else cell.rjust(w)
            for at, (cell, w) in enumerate(zip(row, widths, strict=True))
        )
        print("  ".join([first, *rest]).rstrip())


def _shown(value: object) -> str:
    if isinstance(value, float):
        return f"{value:.3g}" if abs(value) < 100 else f"{value:,.0f}"
    return f"{value:,}" if isinstance(value, int) else str(value)


def print_machine(facts: Facts) -> None:
    """One line a fact."""
    for name, value in facts.items():
        print(f"{name}: {value}")


def write_json(path: Path | None, report: Facts) -> None:
    """All figures, where a file was asked for."""
    if path is not None:
        path.write_text(json.dumps(report, indent=1, default=str) + "\n")
