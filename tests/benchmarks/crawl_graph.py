"""Crawl-like host graphs of any size, with host names: `python tests/benchmarks/crawl_graph.py --edges 60e6`.

Links are drawn by R-MAT (Chakrabarti, Zhan & Faloutsos, "R-MAT: a recursive model for graph mining", 2004;
the quadrants .57, .19, .19, .05 are those of the Graph500 benchmark; both from memory), which gives hubs and
a long tail.  Three things of a crawl are laid over it: half of the ids never link out, as hosts that were
seen but not fetched; hosts belong to domains of power-law size; a share of every host's links stays in its
domain.  Rows repeat, as page links between two hosts do.

Rows come in chunks that depend on seed and chunk number alone; everything else about an id is computed from
the id.  So memory is the same at any scale, but for one byte an id, and two runs write the same rows.
"""

import argparse
import csv
import functools
import json
import math
import shutil
import tempfile
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.csv as pacsv
import pyarrow.parquet as pq
from crawl_names import GROUPS, HostNames, mixed, scatter

# Counts up whenever the same settings give other rows.
_FORMAT = 1
_CHUNK_ROWS = 1 << 20  # about 0.3 GB of arrays and strings in flight
_FILE_ROWS = 4 * _CHUNK_ROWS
# Some 14 distinct links a host; the host graph of the first paper on mass estimation has 13 (from memory).
_ROWS_PER_ID = 16
# Upper ends of the quadrants (0,0), (0,1), (1,0) in 16 bits; (1,1) is the rest.
_QUADRANTS = [round(share * 65536) for share in (0.57, 0.76, 0.95)]
_LOCAL_SHARE = 0.3
_LEAST_LOCAL = 8  # hosts of a domain from which its hosts link to each other
_CORE_SHARE = 0.001  # of the hosts with out-links
_LEAST_CORE = 70  # ten a slice on small graphs


