"""Steps to a proven error, by way of iterating: `python tests/benchmarks/accelerations.py --edges 2e6`.

PageRank and seven trust columns are iterated on graphs that are hard in different ways (`trial_graphs.py`)
until the proven error is at most 1e-6 and 1e-8 of PageRank for every host and column, in every way of
`iterations.py`.  An edge-pass is one multiplication by all edges between hosts that iterate.  Each way's
values are then held against a solve to the limit of float64, and a bound that does not hold stops the run.

The product keeps a way if it takes fewer edge-passes than plain iteration on at least three graphs, lets
all stripes of a step be computed side by side, and mixes states seldom enough to pay for it. It keeps
reduced rank extrapolation (`sparkrank/propagate/mixing.py`). With a million rows of each graph, and a crawl
of twelve million:

- reduced rank extrapolation saves a third to five sixths of plain iteration's edge-passes, but for rings of
  all lengths, where nothing mixed from a few states gains much;
- Anderson's mixture saves up to four steps, costs up to two, and mixes at every step;
- quadratic extrapolation is one or two steps ahead at 1e-6 on three of the small graphs, behind at 1e-8 on
  three, and far behind where more than a few modes are slow, as in the larger crawl;
- power extrapolation helps where pairs of hosts hold the rest up, and delays what has no such mode;
- Gauss-Seidel over stripes in turn saves a quarter or more, and alone helps against rings, but each stripe
  waits for the one before it; within stripes, where none waits, it saves a tenth at best;
- of a crawl only few hosts are unsettled after some twenty steps, but they lie in all of 4 or 16 stripes
  until late: so dropped they cost more than reduced rank extrapolation; dropped host by host, half of it in
  the larger crawl and about the same in the small one.

Seconds are those of SciPy in this process: what mixtures cost beside multiplications, not what the product
takes.
"""

import argparse
import json
import time
from collections.abc import Callable
from functools import partial
from pathlib import Path

import numpy as np
from iterations import WAYS, plain
from measure import Facts, print_table
from numpy.typing import NDArray
from trial_graphs import System, communities, crawl, own_table, r_mat, rings

TOLERANCES = (1e-6, 1e-8)
_EXACT_STEPS = 300  # 0.85^300 is 7e-22: rounding is all that is left


def exact(system: System) -> NDArray[np.float64]:
    """The solution to the limit of float64, by plain steps from the constant: shape (n, k)."""
    value = system.constant
    for _ in range(_EXACT_STEPS):
        value = plain(system, value)
    return value


def tried(system: System, turns: int) -> list[Facts]:
    """Every way at every tolerance; ArithmeticError where a host is further off than its bound says."""
    solution = exact(system)
    limit = float(np.abs((plain(system, solution) - solution) / solution[:, :1]).max())
    found = []
    for tolerance in TOLERANCES:
        for name, way in WAYS.items():
            seconds = []
            for _ in range(turns):
                started = time.perf_counter()
                outcome = way(system, tolerance)
                seconds.append(time.perf_counter() - started)
            error = float(np.abs((outcome.values - solution) / solution[:, :1]).max())
            if error > outcome.bound + 100 * limit:
                raise ArithmeticError(f"{name}: an error of {error:.3g}, a bound of {outcome.bound:.3g}")
            found.append(
                {
                    "way": name,
                    "tolerance": tolerance,
                    "steps": outcome.steps,
                    "edge_passes": outcome.edge_passes,
                    "seconds": float(np.median(seconds)),
                    "bound": outcome.bound,
                    "converged": outcome.bound <= tolerance,
                    "error": error,
                    "skipped": outcome.skipped,
                }
            )
    return found


def _rows(found: list[Facts]) -> list[list[object]]:
    rows: list[list[object]] = [
        ["way", *(f"{what} to {t:g}" for t in TOLERANCES for what in ("edge-passes", "steps", "s"))]
    ]
    for name in WAYS:
        cells: list[object] = [name]
        for facts in (facts for facts in found if facts["way"] == name):
            passes = f"{facts['edge_passes']:.1f}" if facts["converged"] else "-"
            cells += [passes, facts["steps"], f"{facts['seconds']:.2f}"]
        rows.append(cells)
    return rows


def _skipped_rows(found: list[Facts]) -> list[list[object]]:
    rows: list[list[object]] = [["way", "tolerance", "first step that skips", "share of all edges skipped"]]
    for facts in found:
        if shares := facts["skipped"]:
            first = next((at for at, share in enumerate(shares, 1) if share > 0), None)
            shown = "none" if first is None else f"{first} of {len(shares)}"
            rows.append([facts["way"], f"{facts['tolerance']:g}", shown, f"{np.mean(shares):.1%}"])
    return rows


def main() -> None:
    """Try all ways on all graphs and report."""
    makers: dict[str, Callable[[int], System]] = {
        "crawl": crawl,
        "r-mat": r_mat,
        "rings": rings,
        "communities": communities,
    }
    parser = argparse.ArgumentParser(description="Count steps to a proven error by way of iterating.")
    parser.add_argument("--edges", type=float, default=1e6, help="rows of each generated graph")
    parser.add_argument("--graphs", type=lambda text: text.split(","), default=list(makers))
    parser.add_argument("--graph", type=Path, metavar="FILE", help="Parquet edges of one's own, beside them")
    parser.add_argument("--turns", type=int, default=1, help="turns of every way; medians are reported")
    parser.add_argument("--json", type=Path, metavar="FILE", help="write all figures there, too")
    asked = parser.parse_args()
    if unknown := set(asked.graphs) - set(makers) - {""}:
        parser.error(f"expected graphs out of {', '.join(makers)}, found {', '.join(sorted(unknown))}")
    chosen = {name: partial(makers[name], int(asked.edges)) for name in asked.graphs if name}
    if asked.graph is not None:
        chosen[asked.graph.name] = partial(own_table, asked.graph)
    report: dict[str, Facts] = {}
    for name, make in chosen.items():
        system = make()
        found = tried(system, asked.turns)
        edges = int(system.matrix.nnz)
        title = (
            f"{name}: {system.n_hosts:,} hosts iterate, {edges:,} edges, {system.teleport.shape[1]} columns"
        )
        print_table(title, _rows(found))
        print_table(f"{name}: edges of settled stripes", _skipped_rows(found))
        report[name] = {"hosts": system.n_hosts, "edges": edges, "ways": found}
    if asked.json is not None:
        asked.json.write_text(json.dumps(report, indent=1) + "\n")


if __name__ == "__main__":
    main()
