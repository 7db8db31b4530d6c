"""Who links to some hosts: the only code of the evidence that looks into the graph's cells.

Hosts are counted through the whole graph in the order of their ids, so that a host's number, and every
order that follows from it, is the same for any number of stripes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_static_arrays
from sparkrank.evidence.folder import EvidenceFolder
from sparkrank.graph.build import Graph
from sparkrank.graph.cells import PlacedSection, read_cell
from sparkrank.kernels.rows import row_edges

KeepSources = Callable[[int, NDArray[np.int64]], NDArray[np.bool_]]
"""Which in-links to keep, by source stripe and the sources' places in the order of its ids."""


class InLinks(NamedTuple):
    """In-links of n hosts: those of host i are ``[offsets[i], offsets[i + 1])``, by rising source."""

    offsets: NDArray[np.int64]
    sources: NDArray[np.int64]
    """shape (m,), numbers through the whole graph."""
    weights: NDArray[np.integer] | None
    """shape (m,); None where every edge weighs 1."""


@dataclass(frozen=True)
class Neighbours:
    """The graph's in-links by host."""

    graph: Graph
    folder: EvidenceFolder

    @cached_property
    def firsts(self) -> NDArray[np.int64]:
        """Number of the first host of each stripe, and of all hosts last: shape (stripes + 1,)."""
        sizes = [starts[-1] for starts in self.graph.phase_starts]
        return np.concatenate(([0], np.cumsum(sizes))).astype(np.int64)

    def values(self, stripe: int) -> dict[str, NDArray[Any]]:
        """The scores of the stripe's hosts."""
        return read_static_arrays(self.folder.values(stripe))

    def in_links(self, stripe: int, hosts: NDArray[np.int64], keep: KeepSources | None = None) -> InLinks:
        """In-links of distinct hosts of a stripe (places in the order of its ids)."""
        graph = self.graph
        position = read_static_arrays(graph.folder.order(stripe))["position"][hosts].astype(np.int64)
        starts = np.array(graph.phase_starts[stripe])
        phase_of = np.searchsorted(starts, position, side="right") - 1
        found: list[tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.integer] | None]] = []
        for phase in np.unique(phase_of).tolist():
            asked = np.flatnonzero(phase_of == phase)
            slot_at = np.full(starts[phase + 1] - starts[phase], -1, dtype=np.int32)
            slot_at[position[asked] - starts[phase]] = asked
            for group in graph.cells_into(stripe):
                for placed in read_cell(graph.folder.cell(stripe, group), phase):
                    if (links := self._of_section(placed, slot_at, keep)) is not None:
                        found.append(links)
        return _in_order(len(hosts), found)

    def _of_section(
        self, placed: PlacedSection, slot_at: NDArray[np.int32], keep: KeepSources | None
    ) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.integer] | None] | None:
        """Slot, source and weight of the section's edges into hosts that have a slot."""
        slots = slot_at[placed.section.rows]
        rows = np.flatnonzero(slots >= 0)
        if len(rows) == 0:
            return None
        counts, places = row_edges(placed.section, rows)
        slot = np.repeat(slots[rows].astype(np.int64), counts)
        first = self.graph.phase_starts[placed.from_stripe][placed.from_phase] + placed.first_source
        at = placed.section.sources[places].astype(np.int64) + first
        source = self.values(placed.from_stripe)["host_at"][at].astype(np.int64)
        weights = None if placed.section.weights is None else placed.section.weights[places]
        if keep is not None:
            kept = np.flatnonzero(keep(placed.from_stripe, source))
            slot, source = slot[kept], source[kept]
            weights = None if weights is None else weights[kept]
        return slot, source + self.firsts[placed.from_stripe], weights


def _in_order(
    n_hosts: int, found: list[tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.integer] | None]]
) -> InLinks:
    if not found:
        return InLinks(np.zeros(n_hosts + 1, np.int64), np.zeros(0, np.int64), None)
    slot = np.concatenate([one[0] for one in found])
    source = np.concatenate([one[1] for one in found])
    order = np.lexsort((source, slot))
    offsets = np.zeros(n_hosts + 1, np.int64)
    np.cumsum(np.bincount(slot, minlength=n_hosts), out=offsets[1:])
    parts = [one[2] for one in found if one[2] is not None]
    weights = np.concatenate(parts)[order] if parts else None
    return InLinks(offsets, source[order], weights)
