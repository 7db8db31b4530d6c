"""Tiles → cells: edges regrouped by phase and sub-block, packed for the solve.

A cell holds the sections of all edges from one build group into one stripe.  A section is the edges
from a range of sources of one stripe and phase into one phase of the destination stripe.  All sections
of a cell lie in one file: pools of values, and a table that says where each section's are.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, read_static_arrays, write_arrays
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.graph.sub_blocks import cut_sections
from sparkrank.kernels.diagonals import Section
from sparkrank.kernels.edges import destinations, sources
from sparkrank.places import Place

# A phase and a position in it in one number: hosts of a stripe have 28 bits.
_PHASE_SHIFT = 32
_IN_PHASE = (1 << _PHASE_SHIFT) - 1

# Columns of a cell's table; "at" is an index into the pool the section's values lie in.
_FIELDS = (
    "to_phase",
    "from_stripe",
    "from_phase",
    "first_source",
    "n_sources",
    "sources_wide",
    "sources_at",
    "n_edges",
    "rows_wide",
    "rows_at",
    "n_rows",
    "diagonals_at",
    "n_diagonals",
    "long_at",
    "n_long",
    "weights_at",
)


class PlacedSection(NamedTuple):
    """A section and where its sources lie: offsets count from ``first_source`` of the phase."""

    to_phase: int
    from_stripe: int
    from_phase: int
    first_source: int
    n_sources: int
    section: Section


@dataclass(frozen=True)
class CellWriter:
    """The build's last stage: the task of one tile."""

    folder: GraphFolder
    plan: GridPlan
    tiles: list[tuple[int, int]]
    phase_starts: list[list[int]]

    def __call__(self, number: int) -> dict[str, int]:
        stripe, group = self.tiles[number]
        tile = read_arrays(self.folder.tile(stripe, group))
        bounds = tile["bounds"]
        into = self._phased(stripe)
        placed: list[PlacedSection] = []
        for at, source_stripe in enumerate(self.plan.stripes_of_build_group(group)):
            part = slice(int(bounds[at]), int(bounds[at + 1]))
            keys = tile["keys"][part]
            if len(keys):
                weights = tile["weights"][part] if "weights" in tile else None
                out_of = into if source_stripe == stripe else self._phased(source_stripe)
                edges = (into.take(destinations(keys)), out_of.take(sources(keys)), weights)
                placed += self._sections(source_stripe, *edges)
        placed.sort(key=lambda one: one[:4])
        stamp = write_cell(self.folder.cell(stripe, group), placed)
        return {"bytes": stamp.size, "crc32": stamp.crc32}

    def _phased(self, stripe: int) -> NDArray[np.int64]:
        """Phase and position in the phase of the stripe's hosts, in the order of their ids."""
        position = read_arrays(self.folder.order(stripe))["position"].astype(np.int64)
        starts = np.array(self.phase_starts[stripe])
        # Phases may be empty: "right" takes the last phase that starts here.
        phase = np.searchsorted(starts, position, side="right") - 1
        phased: NDArray[np.int64] = phase << _PHASE_SHIFT | (position - starts[phase])
        return phased

    def _sections(
        self,
        source_stripe: int,
        destination: NDArray[np.int64],
        source: NDArray[np.int64],
        weights: NDArray[np.int64] | None,
    ) -> Iterator[PlacedSection]:
        from_starts = self.phase_starts[source_stripe]
        n_phases = len(from_starts) - 1
        kind = ((destination >> _PHASE_SHIFT) * n_phases + (source >> _PHASE_SHIFT)).astype(np.uint8)
        # A stable sort of small integers is a radix sort.
        order = np.argsort(kind, kind="stable")
        destination, source = destination[order] & _IN_PHASE, source[order] & _IN_PHASE
        weights = None if weights is None else weights[order]
        ends = np.cumsum(np.bincount(kind, minlength=n_phases * n_phases)).tolist()
        for value, (low, high) in enumerate(pairwise([0, *ends])):
            if low == high:
                continue
            to_phase, from_phase = divmod(value, n_phases)
            part = slice(low, high)
            n_sources = from_starts[from_phase + 1] - from_starts[from_phase]
            chosen = None if weights is None else weights[part]
            sections = cut_sections(destination[part], source[part], chosen, n_sources)
            for first_source, span, section in sections:
                yield PlacedSection(to_phase, source_stripe, from_phase, first_source, span, section)


def write_cell(place: Place, placed: list[PlacedSection]) -> Any:
    """Writes the sections' pools and table; returns the file's stamp."""
    pools: dict[str, list[NDArray[Any]]] = {
        name: [] for name in ("narrow", "wide", "diagonals", "long_starts", "weights")
    }
    used = dict.fromkeys(pools, 0)

    def put(pool: str, values: NDArray[Any]) -> int:
        at = used[pool]
        pools[pool].append(values)
        used[pool] += len(values)
        return at

    table = np.zeros((len(placed), len(_FIELDS)), dtype=np.int64)
    for row, one in enumerate(placed):
        section = one.section
        wide = [int(values.itemsize > 2) for values in (section.sources, section.rows)]
        pool_of = ("narrow", "wide")
        table[row] = (
            *one[:5],
            wide[0],
            put(pool_of[wide[0]], section.sources),
            len(section.sources),
            wide[1],
            put(pool_of[wide[1]], section.rows),
            len(section.rows),
            put("diagonals", section.diagonals),
            len(section.diagonals),
            put("long_starts", section.long_starts),
            len(section.long_starts),
            0 if section.weights is None else put("weights", section.weights),
        )
    dtypes = {"narrow": np.uint16, "wide": np.uint32, "diagonals": np.int64, "long_starts": np.int64}
    arrays: dict[str, NDArray[Any]] = {"table": table}
    for name, dtype in dtypes.items():
        arrays[name] = np.concatenate([np.zeros(0, dtype), *pools[name]]).astype(dtype, copy=False)
    if pools["weights"]:
        weights = np.concatenate(pools["weights"])
        arrays["weights"] = weights.astype(np.min_scalar_type(int(weights.max())))
    return write_arrays(place, arrays)


def read_cell(place: Place, to_phase: int) -> Iterator[PlacedSection]:
    """A cell's sections into one phase, in the order of the solve's sums; views of the mapped file."""
    arrays = read_static_arrays(place)
    pools = (arrays["narrow"], arrays["wide"])
    table = arrays["table"]
    for values in table[table[:, 0] == to_phase].tolist():
        row = dict(zip(_FIELDS, values, strict=True))
        edges = slice(row["sources_at"], row["sources_at"] + row["n_edges"])
        rows = slice(row["rows_at"], row["rows_at"] + row["n_rows"])
        weights = slice(row["weights_at"], row["weights_at"] + row["n_edges"])
        section = Section(
            sources=pools[row["sources_wide"]][edges],
            weights=arrays["weights"][weights] if "weights" in arrays else None,
            rows=pools[row["rows_wide"]][rows],
            diagonals=arrays["diagonals"][row["diagonals_at"] : row["diagonals_at"] + row["n_diagonals"]],
            long_starts=arrays["long_starts"][row["long_at"] : row["long_at"] + row["n_long"]],
        )
        yield PlacedSection._make([*values[:5], section])
