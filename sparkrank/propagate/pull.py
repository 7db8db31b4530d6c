"""The multiplication over work files: what flows into one phase of one stripe."""

from __future__ import annotations

from collections.abc import Callable, Iterable

import numpy as np
from numpy.typing import NDArray

from sparkrank.graph.build import Graph
from sparkrank.graph.cells import read_cell
from sparkrank.kernels.accumulate import accumulate

FlowOf = Callable[[int, int], NDArray[np.float64]]
"""Flow of (stripe, phase): shape (k, hosts of the phase)."""


def pull(
    graph: Graph,
    stripe: int,
    to_phase: int,
    from_phases: range,
    groups: Iterable[int],
    flow_of: FlowOf,
    out: NDArray[np.float64],
    *,
    even: bool = False,
) -> int:
    """Adds to ``out`` (k, hosts of the phase) what the source phases of the build groups send.

    The order of the sums is that of the groups and of the sections in their cells.  ``even``: every edge
    counts once, whatever its weight.  Returns the number of edges.
    """
    with_edges = set(graph.cells_into(stripe))
    n_edges = 0
    for group in groups:
        if group not in with_edges:
            continue
        for placed in read_cell(graph.folder.cell(stripe, group), to_phase):
            if placed.from_phase in from_phases:
                end = placed.first_source + placed.n_sources
                flow = flow_of(placed.from_stripe, placed.from_phase)[:, placed.first_source : end]
                section = placed.section._replace(weights=None) if even else placed.section
                accumulate(section, flow, out)
                n_edges += len(placed.section.sources)
    return n_edges


def phase_size(graph: Graph, stripe: int, phase: int) -> int:
    """Hosts of a phase of the stripe."""
    starts = graph.phase_starts[stripe]
    return starts[phase + 1] - starts[phase]