@dataclass(frozen=True, kw_only=True)
class CrawlSettings:
    """What the rows depend on: their number and the seed."""

    edges: int
    seed: int = 1

    @property
    def id_bits(self) -> int:
        return max(10, round(math.log2(self.edges / _ROWS_PER_ID)))

    @property
    def n_ids(self) -> int:
        return 1 << self.id_bits

    @property
    def n_chunks(self) -> int:
        return -(-self.edges // _CHUNK_ROWS)


@dataclass(frozen=True, kw_only=True)
class CrawlFiles:
    """The written graph; `facts` holds rows, hosts, sources (hosts with out-links) and core."""

    folder: Path
    settings: CrawlSettings
    facts: dict[str, int]

    @property
    def edges(self) -> Path:
        """Folder of Parquet files with host names: src, dst."""
        return self.folder / "edges"

    @property
    def core(self) -> Path:
        """CSV: host, slice."""
        return self.folder / "core.csv"

    @property
    def numeric(self) -> Path:
        """The same rows as lines `src dst` of ids, as GraphX loads them."""
        return self.folder / "edges.txt"


def crawl_files(data: Path, settings: CrawlSettings, *, numeric: bool = False) -> CrawlFiles:
    """The files of these settings below `data`, written now where they are not there yet."""
    folder = data / f"crawl-{settings.edges}-{settings.seed}-{_FORMAT}"
    facts_file = folder / "facts.json"
    if not facts_file.exists():
        shutil.rmtree(folder, ignore_errors=True)
        folder.mkdir(parents=True)
        facts = _write_names(folder, settings)
        facts_file.write_text(json.dumps(facts))
    files = CrawlFiles(folder=folder, settings=settings, facts=json.loads(facts_file.read_text()))
    if numeric and not files.numeric.exists():
        _write_numeric(files)
    return files


@functools.lru_cache(maxsize=1)
def names_of(settings: CrawlSettings) -> HostNames:
    """The names of the graph's ids."""
    return HostNames(settings.id_bits, settings.seed)


def chunks(settings: CrawlSettings) -> Iterator[tuple[np.ndarray, np.ndarray]]:
    """Source and destination ids of the rows, int64, chunk by chunk."""
    for number in range(settings.n_chunks):
        n_rows = min(_CHUNK_ROWS, settings.edges - number * _CHUNK_ROWS)
        yield _chunk(settings, number, n_rows)


def _chunk(settings: CrawlSettings, number: int, n_rows: int) -> tuple[np.ndarray, np.ndarray]:
    random = np.random.Generator(np.random.SFC64([settings.seed, number]))
    src = np.zeros(n_rows, dtype=np.int64)
    dst = np.zeros(n_rows, dtype=np.int64)
    first, second, third = _QUADRANTS
    for bit in range(settings.id_bits):
        draw = random.integers(0, 65536, n_rows, dtype=np.uint16)
        lower = draw >= second
        src |= lower.astype(np.int64) << bit
        dst |= np.where(lower, draw >= third, draw >= first).astype(np.int64) << bit
    # Without the scatter, ids would be sorted by how busy they are.
    src, dst = scatter(src, settings.id_bits), scatter(dst, settings.id_bits)
    src = _linking(src, settings)
    first_host, size = names_of(settings).domains(src)
    # In the smallest domains a busy host would repeat the same few links without end.
    local = (random.random(n_rows, dtype=np.float32) < _LOCAL_SHARE) & (size >= _LEAST_LOCAL)
    place = (random.random(n_rows, dtype=np.float32) * size).astype(np.int64)
    np.copyto(dst, first_host + np.minimum(place, size - 1), where=local)
    return src, dst


def _linking(ids: np.ndarray, settings: CrawlSettings) -> np.ndarray:
    """The one host of each pair of neighbours that links out; the other's links are handed to it."""
    pair = ids >> 1
    coin = (mixed(pair, settings.seed) >> 40) & 1
    return (pair << 1) | coin.astype(np.int64)


def _write_names(folder: Path, settings: CrawlSettings) -> dict[str, int]:
    """Edges with names in Hive partitions of some files' worth of rows, and the core list."""
    seen = np.zeros(settings.n_ids, dtype=np.uint8)  # 1: has out-links, 2: has in-links
    writer: pq.ParquetWriter | None = None
    rows = 0
    for src, dst in chunks(settings):
        table = pa.table({"src": names_of(settings).names(src), "dst": names_of(settings).names(dst)})
        if rows % _FILE_ROWS == 0:
            if writer is not None:
                writer.close()
            part = folder / "edges" / f"batch={rows // _FILE_ROWS:04d}"
            part.mkdir(parents=True)
            writer = pq.ParquetWriter(part / "edges.parquet", table.schema)
        writer.write_table(table, row_group_size=_CHUNK_ROWS)
        rows += len(table)
        seen[src] |= 1
        seen[dst] |= 2
    writer.close()
    n_sources = int(np.count_nonzero(seen & 1))
    n_core = _write_core(folder / "core.csv", settings, seen, n_sources)
    return {"rows": rows, "hosts": int(np.count_nonzero(seen)), "sources": n_sources, "core": n_core}


def _write_core(path: Path, settings: CrawlSettings, seen: np.ndarray, n_sources: int) -> int:
    """A random choice of hosts with out-links, block by block of ids; the slice is the group."""
    share = min(1.0, max(_CORE_SHARE, _LEAST_CORE / n_sources))
    limit = np.uint64(min(share * 2.0**64, 2.0**64 - 2048))
    n_core = 0
    with path.open("w", newline="") as file:
        rows = csv.writer(file)
        rows.writerow(("host", "slice"))
        for start in range(0, settings.n_ids, _CHUNK_ROWS):
            ids = start + np.flatnonzero(seen[start : start + _CHUNK_ROWS] & 1)
            ids = ids[mixed(ids, settings.seed + 2) <= limit]
            slices = (GROUPS[group] for group in names_of(settings).groups(ids).tolist())
            rows.writerows(zip(names_of(settings).names(ids).to_pylist(), slices, strict=True))
            n_core += len(ids)
    return n_core


def _write_numeric(files: CrawlFiles) -> None:
    unfinished = files.numeric.with_suffix(".part")
    options = pacsv.WriteOptions(include_header=False, delimiter=" ")
    with unfinished.open("wb") as file:
        for src, dst in chunks(files.settings):
            pacsv.write_csv(pa.table({"src": src, "dst": dst}), file, options)
    unfinished.rename(files.numeric)


def default_data() -> Path:
    """Where graphs are kept from one benchmark to the next unless told otherwise."""
    return Path(tempfile.gettempdir()) / "sparkrank-benchmarks"


def main() -> None:
    """Write a graph and say what it is."""
    parser = argparse.ArgumentParser(description="Write a crawl-like host graph.")
    parser.add_argument("--edges", type=float, default=1e6, help="rows, such as 60e6")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--data", type=Path, default=default_data(), help="folder that keeps the graphs")
    parser.add_argument("--numeric", action="store_true", help="also the rows as text of numeric ids")
    arguments = parser.parse_args()
    started = time.monotonic()
    settings = CrawlSettings(edges=int(arguments.edges), seed=arguments.seed)
    files = crawl_files(arguments.data, settings, numeric=arguments.numeric)
    facts = ", ".join(f"{value:,} {name}" for name, value in files.facts.items())
    print(f"{files.folder}: {facts}; {time.monotonic() - started:.1f} s")


if __name__ == "__main__":
    main()
