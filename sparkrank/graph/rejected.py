"""Values of the input that could not be used, counted as they are met."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.graph.piece_names import PieceNames
from sparkrank.places import Place
from sparkrank.shown import shown_value
from sparkrank.tables import REJECTED_ROWS, arrow_schema

BAD_LINKS = "bad_links"
"""The reason of a row whose ``links`` is null or not positive."""


@dataclass
class RejectedValues:
    """Rejected values with their reasons and the number of rows."""

    counts: dict[tuple[str, str | None, str], int] = field(default_factory=dict)

    def add_values(self, source: str, names: PieceNames, rows: NDArray[np.int32]) -> None:
        """Rows with a rejected value, as numbers of ``names``."""
        for number, count in zip(
            *(part.tolist() for part in np.unique(rows, return_counts=True)), strict=True
        ):
            self._add(source, *names.rejection(number), count)

    def add_links(self, batch: pa.RecordBatch, rows: NDArray[np.bool_]) -> None:
        if rows.any():
            values = batch.column("links").filter(pa.array(rows)).value_counts().to_pylist()
            for one in values:
                value = None if one["values"] is None else str(one["values"])
                self._add("edges.links", value, BAD_LINKS, one["counts"])

    def _add(self, source: str, value: str | None, reason: str, rows: int) -> None:
        key = (source, None if value is None else shown_value(value), reason)
        self.counts[key] = self.counts.get(key, 0) + rows

    def by_reason(self, table: str) -> dict[str, int]:
        found: dict[str, int] = {}
        for (source, _, reason), rows in self.counts.items():
            if source.startswith(table):
                found[reason] = found.get(reason, 0) + rows
        return found


def write_rejected(place: Place, rejected: RejectedValues) -> None:
    """Writes the counts as Parquet, in the columns of ``rejected_rows``."""
    rows = [(*key, count) for key, count in sorted(rejected.counts.items(), key=repr)]
    columns = list(zip(*rows, strict=True))
    table = pa.table(
        {
            "source": pa.array(columns[0], pa.string()),
            "row_value": pa.array(columns[1], pa.string()),
            "reason": pa.array(columns[2], pa.string()),
            "rows": pa.array(columns[3], pa.int64()),
        }
    )
    sink = pa.BufferOutputStream()
    pq.write_table(table, sink)
    place.write_bytes(sink.getvalue())


def added_up(parts: list[pa.Table]) -> pa.Table:
    """Rows of all parts; the same value for the same reason once, its rows added up."""
    table = pa.concat_tables([arrow_schema(REJECTED_ROWS).empty_table(), *parts])
    keys = ["source", "row_value", "reason"]
    found = table.group_by(keys, use_threads=False).aggregate([("rows", "sum")])
    return found.rename_columns({**{key: key for key in keys}, "rows_sum": "rows"})
