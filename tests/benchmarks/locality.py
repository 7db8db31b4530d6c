"""Where hosts lie, and what a multiplication costs: `python tests/benchmarks/locality.py --edges 16e6`.

The same graph is laid out in several ways (`layouts.py`), cut into sections and multiplied by the product's
own kernel, in one thread:

- the product's: hash ranges as stripes, the busiest hosts of a phase apart, by in-links among them and among
  the others, cut by the product's own code;
- the same stripes and cutting with hosts in the order of out-links, in-links, reversed names
  (`example.co.site`) or hashes; hashes with even sub-blocks, each a section or cut again by rows;
- ranges of reversed names as stripes, hosts in the order of those names, with boundaries drawn from a sample
  of hosts or of the ends of links.

Links of crawls keep to their domain and their suffix.  `--local` is the share of rows led to a host of the
same domain, beside those that the generator leads there itself, `--suffix` the share of rows led to a host of
the same suffix.  Only edges between hosts that iterate are multiplied, and every layout's product is held
against SciPy's first.
"""

import time
from collections.abc import Callable

import measure
import numpy as np
from crawl_graph import CrawlSettings
from layouts import Core, Layout, crawl_links, iterated, layouts
from measure import Facts, median
from scipy import sparse

from sparkrank.graph.plan import plan_grid


def check_products(found: dict[str, Layout], core: Core) -> None:
    """Raises ValueError where a layout's product is not that of SciPy's CSR, its hosts put back."""
    score = np.random.default_rng(2).random(core.n_hosts)
    shape = (core.n_hosts, core.n_hosts)
    ones = np.ones(len(core.source))
    expected = sparse.csr_array((ones, (core.destination, core.source)), shape=shape) @ score
    for name, layout in found.items():
        flow = np.empty((1, core.n_hosts))
        flow[0, layout.place] = score
        if not np.allclose(layout.multiply(flow)[0, layout.place], expected, rtol=1e-9, atol=0):
            raise ValueError(f"{name}: the product is not that of the plain sum over the edges")


def timed(layout: Layout, columns: list[int]) -> Callable[[], Facts]:
    """A way that multiplies once with each number of columns; seconds by number."""
    n = len(layout.place)
    flows = {k: np.random.default_rng(3).random((k, n)) for k in columns}

    def way() -> Facts:
        facts: Facts = {}
        for k, flow in flows.items():
            started = time.perf_counter()
            layout.multiply(flow)
            facts[str(k)] = time.perf_counter() - started
        return facts

    return way


def report(found: dict[str, Layout], turns: dict[str, list[Facts]], columns: list[int]) -> dict[str, Facts]:
    """Figures of each layout; edge-columns a second by number of columns among them."""
    figures: dict[str, Facts] = {}
    for name, layout in found.items():
        facts = layout.facts()
        for k in columns:
            facts[f"edge_columns_per_second_{k}"] = facts["edges"] * k / median(turns[name], str(k))
        figures[name] = facts
    return figures


def _table(figures: dict[str, Facts], columns: list[int]) -> list[list[object]]:
    rates = [f"M edge-columns/s, k = {k}" for k in columns]
    rows: list[list[object]] = [
        ["layout", "bytes/edge", "additions/edge", "sections", "busiest/mean", "within stripe", *rates]
    ]
    for name, facts in figures.items():
        shares = [f"{facts['busiest_stripe']:.2f}", f"{facts['within_stripe']:.0%}"]
        speeds = [facts[f"edge_columns_per_second_{k}"] / 1e6 for k in columns]
        rows.append(
            [name, facts["bytes_an_edge"], facts["additions_an_edge"], facts["sections"], *shares, *speeds]
        )
    return rows


def main() -> None:
    """Measure and report."""
    parser = measure.arguments_of("Measure how the order of hosts bears on a multiplication.", edges=4e6)
    parser.add_argument("--columns", type=lambda text: [int(k) for k in text.split(",")], default=[1, 8])
    parser.add_argument("--local", type=float, default=0.3, help="share of rows led into their domain")
    parser.add_argument("--suffix", type=float, default=0.3, help="share of rows led into their suffix")
    parser.add_argument("--stripes", type=int, help="the product's own number for so many rows if not given")
    asked = parser.parse_args()
    facts = measure.machine()
    measure.print_machine(facts)
    settings = CrawlSettings(edges=int(asked.edges), seed=asked.seed)
    links = crawl_links(settings, asked.local, asked.suffix)
    core = iterated(links)
    n_stripes = asked.stripes or plan_grid(settings.edges).stripes
    found = layouts(links, core, n_stripes)
    check_products(found, core)
    ways = {name: timed(layout, asked.columns) for name, layout in found.items()}
    turns = measure.in_turns(ways, asked.turns)
    figures = report(found, turns, asked.columns)
    print(f"\n{links.n_hosts:,} hosts, {len(links.source):,} edges; {core.n_hosts:,} hosts iterate")
    measure.print_table(f"{n_stripes} stripes, one thread, medians", _table(figures, asked.columns))
    graph = {"hosts": links.n_hosts, "edges": len(links.source), "iterated": core.n_hosts}
    measure.write_json(asked.json, {"machine": facts, "graph": graph, "layouts": figures, "turns": turns})


if __name__ == "__main__":
    main()
