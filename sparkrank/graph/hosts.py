"""Distinct hosts → hashed ids, cut into stripes, sorted.

An id is a 64-bit hash of the canonical host, so that no edge is ever joined with a name.  A stripe is
a fixed range of ids.  Two hosts of one id are neighbours after sorting; then another salt is tried.
"""

from __future__ import annotations

import logging
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.arrays import write_arrays
from sparkrank.errors import SparkrankError
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.graph.sinks import write_partitions
from sparkrank.kernels.edges import MAX_STRIPE_HOSTS

if TYPE_CHECKING:
    from pyspark.sql import Column, DataFrame

log = logging.getLogger(__name__)

_TRIES = 3
_NAME_ROWS = 1 << 17  # rows a Parquet row group of names: some MB


def id_of(host: Column, salt: int) -> Column:
    """The 64-bit id of a canonical host under a salt."""
    from pyspark.sql import functions as sf

    return sf.xxhash64(sf.lit(salt), host)


def stripe_of(host_id: Column, n_stripes: int) -> Column:
    """The stripe of an id: its upper 32 bits scaled to the number of stripes."""
    from pyspark.sql import functions as sf

    upper = sf.shiftright(host_id, 32) + sf.lit(1 << 31)
    return sf.shiftright(upper * sf.lit(n_stripes), 32).cast("int")


def write_hosts(hosts: DataFrame, folder: GraphFolder, plan: GridPlan) -> dict[str, Any]:
    """Writes ids and names of every stripe.

    Parameters
    ----------
    hosts : distinct canonical hosts in the column ``host``.

    Returns
    -------
    The stage's record: ``salt``, ``stripe_hosts`` (hosts of each stripe) and ``hosts`` (their number).
    """
    from pyspark.sql import functions as sf

    salt = 0
    for attempt in range(_TRIES):
        host_id = id_of(sf.col("host"), salt)
        rows = hosts.select(host_id.alias("id"), "host")
        writer = _StripeWriter(folder)
        reports = write_partitions(
            rows, plan.stripes, stripe_of(sf.col("id"), plan.stripes), writer, "hosts into stripes"
        )
        clashes = sum(report["clashes"] for report in reports.values())
        if not clashes:
            counts = [reports.get(stripe, {"hosts": 0})["hosts"] for stripe in range(plan.stripes)]
            for stripe in set(range(plan.stripes)) - set(reports):
                writer.write(stripe, np.zeros(0, np.int64), pa.array([], pa.string()))
            return {"salt": salt, "stripe_hosts": counts, "hosts": sum(counts)}
        log.warning("%d pairs of hosts share an id under salt %d (try %d)", clashes, salt, attempt + 1)
        # The next salt is a function of all hosts, in no order: the same however the input is cut.
        salt = sum(report["id_sum"] for report in reports.values()) % (1 << 62)
    raise SparkrankError(
        f"host ids: expected distinct 64-bit ids within {_TRIES} salts, found {clashes} clashes each time; "
        "the input holds names forged against the hash"
    )


@dataclass(frozen=True)
class _StripeWriter:
    """Sorts one stripe's hosts by id and writes both files."""

    folder: GraphFolder

    def __call__(self, stripe: int, columns: list[pa.ChunkedArray]) -> dict[str, Any]:
        ids = columns[0].to_numpy()
        order = np.argsort(ids, kind="stable")
        ids = ids[order]
        if len(ids) > MAX_STRIPE_HOSTS:
            raise SparkrankError(f"{len(ids)} hosts, expected at most {MAX_STRIPE_HOSTS} a stripe")
        clashes = int(np.count_nonzero(ids[1:] == ids[:-1]))
        if not clashes:
            self.write(stripe, ids, columns[1].combine_chunks().take(pa.array(order)))
        id_sum = int(np.add.reduce(ids.view(np.uint64)))
        return {"hosts": len(ids), "clashes": clashes, "id_sum": id_sum}

    def write(self, stripe: int, ids: np.ndarray[Any, np.dtype[np.int64]], names: pa.Array) -> None:
        write_arrays(self.folder.ids(stripe), {"ids": ids})
        sink = pa.BufferOutputStream()
        table = pa.table({"host": names.cast(pa.string())})
        pq.write_table(table, sink, compression="zstd", row_group_size=_NAME_ROWS, use_dictionary=False)
        self.folder.names(stripe).write_bytes(sink.getvalue())
