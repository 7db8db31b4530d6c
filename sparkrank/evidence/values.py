"""`host_scores` → arrays of scores by stripe, in the order of the graph's ids.

The states of the solve are gone by the time candidates are ranked; the published table has it all, under
names.  One pass hashes the names as the graph's build did and lays the scores beside the graph again.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import narrow, read_arrays, write_arrays
from sparkrank.config import Candidates
from sparkrank.errors import SparkrankError
from sparkrank.evidence.folder import EvidenceFolder
from sparkrank.graph.build import Graph
from sparkrank.kernels.lookup import find_ids
from sparkrank.kernels.stripes import stripe_of
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.octets import octets_of
from sparkrank.places import Place

_DOUBLES = ("scaled_pagerank", "trust", "absolute_mass", "relative_mass")
_COUNTS = ("in_degree", "out_degree")
_NAMES = ("domain", "suffix")
_COLUMNS = ("host", *_DOUBLES, *_COUNTS, *_NAMES, "core_distance", "is_core")
# Domains and suffixes are compared, never looked up: any seed will do.
_NAME_SEED = 0x5EED


@dataclass(frozen=True)
class ScanScores:
    """Reads one file of `host_scores`; writes its rows by stripe."""

    folder: EvidenceFolder
    files: list[Place]
    salt: int
    n_stripes: int

    def __call__(self, number: int) -> None:
        place = self.files[number]
        table = pq.ParquetFile(place.path, filesystem=place.filesystem).read(
            list(_COLUMNS), use_threads=False
        )
        hosts = _whole(table["host"])
        ids = xxh64(*octets_of(hosts), self.salt)
        order = np.argsort(ids)
        arrays: dict[str, NDArray[Any]] = {
            "ids": ids,
            **{name: table[name].to_numpy() for name in (*_DOUBLES, *_COUNTS)},
            **{name: _hashes(table[name], ids) for name in _NAMES},
            # 0 for hosts that the core does not reach.
            "core_steps": table["core_distance"].fill_null(-1).to_numpy().astype(np.int64) + 1,
            "is_core": table["is_core"].to_numpy(),
        }
        arrays = {name: values[order] for name, values in arrays.items()}
        bounds = np.searchsorted(stripe_of(arrays["ids"], self.n_stripes), np.arange(self.n_stripes + 1))
        write_arrays(self.folder.scanned(number), {**arrays, "bounds": bounds})


class LaidReport(NamedTuple):
    """Targets of a stripe, and the weight of its core members."""

    targets: int
    core_weight: float


@dataclass(frozen=True)
class LayValues:
    """Gathers one stripe's scores and chooses its targets."""

    folder: EvidenceFolder
    graph: Graph
    n_files: int
    wanted: Candidates | NDArray[np.int64]
    """Hosts over both thresholds are targets, core members excluded; or those of some ids."""

    def __call__(self, stripe: int) -> LaidReport:
        values = self._gather(stripe)
        files = self.graph.folder
        ids = read_arrays(files.ids(stripe))["ids"]
        position = read_arrays(files.order(stripe))["position"].astype(np.int64)
        host_at = np.empty(len(position), dtype=np.uint32)
        host_at[position] = np.arange(len(position), dtype=np.uint32)
        out_weight = read_arrays(files.order(stripe))["out_weight"][position]
        if isinstance(self.wanted, Candidates):
            enough = values["scaled_pagerank"] >= self.wanted.min_scaled_pagerank
            enough &= values["relative_mass"] >= self.wanted.min_relative_mass
            chosen = np.flatnonzero(enough & ~values["is_core"])
        else:
            chosen = np.flatnonzero(np.isin(ids, self.wanted))
        is_target = np.zeros(len(position), dtype=np.bool_)
        is_target[chosen] = True
        for name in (*_COUNTS, "core_steps"):
            values[name] = narrow(values[name])
        core = read_arrays(self.folder.core_list())
        # 0 for hosts that are no members; a member that the graph does not have is at no place.
        core_weight, place = np.zeros(len(ids)), find_ids(ids, core["ids"])
        core_weight[place[place >= 0]] = core["weight"][place >= 0]
        values["core_weight"] = core_weight
        laid = {**values, "host_at": host_at, "out_weight": out_weight, "is_target": is_target}
        write_arrays(self.folder.values(stripe), laid)
        arrays = {"host": chosen.astype(np.int64), "score": values["scaled_pagerank"][chosen]}
        arrays["in_degree"] = values["in_degree"][chosen].astype(np.int64)
        arrays |= {name: values[name][chosen] for name in _NAMES}
        write_arrays(self.folder.targets(stripe), arrays)
        names = host_names(self.graph, stripe, chosen)
        sink = pa.BufferOutputStream()
        pq.write_table(pa.table({"host": names}), sink, compression="zstd")
        self.folder.target_names(stripe).write_bytes(sink.getvalue())
        return LaidReport(len(chosen), float(np.add.reduce(core_weight)))

    def _gather(self, stripe: int) -> dict[str, NDArray[Any]]:
        parts: dict[str, list[NDArray[Any]]] = {}
        for number in range(self.n_files):
            found = read_arrays(self.folder.scanned(number))
            first, end = found["bounds"][stripe : stripe + 2].tolist()
            for name, values in found.items():
                if name != "bounds":
                    parts.setdefault(name, []).append(values[first:end])
        gathered = {name: np.concatenate(values) for name, values in parts.items()}
        order = np.argsort(gathered["ids"])
        gathered = {name: values[order] for name, values in gathered.items()}
        if not np.array_equal(gathered.pop("ids"), read_arrays(self.graph.folder.ids(stripe))["ids"]):
            raise SparkrankError(
                "host_scores: expected the hosts of the graph in the work folder, found others; "
                "remove the work folder and run again"
            )
        return gathered


def host_names(graph: Graph, stripe: int, hosts: NDArray[np.integer]) -> pa.Array:
    """Names of some hosts of a stripe, by their places in the order of the ids."""
    place = graph.folder.names(stripe)
    names = pq.read_table(place.path, filesystem=place.filesystem)["host"]
    return _whole(names.take(pa.array(hosts)))


def _whole(column: pa.ChunkedArray) -> pa.Array:
    return pa.concat_arrays(column.chunks) if column.num_chunks else pa.array([], column.type)


def _hashes(column: pa.ChunkedArray, ids: NDArray[np.int64]) -> NDArray[np.int64]:
    """A hash of each name; a host without one has its own id, so that it is alone."""
    names = _whole(column)
    hashes = xxh64(*octets_of(names), _NAME_SEED)
    return np.where(names.is_valid().to_numpy(zero_copy_only=False), hashes, ids)
