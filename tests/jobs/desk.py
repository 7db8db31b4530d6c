"""What the tests of jobs share: a folder of inputs and results, and the ways to start a job."""

import dataclasses
import hashlib
import importlib.util
import json
import os
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

ROOT = Path(__file__).resolve().parents[2]
JOBS = ("build_graph", "score_hosts", "rank_candidates", "run_pipeline")
RUN = "2026-11-town"


def job_main(job: str) -> Any:
    """The `main` of a job's file, which is no module of a package."""
    name = f"job_{job}"
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, ROOT / "jobs" / f"{job}.py")
        assert spec is not None
        assert spec.loader is not None
        module = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(module)
        sys.modules[name] = module
    return sys.modules[name].main


def user_environment() -> dict[str, str]:
    """The environment of a user who has set nothing for Spark."""
    dropped = ("PYSPARK_PYTHON", "SPARK_LOCAL_IP", "PYTHONPATH")
    kept = {key: value for key, value in os.environ.items() if key not in dropped}
    return {**kept, "SPARKRANK_PYTHON": sys.executable}


@dataclasses.dataclass(frozen=True, kw_only=True)
class Desk:
    """A run's configuration: inputs below `inputs`, results below `folder`, work files in `work`."""

    folder: Path
    inputs: Path
    work: Path
    settings: tuple[tuple[str, str], ...] = ()

    @classmethod
    def at(cls, folder: Path, **settings: str) -> "Desk":
        """A desk with everything below one folder; settings as `section__key=value`."""
        folder.mkdir(parents=True, exist_ok=True)
        return cls(folder=folder, inputs=folder, work=folder / "work").having(**settings)

    def having(self, **settings: str) -> "Desk":
        """The same desk with other settings."""
        changed = {**dict(self.settings), **{k.replace("__", "."): v for k, v in settings.items()}}
        return dataclasses.replace(self, settings=tuple(changed.items()))

    def copied(self, folder: Path) -> "Desk":
        """A desk with a copy of the results and the same inputs and work files."""
        shutil.copytree(self.output, folder / "out")
        return dataclasses.replace(self, folder=folder)

    @property
    def output(self) -> Path:
        return self.folder / "out"

    def arguments(self, *more: str) -> list[str]:
        """The command line after the job's name."""
        given = {
            "run.id": RUN,
            "run.output": str(self.output),
            "run.work": str(self.work),
            "input.edges": str(self.inputs / "edges.parquet"),
            "input.core": str(self.inputs / "core.csv"),
            **dict(self.settings),
        }
        return [*(f"--set={key}={value}" for key, value in given.items()), *more]

    def start(self, job: str, *more: str, session: Any = None) -> int:
        """Run a job in this process; its exit status."""
        return int(job_main(job)(self.arguments(*more), session=session))

    def command(self, job: str, *more: str) -> list[str]:
        """The job as a command for a process of its own."""
        return [sys.executable, str(ROOT / "jobs" / f"{job}.py"), *self.arguments(*more)]

    def start_process(
        self, *before: str, job: str = "run_pipeline", cwd: Path
    ) -> subprocess.CompletedProcess[str]:
        """Run a job in a process of its own, started as a user would, and wait for it."""
        command = self.command(job)
        return subprocess.run(
            [*before, *command[1:]] if before else command,
            cwd=cwd,
            env=user_environment(),
            capture_output=True,
            text=True,
            check=False,
        )

    def manifest(self) -> dict[str, Any]:
        """The run's manifest."""
        return dict(json.loads((self.output / "runs" / f"{RUN}.json").read_bytes()))

    def digests(self) -> dict[str, str]:
        """The digest of each table of the manifest."""
        return {name: table["digest"] for name, table in self.manifest()["tables"].items()}

    def outcomes(self) -> list[dict[str, Any]]:
        """The outcomes of all attempts, in the order of time."""
        files = sorted(
            (self.output / "outcomes").glob(f"{RUN}-*.json"), key=lambda file: file.stat().st_mtime_ns
        )
        return [json.loads(file.read_bytes()) for file in files]

    def attempts(self, table: str) -> set[str]:
        """The attempts that have a folder of the table."""
        return {folder.name for folder in (self.output / table / f"run_id={RUN}").glob("attempt=*")}

    def visible(self) -> list[str]:
        """Manifests and table folders below the output: what a reader could take for results."""
        if not self.output.exists():
            return []
        manifests = [f"runs/{file.name}" for file in (self.output / "runs").glob("*.json")]
        own = ("locks", "outcomes", "runs", "steps")
        return manifests + [path.name for path in self.output.iterdir() if path.name not in own]

    def table(self, name: str) -> list[dict[str, Any]]:
        """The rows of a table by the manifest."""
        entry = self.manifest()["tables"][name]
        return list(pa.concat_tables(self.files(entry)).to_pylist())

    def files(self, entry: dict[str, Any]) -> list[Any]:
        """The files of a manifest's table, each as an Arrow table."""
        # ParquetFile, since read_table would add the folders' key=value names as columns.
        return [pq.ParquetFile(self.output / file["path"]).read() for file in entry["files"]]


def sha256(path: Path) -> str:
    """The digest of a file as the manifest writes it."""
    return "sha256:" + hashlib.sha256(path.read_bytes()).hexdigest()
