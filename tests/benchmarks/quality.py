"""How well `priority` puts planted farms first: `python tests/benchmarks/quality.py --seeds 5`.

Farms and honest look-alikes are planted into bases (see `planting`), the candidates ordered by the program's
own kernels.  Printed are means over seeds of AUC / precision among the first k (k targets) / among the first
fifty, with boosters left out and with boosters counted as wrong, and the share of planted look-alikes among
the first k.  All choices were made on seeds below those that are used here.  The formula was chosen on the
shapes "chosen on"; the width of its classes of sources, and what counts as clearly higher, later on all
shapes and on copies of parts of a base that the core does not reach.

With `--base EDGES.parquet --core CORE.csv` webs are planted into an edge table of one's own, too (src, dst;
host, slice).  `--program N` puts N webs of each base through the whole program, and says how far its
priorities are from the bench's, which follows paths by scipy.
"""

import argparse
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from planting import bases
from planting.farms import FARMS
from planting.gathered import Gathered, gather
from planting.judged import Figures, judge
from planting.lookalikes import LOOKALIKES
from planting.plan import LEFT_OUT_FARMS, LEFT_OUT_LOOKALIKES, plant
from planting.program import ranked
from planting.web import HELPER, TARGET, BaseGraph, Finished

from sparkrank.kernels.shape import priority, shape_columns

_DAMPING = 0.85
_FARMS_A_SHAPE = 4
_UNREACHED_PARTS = 3
# Seeds below were used for choosing; every run takes its own from here on.
_FIRST_LEFT_OUT_SEED = 6000

Order = Callable[[Gathered], NDArray[np.float64]]


def by_priority(found: Gathered) -> NDArray[np.float64]:
    """The program's order."""
    return priority(shape_columns(found.links, found.arrays, _DAMPING), found.arrays)


def by_mass(found: Gathered) -> NDArray[np.float64]:
    """Relative mass alone, for comparison."""
    return found.relative_mass


ORDERS: dict[str, Order] = {"relative mass": by_mass, "priority": by_priority}


def figures(web: Finished, found: Gathered, order: Order) -> list[Figures]:
    """Figures without boosters, and with boosters counted as wrong."""
    roles, shapes = web.roles[found.hosts], web.shapes[found.hosts]
    alike = (shapes > 0) & (roles != TARGET) & (roles != HELPER)
    values = order(found)
    kept = roles != HELPER
    return [
        judge(values[kept], roles[kept] == TARGET, alike[kept]),
        judge(values, roles == TARGET, alike),
    ]


def webs(
    base: Callable[[int], BaseGraph], seeds: range, *, left_out: bool, hard: bool, unreached_parts: int = 0
) -> Iterator[Finished]:
    """Planted webs: of the shapes chosen on, or of all shapes with the left-out ones among them."""
    farms = [name for name in FARMS if left_out or name not in LEFT_OUT_FARMS]
    alike = [name for name in LOOKALIKES if left_out or name not in LEFT_OUT_LOOKALIKES]
    for seed in seeds:
        yield plant(
            base(seed),
            seed,
            farms=farms,
            lookalikes=alike,
            each=_FARMS_A_SHAPE,
            hard=hard,
            unreached_parts=unreached_parts,
        )


def show(title: str, finished: Iterator[Finished]) -> None:
    """One line an order."""
    started = time.monotonic()
    results: dict[str, list[list[Figures]]] = {name: [] for name in ORDERS}
    counts = []
    for web in finished:
        found = gather(web.graph)
        roles = web.roles[found.hosts]
        counts.append((np.count_nonzero(roles == TARGET), len(roles)))
        for name, order in ORDERS.items():
            results[name].append(figures(web, found, order))
    targets, candidates = np.mean(counts, axis=0)
    print(f"{title}: {targets:.0f} targets of {candidates:.0f} hosts, {time.monotonic() - started:.0f} s")
    for name, each in results.items():
        without, whole = np.mean(each, axis=0)
        cells = "  ".join(" ".join(f"{value:.3f}" for value in part) for part in (without, whole))
        print(f"  {name:14} {cells}", flush=True)


def show_program(title: str, web: Finished) -> None:
    """The program's own table beside the bench's figures, on one web."""
    found = gather(web.graph)
    hosts, values = ranked(web.graph)
    place = np.argsort(hosts)
    if not np.array_equal(hosts[place], found.hosts):
        raise RuntimeError(f"{title}: the program has other candidates: {len(hosts)}, not {len(found.hosts)}")
    ours = by_priority(found)
    apart = np.abs(values[place] - ours) / np.maximum(ours, 1e-3)
    print(f"{title}, the program: its priorities differ by {np.median(apart):.1%}, at most {apart.max():.1%}")
    for name, order in (("bench", ours), ("program", values[place])):
        cells = [
            " ".join(f"{value:.3f}" for value in part) for part in figures(web, found, lambda _, by=order: by)
        ]
        print(f"  {name:14} {'  '.join(cells)}", flush=True)


def main() -> None:
    """Print the table."""
    parser = argparse.ArgumentParser(description="Judge the order of candidates on planted webs.")
    parser.add_argument("--seeds", type=int, default=5, help="webs a row")
    parser.add_argument("--base", type=Path, help="Parquet with src, dst to plant into, besides the others")
    parser.add_argument("--core", type=Path, help="CSV with host of the good core of --base")
    parser.add_argument("--program", type=int, default=0, help="webs a base to put through the program")
    arguments = parser.parse_args()
    seeds = range(_FIRST_LEFT_OUT_SEED, _FIRST_LEFT_OUT_SEED + arguments.seeds)
    print("AUC, precision, first fifty, look-alikes: without boosters, and with boosters counted as wrong")
    show("the sample's own farms", (bases.coast(seed, farms=True) for seed in seeds))
    places: dict[str, Callable[[int], BaseGraph]] = {
        "coast": lambda seed: bases.coast(seed, farms=False).graph,
        "crawl": lambda seed: bases.crawl(seed),
    }
    if arguments.base is not None:
        own = bases.of_table(arguments.base, arguments.core)
        places = {str(arguments.base.name): lambda _: own, **places}
    for place, base in places.items():
        for web in webs(base, seeds[: arguments.program], left_out=True, hard=False):
            show_program(f"{place}, mild, all shapes", web)
        for hard in (False, True):
            for left_out in (False, True):
                shapes = "all shapes, left-out ones too" if left_out else "shapes chosen on"
                title = f"{place}, {'hard' if hard else 'mild'}, {shapes}"
                show(title, webs(base, seeds, left_out=left_out, hard=hard))
        parts = webs(base, seeds, left_out=True, hard=False, unreached_parts=_UNREACHED_PARTS)
        show(f"{place}, mild, all shapes, copies of parts out of reach", parts)


if __name__ == "__main__":
    main()
