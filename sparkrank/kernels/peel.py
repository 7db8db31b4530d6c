"""Which hosts leave the iteration before it starts.

A sink feeds nobody: it is scored once, at the end.  So is a host whose out-links all lead to such
hosts.  A source gets nothing from hosts that iterate: it is scored once, at the start.  Codes: 0 for
hosts that iterate, -r for those that sink round r took, +r for those that source round r took.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def first_sinks(codes: NDArray[np.int8], out_degree: NDArray[np.int64]) -> NDArray[np.int8]:
    """Codes after the first sink round: hosts without out-links go.  Shapes (n,)."""
    return np.where((codes == 0) & (out_degree == 0), np.int8(-1), codes)


def first_sources(codes: NDArray[np.int8], in_degree: NDArray[np.int64]) -> NDArray[np.int8]:
    """Codes after the first source round: hosts without in-links go.  Shapes (n,)."""
    return np.where((codes == 0) & (in_degree == 0), np.int8(1), codes)


def marked(ends: NDArray[np.int64], other_codes: NDArray[np.int8], n_hosts: int) -> NDArray[np.bool_]:
    """Hosts that an edge ties to a host still iterating.

    Parameters
    ----------
    ends : shape (m,), this end of each edge.
    other_codes : shape (m,), the code of the edge's other end.

    Returns
    -------
    shape (n_hosts,).
    """
    marks = np.zeros(n_hosts, dtype=np.bool_)
    marks[ends[other_codes == 0]] = True
    return marks


def next_round(codes: NDArray[np.int8], marks: NDArray[np.bool_], code: int) -> NDArray[np.int8]:
    """Codes after a later round: hosts still iterating without a mark get ``code``.  Shapes (n,)."""
    return np.where((codes == 0) & ~marks, np.int8(code), codes)


def phase_of(codes: NDArray[np.int8], source_rounds: int, sink_rounds: int) -> NDArray[np.int8]:
    """Order of computation: source rounds 1, 2, …, the iterated core, then the sink rounds backwards.

    Phases count from 0; the core is phase ``source_rounds``; the hosts of sink round 1 come last.
    """
    return np.where(
        codes >= 0, (codes - 1) % (source_rounds + 1), source_rounds + sink_rounds + 1 + codes
    ).astype(np.int8)


def order_in_phases(
    phase: NDArray[np.int8], in_degree: NDArray[np.integer], out_degree: NDArray[np.integer], n_hot: int
) -> NDArray[np.int64]:
    """The hosts in the order of computation, those of a phase so that its edges lie close together.

    A phase begins with its ``n_hot`` hosts of most out-links, which most of its edges come from.  Hosts of
    most in-links come first among these and among the others: rows with as many in-links are neighbours.
    Ties go by place.  Shapes (n,).
    """
    out_links = out_degree.astype(np.int64)
    by_out_links = np.argsort(
        phase.astype(np.int64) << 56 | (out_links.max(initial=0) - out_links), kind="stable"
    )
    counts = np.bincount(phase, minlength=1)
    rank = np.empty(len(phase), dtype=np.int64)
    rank[by_out_links] = np.arange(len(phase)) - np.repeat(np.cumsum(counts) - counts, counts)
    is_cold = (rank >= n_hot) & (out_links > 0)
    in_links = in_degree.astype(np.int64)
    part = phase.astype(np.int64) << 1 | is_cold
    return np.argsort(part << 48 | (in_links.max(initial=0) - in_links), kind="stable")
