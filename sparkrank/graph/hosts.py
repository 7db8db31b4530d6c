"""Scanned hosts → sorted distinct ids and names, a stripe each.

An id is a 64-bit hash of the canonical host, so that no edge is ever joined with a name.  A stripe is
a fixed range of ids.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.errors import SparkrankError
from sparkrank.graph.folder import GraphFolder
from sparkrank.kernels.edges import MAX_STRIPE_HOSTS
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.octets import octets_of

# Tells two names of one id apart: any other seed than the ids' will do.
_CHECK_SEED = 0x5EED
_NAME_ROWS = 1 << 17  # rows a Parquet row group of names: some MB


@dataclass(frozen=True)
class HostsTask:
    """Gathers one stripe's hosts from all pieces; the report has ``hosts``, ``clashes`` and ``id_sum``."""

    folder: GraphFolder
    n_pieces: int

    def __call__(self, stripe: int) -> dict[str, Any]:
        ids, names = [], []
        for piece in range(self.n_pieces):
            found = read_arrays(self.folder.scanned_hosts(piece))
            first, end = found["bounds"][stripe : stripe + 2].tolist()
            ids.append(found["ids"][first:end])
            names.append(_names(found, first, end))
        all_ids = np.concatenate(ids) if ids else np.zeros(0, np.int64)
        order = np.argsort(all_ids, kind="stable")
        sorted_ids = all_ids[order]
        is_first = np.ones(len(order), np.bool_)
        np.not_equal(sorted_ids[1:], sorted_ids[:-1], out=is_first[1:])
        # Two hosts of one id are neighbours now; a second hash tells them from one host seen twice.
        checks = np.concatenate(
            [np.zeros(0, np.int64), *(xxh64(*octets_of(part), _CHECK_SEED) for part in names)]
        )
        checks = checks[order]
        clashes = int(np.count_nonzero(~is_first[1:] & (checks[1:] != checks[:-1])))
        ids_here = sorted_ids[is_first]
        if len(ids_here) > MAX_STRIPE_HOSTS:
            raise SparkrankError(f"{len(ids_here)} hosts, expected at most {MAX_STRIPE_HOSTS} a stripe")
        if not clashes:
            write_arrays(self.folder.ids(stripe), {"ids": ids_here})
            rows = np.empty(len(order), np.int32)
            rows[order] = np.cumsum(is_first, dtype=np.int32) - np.int32(1)
            bounds = np.cumsum([0, *(len(part) for part in ids)])
            write_arrays(self.folder.scanned_rows(stripe), {"bounds": bounds, "rows": rows})
            self._write_names(stripe, names, order[is_first])
        id_sum = int(np.add.reduce(ids_here.view(np.uint64)))
        return {"hosts": len(ids_here), "clashes": clashes, "id_sum": id_sum}

    def _write_names(self, stripe: int, names: list[pa.Array], chosen: np.ndarray[Any, Any]) -> None:
        """Names of the chosen entries, in that order; only these are ever copied."""
        # Entries of a piece lie together: take each piece's, then put all in order.
        firsts = np.concatenate(([0], np.cumsum([len(part) for part in names]))).astype(np.int64)
        by_piece = np.sort(chosen)
        cuts = np.searchsorted(by_piece, firsts)
        parts = [
            part.take(pa.array(by_piece[cuts[i] : cuts[i + 1]] - firsts[i])) for i, part in enumerate(names)
        ]
        gathered = pa.concat_arrays(parts) if parts else pa.array([], pa.large_string())
        ordered = gathered.take(pa.array(np.searchsorted(by_piece, chosen)))
        sink = pa.BufferOutputStream()
        table = pa.table({"host": ordered.cast(pa.string())})
        pq.write_table(table, sink, compression="zstd", row_group_size=_NAME_ROWS, use_dictionary=False)
        self.folder.names(stripe).write_bytes(sink.getvalue())


def _names(found: dict[str, np.ndarray[Any, Any]], first: int, end: int) -> pa.Array:
    """Names of some of a piece's hosts, without a copy."""
    offsets = np.zeros(end - first + 1, np.int64)
    np.cumsum(found["lengths"][first:end], out=offsets[1:])
    offsets += int(found["lengths"][:first].sum(dtype=np.int64))
    buffers = [None, pa.py_buffer(offsets), pa.py_buffer(found["bytes"])]
    return pa.Array.from_buffers(pa.large_string(), end - first, buffers)
