"""Tiles → cells: edges regrouped by phase and sub-block, packed for the solve.

A cell holds the sections of all edges from one build group into one stripe.  A section is the edges
from a range of sources of one stripe and phase into one phase of the destination stripe.  All sections
of a cell lie in one file: pools of values, and a table that says where each section's are.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, read_static_arrays, write_arrays
from sparkrank.graph.folder import GraphFolder
from sparkrank.graph.plan import GridPlan
from sparkrank.kernels.diagonals import Section, make_section
from sparkrank.kernels.edges import destinations, sources
from sparkrank.places import Place

# 2^16 offsets fit 16 bits, and their 0.5 MB a column fit a core's cache with room for the sums …
_SUB_BLOCK_SOURCES = 1 << 16
# … but every row of a section costs a scattered addition: sub-blocks widen to 2 MB a column, a core's
# whole cache, while rows have fewer edges than this on average …
_RUN_EDGES = 4
_WIDE_SUB_BLOCK_SOURCES = 1 << 18
# … and further while a section has fewer edges than numpy's calls are worth.
_SUB_BLOCK_EDGES = 1 << 17

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
        position = self._positions(stripe)
        placed: list[PlacedSection] = []
        for at, source_stripe in enumerate(self.plan.stripes_of_build_group(group)):
            part = slice(int(bounds[at]), int(bounds[at + 1]))
            keys = tile["keys"][part]
            if not len(keys):
                continue
            weights = tile["weights"][part] if "weights" in tile else None
            source_position = self._positions(source_stripe)
            edges = (position[destinations(keys)], source_position[sources(keys)], weights)
            placed += self._sections(stripe, source_stripe, *edges)
        placed.sort(key=lambda one: one[:4])
        stamp = write_cell(self.folder.cell(stripe, group), placed)
        return {"bytes": stamp.size, "crc32": stamp.crc32}

    def _positions(self, stripe: int) -> NDArray[np.int64]:
        return read_arrays(self.folder.order(stripe))["position"].astype(np.int64)

    def _sections(
        self,
        stripe: int,
        source_stripe: int,
        destination: NDArray[np.int64],
        source: NDArray[np.int64],
        weights: NDArray[np.int64] | None,
    ) -> Iterator[PlacedSection]:
        to_starts, from_starts = (np.array(self.phase_starts[s]) for s in (stripe, source_stripe))
        to_phase = _phase_of(to_starts, destination)
        from_phase = _phase_of(from_starts, source)
        n_phases = len(to_starts) - 1
        kind = to_phase * n_phases + from_phase
        for value in np.unique(kind):
            chosen = np.flatnonzero(kind == value)
            into, out_of = divmod(int(value), n_phases)
            first, end = int(from_starts[out_of]), int(from_starts[out_of + 1])
            sub_blocks = _cut(
                destination[chosen] - to_starts[into],
                source[chosen] - first,
                None if weights is None else weights[chosen],
                end - first,
            )
            for first_source, n_sources, section in sub_blocks:
                yield PlacedSection(into, source_stripe, out_of, first_source, n_sources, section)


def _phase_of(starts: NDArray[np.int64], position: NDArray[np.int64]) -> NDArray[np.int64]:
    # Phases may be empty: "right" takes the last phase that starts here.
    return np.searchsorted(starts, position, side="right") - 1


def _cut(
    destination: NDArray[np.int64],
    source: NDArray[np.int64],
    weights: NDArray[np.int64] | None,
    n_sources: int,
) -> Iterator[tuple[int, int, Section]]:
    """Cuts edges of one pair of phases into sub-blocks of sources."""
    n_rows = int(destination.max()) + 1
    span = _sub_block_span(len(source), n_rows, n_sources)
    block, offset = np.divmod(source, span)
    # One key a (block, destination, offset): at most sources x destinations of a stripe, below 2^56.
    key = (block * n_rows + destination) * span + offset
    if weights is None:
        key.sort()
    else:
        order = np.argsort(key, kind="stable")
        key, weights = key[order], weights[order]
    rest, offset = np.divmod(key, span)
    block, destination = np.divmod(rest, n_rows)
    cuts = np.searchsorted(block, np.arange(-(-n_sources // span) + 1))
    for number, (low, high) in enumerate(zip(cuts[:-1].tolist(), cuts[1:].tolist(), strict=True)):
        if low < high:
            part = slice(low, high)
            chosen = None if weights is None else weights[part]
            section = make_section(destination[part], offset[part], chosen)
            yield number * span, min(span, n_sources - number * span), section


def _sub_block_span(n_edges: int, n_rows: int, n_sources: int) -> int:
    """Sources of a sub-block: about equal ones, narrow enough for a cache, wide enough to pay."""
    span = _SUB_BLOCK_SOURCES
    while span < n_sources:
        edges = n_edges * span / n_sources
        short_runs = edges < _RUN_EDGES * n_rows and span < _WIDE_SUB_BLOCK_SOURCES
        if not short_runs and edges >= _SUB_BLOCK_EDGES:
            break
        span *= 2
    n_blocks = -(-n_sources // span)
    return -(-n_sources // n_blocks)


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
