"""A planted web through the whole program, as a process: what its table of candidates says of each host."""

import json
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.csv as pacsv
import pyarrow.parquet as pq
from numpy.typing import NDArray

from planting.web import BaseGraph, IntArray

_JOB = Path(__file__).resolve().parents[3] / "jobs" / "run_pipeline.py"
_RUN = "planted"


def ranked(graph: BaseGraph) -> tuple[IntArray, NDArray[np.float64]]:
    """Hosts of the candidates, and their priority, with every host of scaled PageRank 10 a candidate."""
    # Hosts of one domain are sub-hosts of one name; all are below one public suffix.
    names = np.array([f"h{host}.d{domain}.example" for host, domain in enumerate(graph.domains.tolist())])
    with tempfile.TemporaryDirectory() as folder:
        scratch = Path(folder)
        edges = pa.table({"src": names[graph.sources], "dst": names[graph.destinations]})
        pq.write_table(edges, scratch / "edges.parquet")
        members = names[graph.core]
        # Two slices, so that no caution is on all.
        core = pa.table({"host": members, "slice": [f"part{i % 2}" for i in range(len(members))]})
        pacsv.write_csv(core, scratch / "core.csv")
        hosts = pa.table({"host": names})
        pq.write_table(hosts, scratch / "hosts.parquet")
        settings = {
            "run.id": f'"{_RUN}"',
            "run.output": f'"{scratch}/tables"',
            "run.work": f'"{scratch}/work"',
            "input.edges": f'"{scratch}/edges.parquet"',
            "input.core": f'"{scratch}/core.csv"',
            "input.hosts": f'"{scratch}/hosts.parquet"',
            "candidates.min_relative_mass": "-1e6",
        }
        words = [word for key, value in settings.items() for word in ("--set", f"{key}={value}")]
        subprocess.run([sys.executable, str(_JOB), *words, "--quiet"], check=True)
        manifest = json.loads((scratch / "tables" / "runs" / f"{_RUN}.json").read_text())
        files = manifest["tables"]["spam_candidates"]["files"]
        parts = [pq.ParquetFile(scratch / "tables" / file["path"]).read() for file in files]
    table = pa.concat_tables([part.select(["host", "priority"]) for part in parts])
    numbers = [int(host.split(".")[0][1:]) for host in table["host"].to_pylist()]
    return np.array(numbers), table["priority"].to_numpy()
