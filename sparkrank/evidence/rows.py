"""Sources of a group of targets → rows of ``candidate_support`` and one row of measures a target."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays
from sparkrank.evidence.group_work import write_strong_links
from sparkrank.evidence.paths import Gathering
from sparkrank.evidence.shapes import GroupShapes, group_shapes, source_keys
from sparkrank.evidence.sources import DIRECT, KINDS, ORIGIN, Sources, by_contribution
from sparkrank.kernels.reasons import CAUTIONS, REASONS
from sparkrank.kernels.sources import KIND_NAMES
from sparkrank.tables import CANDIDATE_SUPPORT, arrow_schema
from sparkrank.tables.evidence import SOURCE_COLUMNS
from sparkrank.tables.measures import MEASURES

# The sources that carry this share of a score are listed: what is left changes no reviewer's mind.
LISTED_SHARE = 0.95


class RowsReport(NamedTuple):
    """Rows of support, and strong links, of a group of targets."""

    support: int
    strong_links: int


@dataclass(frozen=True)
class GroupRows:
    """One group's rows; ``chunks[kind][s]`` are the files of a kind that stripe s left."""

    gathering: Gathering
    groups: list[tuple[int, int]]
    chunks: dict[str, list[int]]
    steps: int
    """Steps that were followed."""
    listed: int

    def __call__(self, group: int) -> RowsReport:
        gathering = self.gathering
        low, high = self.groups[group]
        score = gathering.targets.score[low:high]
        hosts = self._hosts(low, high)
        shapes = group_shapes(gathering, self.chunks, low, high)
        tables, unexplained = [], {}
        for kind in KINDS:
            rows, unexplained[kind] = self._support(kind, group, hosts, score, shapes)
            tables.append(rows)
        support = pa.concat_tables(tables)
        _write(gathering.folder.support(group), support)
        measures = {
            "host": hosts,
            # NaN says that there is no such number.
            **{name: pa.array(values, from_pandas=True) for name, values in shapes.measures.items()},
            "direct_unexplained_share": unexplained[DIRECT],
            "origin_unexplained_share": unexplained[ORIGIN],
            "origin_error_share": self._lost(low, high) / score,
        }
        ordered = {name: measures[name] for name in ("host", "priority", *MEASURES)}
        ordered["reasons"] = _texts(shapes.marks.reasons, REASONS)
        ordered["look_alikes"] = _texts(shapes.marks.cautions, CAUTIONS)
        _write(gathering.folder.measures(group), pa.table(ordered))
        strong = write_strong_links(gathering, group, low, shapes.strong)
        return RowsReport(support.num_rows, strong)

    def _hosts(self, low: int, high: int) -> pa.Array:
        """Names of the group's targets."""
        parts = []
        for stripe, count in enumerate(self.gathering.target_counts):
            first = self.gathering.first_target(stripe)
            here = (max(low, first) - first, min(high, first + count) - first)
            if here[0] < here[1]:
                place = self.gathering.folder.target_names(stripe)
                names = pq.read_table(place.path, filesystem=place.filesystem)["host"]
                parts.append(names.slice(here[0], here[1] - here[0]).combine_chunks())
        return pa.concat_arrays([part.cast(pa.string()) for part in parts])

    def _lost(self, low: int, high: int) -> NDArray[np.float64]:
        """What lies behind hosts that were not followed, by target: steps and stripes in their order."""
        lost = np.zeros(high - low)
        for step in range(self.steps):
            for stripe in range(self.gathering.graph.plan.stripes):
                lost += read_arrays(self.gathering.folder.lost(step, stripe))["lost"][low:high]
        return lost

    def _support(
        self, kind: str, group: int, hosts: pa.Array, score: NDArray[np.float64], shapes: GroupShapes
    ) -> tuple[pa.Table, NDArray[np.float64]]:
        """Rows of a kind, and by target the share of its score that none of them carries."""
        low, _ = self.groups[group]
        rows = self._leading(kind, group)
        if not rows:
            return support_schema().empty_table(), 1.0 - 1.0 / score
        order, place = by_contribution(rows)
        rows = {name: values[order] for name, values in rows.items()}
        target = rows["target"].astype(np.int64) - low
        share = rows["contribution"] / score[target]
        # A target's own teleport, 1, is no in-link's: what in-links carry is the rest.
        whole = np.ones(len(score)) if kind == ORIGIN else 1.0 - 1.0 / score
        before = _sum_before(share, place)
        kept = np.flatnonzero((place < self.listed) & (before < LISTED_SHARE * whole[target]))
        listed = np.bincount(target[kept], share[kept], minlength=len(score))
        unexplained = np.maximum(0.0, whole - listed)
        numbers = {
            "target": target[kept],
            "position": place[kept] + 1,
            "share": share[kept],
            "unexplained": unexplained[target[kept]],
        }
        rows = {name: values[kept] for name, values in rows.items()}
        if kind == DIRECT:
            kinds = shapes.kind_of(source_keys(numbers["target"], rows["source"]))
            numbers["looks_like"] = np.array(KIND_NAMES, dtype=object)[kinds]
        domains = self.gathering.targets.domain[low : low + len(score)]
        return self._table(kind, rows, hosts, numbers, domains), unexplained

    def _leading(self, kind: str, group: int) -> Sources:
        parts = []
        for stripe in range(self.gathering.graph.plan.stripes):
            place = self.gathering.folder.leading(kind, group, stripe)
            if place.exists():
                parts.append(pq.read_table(place.path, filesystem=place.filesystem))
        if not parts:
            return {}
        table = pa.concat_tables(parts)
        return {name: table[name].to_numpy() for name in table.column_names}

    def _table(
        self,
        kind: str,
        rows: dict[str, NDArray[Any]],
        hosts: pa.Array,
        numbers: dict[str, NDArray[Any]],
        domains: NDArray[np.int64],
    ) -> pa.Table:
        """Rows in the table's schema; ``numbers`` are those made here, ``target`` counts in the group."""
        n, target = len(rows["source"]), numbers["target"]
        columns = {
            "host": hosts.take(pa.array(target)),
            "kind": pa.array([kind] * n, pa.string()),
            "position": pa.array(numbers["position"], pa.int32()),
            "source": pa.array(rows["name"], pa.string()),
            "contribution": pa.array(rows["contribution"]),
            "share": pa.array(numbers["share"]),
            "unexplained_share": pa.array(numbers["unexplained"]),
            "distance": pa.array(rows["distance"], pa.int32()),
            "looks_like": pa.array(numbers["looks_like"]) if kind == DIRECT else pa.nulls(n, pa.string()),
            "link_returned": pa.array(rows["returned"]) if kind == DIRECT else pa.nulls(n, pa.bool_()),
            "same_domain": pa.array(rows["domain"] == domains[target]),
            "source_is_candidate": pa.array(rows["is_target"]),
        }
        schema = support_schema()
        for name in SOURCE_COLUMNS:
            if name == "core_distance":
                steps = rows["core_steps"].astype(np.int32)
                values = pa.array(steps - 1, mask=steps == 0)
            else:
                values = pa.array(rows[name])
            columns[f"source_{name}"] = values.cast(schema.field(f"source_{name}").type)
        return pa.table(columns, schema=schema)


def _texts(marks: NDArray[np.bool_], texts: tuple[str, ...]) -> pa.Array:
    """The texts that hold for each row, in their order."""
    row, text = np.nonzero(marks)
    offsets = np.searchsorted(row, np.arange(len(marks) + 1))
    chosen = pa.array(texts, pa.string()).take(pa.array(text))
    return pa.ListArray.from_arrays(pa.array(offsets, pa.int32()), chosen)


def support_schema() -> Any:
    """Of the rows of ``candidate_support`` in work files: attributes come later."""
    schema = arrow_schema(CANDIDATE_SUPPORT)
    return schema.remove(schema.get_field_index("source_attributes"))


def _sum_before(values: NDArray[np.float64], place: NDArray[np.int64]) -> NDArray[np.float64]:
    """For each value the sum of those of the same target before it, added from left to right.

    ``place`` counts from 0 in each target.
    """
    total = np.cumsum(values)
    before = total - values
    starts = np.flatnonzero(place == 0)
    return before - np.repeat(before[starts], np.diff(starts, append=len(values)))


def _write(place: Any, table: pa.Table) -> None:
    sink = pa.BufferOutputStream()
    pq.write_table(table, sink, compression="zstd")
    place.write_bytes(sink.getvalue())
