"""Where hosts lie: the layouts that `locality.py` compares, and a crawl whose links stay near.

A layout is an order of the hosts, stripes of them, and a way to cut edges into sections.  Hosts of a stripe
may lie in any order within a phase.  It changes how far apart the values lie that a section gathers, over how
many sections a row is spread, and how many bytes an offset takes.
"""

import itertools
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from crawl_graph import CrawlSettings, chunks, names_of
from crawl_names import mixed
from measure import Facts
from numpy.typing import NDArray

from sparkrank.graph.sub_blocks import HOT_SOURCES, cut_sections
from sparkrank.kernels import peel
from sparkrank.kernels.accumulate import accumulate
from sparkrank.kernels.diagonals import Section, make_section, section_edges

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]
Cut = Callable[[Ints, Ints, None, int], Iterator[tuple[int, int, Section]]]
"""Destinations, sources, no weights, number of sources → first source, sources and section of each part."""

_PEEL_ROUNDS = 3  # as in the product
_SAMPLE_SHARE = 0.01  # of hosts or of links, for the boundaries of name ranges
_LEAST_LOCAL = 8  # hosts of a domain from which links are led into it, as in the generator
_EVEN_SOURCES = 1 << 18  # two megabytes a column
_LARGEST_SECTION = 1 << 18  # edges: two megabytes of gathered values


@dataclass(frozen=True, kw_only=True)
class Links:
    """Distinct edges without self-links; hosts are 0 … n_hosts - 1."""

    n_hosts: int
    source: Ints
    destination: Ints
    by_name: Ints
    """Place of each host in the order of reversed names."""
    hashed: Ints
    """Place of each host in the order of hashed ids."""


@dataclass(frozen=True, kw_only=True)
class Core:
    """Hosts that iterate, and the edges between them by place among them."""

    hosts: Ints
    source: Ints
    destination: Ints

    @property
    def n_hosts(self) -> int:
        return len(self.hosts)


@dataclass(frozen=True, kw_only=True)
class Layout:
    """The iterated hosts' edges as sections; hosts of a stripe lie side by side."""

    starts: Ints
    """Where each stripe begins: shape (stripes + 1,)."""
    place: Ints
    """Place of each iterated host: shape (iterated,)."""
    sections: list[tuple[int, int, int, Section]]
    """Destination stripe, first source and end of each section."""

    def multiply(self, flow: Floats) -> Floats:
        """Sums of the flow (k, iterated) over the in-links of each place."""
        out = np.zeros_like(flow)
        for stripe, first, end, section in self.sections:
            accumulate(section, flow[:, first:end], out[:, self.starts[stripe] : self.starts[stripe + 1]])
        return out

    def facts(self) -> Facts:
        """Bytes and scattered additions an edge, balance of the stripes, share of edges within them."""
        n_stripes = len(self.starts) - 1
        into = np.zeros(n_stripes, dtype=np.int64)
        n_bytes = n_rows = within = 0
        for stripe, first, _, section in self.sections:
            n_edges = len(section.sources)
            into[stripe] += n_edges
            within += n_edges * int(self.starts[stripe] <= first < self.starts[stripe + 1])
            n_rows += len(section.rows)
            parts = (section.sources, section.rows, section.diagonals, section.long_starts)
            n_bytes += sum(part.nbytes for part in parts)
        edges = int(into.sum())
        return {
            "edges": edges,
            "sections": len(self.sections),
            "bytes_an_edge": n_bytes / edges,
            "additions_an_edge": n_rows / edges,
            "busiest_stripe": float(into.max() / into.mean()),
            "within_stripe": within / edges,
        }


def crawl_links(settings: CrawlSettings, local: float, suffix: float) -> Links:
    """The generator's rows with more of them led into the domain or the suffix of their source."""
    names = names_of(settings)
    keys = []
    for number, (src, dst) in enumerate(chunks(settings)):
        random = np.random.Generator(np.random.SFC64([settings.seed, number, 7]))
        dst = _led_to_suffix(src, dst, random.random(len(src)) < suffix, names.groups, random)
        first, size = names.domains(src)
        into_domain = (random.random(len(src)) < local) & (size >= _LEAST_LOCAL)
        own = first + (random.random(len(src)) * size).astype(np.int64)
        dst = np.where(into_domain, own, dst)
        keys.append(np.unique((src * settings.n_ids + dst)[src != dst]))
    merged = np.concatenate(keys)
    merged.sort()
    merged = merged[np.diff(merged, prepend=-1) != 0]
    src, dst = np.divmod(merged, settings.n_ids)
    seen = np.zeros(settings.n_ids, dtype=np.bool_)
    seen[src] = True
    seen[dst] = True
    ids = np.flatnonzero(seen)
    host_of = np.cumsum(seen) - 1
    reversed_names = pa.array([".".join(name.split(".")[::-1]) for name in names.names(ids).to_pylist()])
    return Links(
        n_hosts=len(ids),
        source=host_of[src],
        destination=host_of[dst],
        by_name=_places(pc.sort_indices(reversed_names).to_numpy()),
        hashed=_places(np.argsort(mixed(ids, settings.seed + 3))),
    )


def _led_to_suffix(
    src: Ints, dst: Ints, chosen: NDArray[np.bool_], groups: Callable[[Ints], Ints], random: Any
) -> Ints:
    """Chosen rows lead to another row's end that has the suffix of their source: hubs stay hubs."""
    to_group, from_group = groups(dst), np.where(chosen, groups(src), -1)
    led = dst.copy()
    for group in range(int(to_group.max()) + 1):
        rows = np.flatnonzero(from_group == group)
        led[rows] = random.choice(dst[to_group == group], len(rows))
    return led


def iterated(links: Links) -> Core:
    """The hosts that the product's rounds of peeling leave, and their edges."""
    n, source, destination = links.n_hosts, links.source, links.destination
    codes = peel.first_sinks(np.zeros(n, np.int8), np.bincount(source, minlength=n))
    for number in range(2, _PEEL_ROUNDS + 1):
        codes = peel.next_round(codes, peel.marked(source, codes[destination], n), -number)
    codes = peel.first_sources(codes, np.bincount(destination, minlength=n))
    for number in range(2, _PEEL_ROUNDS + 1):
        codes = peel.next_round(codes, peel.marked(destination, codes[source], n), number)
    core = codes == 0
    host = np.cumsum(core) - 1
    kept = core[source] & core[destination]
    return Core(hosts=np.flatnonzero(core), source=host[source[kept]], destination=host[destination[kept]])


def layouts(links: Links, core: Core, n_stripes: int) -> dict[str, Layout]:
    """The layouts by name, the product's own first."""
    by_hash = links.hashed * n_stripes // links.n_hosts
    in_links = np.bincount(links.destination, minlength=links.n_hosts)
    out_links = np.bincount(links.source, minlength=links.n_hosts)
    hot = _busiest(core, by_hash, out_links)
    busy_first = (_by(links, -in_links, ~hot), _by(links, links.by_name, ~hot))
    even_hosts = _name_ranges(links.by_name, links.by_name, n_stripes)
    even_links = _name_ranges(links.by_name, links.by_name[links.destination], n_stripes)
    orders: dict[str, tuple[Ints, Ints, Cut]] = {
        "hash, busiest apart, in-links": (by_hash, busy_first[0], cut_sections),
        "hash, busiest apart, names": (by_hash, busy_first[1], cut_sections),
        "hash, most out-links first": (by_hash, _by(links, -out_links), cut_sections),
        "hash, most in-links first": (by_hash, _by(links, -in_links), cut_sections),
        "hash, reversed names": (by_hash, links.by_name, cut_sections),
        "hash": (by_hash, links.hashed, cut_sections),
        "hash, even blocks": (by_hash, links.hashed, even_blocks),
        "hash, even blocks, cut by rows": (by_hash, links.hashed, capped(even_blocks)),
        "names, equal hosts": (even_hosts, links.by_name, cut_sections),
        "names, equal in-links": (even_links, links.by_name, cut_sections),
    }
    return {
        name: make_layout(core, stripe[core.hosts], rank[core.hosts], n_stripes, cut)
        for name, (stripe, rank, cut) in orders.items()
    }


def _by(links: Links, *keys: NDArray[Any]) -> Ints:
    """Place of each host by the last key, then the one before; ties by hash."""
    return _places(np.lexsort((links.hashed, *keys)))


def _busiest(core: Core, stripe: Ints, out_links: Ints) -> NDArray[np.bool_]:
    """The iterated hosts of each stripe with the most out-links, as many as 16-bit offsets reach."""
    hot = np.zeros(len(stripe), dtype=np.bool_)
    for number in np.unique(stripe):
        members = core.hosts[stripe[core.hosts] == number]
        hot[members[np.argsort(-out_links[members], kind="stable")[:HOT_SOURCES]]] = True
    return hot


def _name_ranges(by_name: Ints, population: Ints, n_stripes: int) -> Ints:
    """Stripe of each host: ranges of names that hold equal shares of a sample of the population."""
    random = np.random.default_rng(5)
    size = max(1000, int(_SAMPLE_SHARE * len(population)))
    bounds = np.quantile(random.choice(population, size), np.arange(1, n_stripes) / n_stripes)
    return np.searchsorted(bounds, by_name, side="right").astype(np.int64)


def make_layout(core: Core, stripe: Ints, rank: Ints, n_stripes: int, cut: Cut) -> Layout:
    """Hosts by (stripe, rank), edges cut pair of stripes by pair."""
    source, destination = core.source, core.destination
    place = _places(np.lexsort((rank, stripe)))
    starts = np.searchsorted(np.sort(stripe), np.arange(n_stripes + 1)).astype(np.int64)
    pair = stripe[destination] * n_stripes + stripe[source]
    order = np.argsort(pair, kind="stable")
    cuts = np.searchsorted(pair[order], np.arange(n_stripes * n_stripes + 1))
    sections = []
    for number in range(n_stripes * n_stripes):
        chosen = order[cuts[number] : cuts[number + 1]]
        if not len(chosen):
            continue
        into, out_of = divmod(number, n_stripes)
        rows = place[destination[chosen]] - starts[into]
        offsets = place[source[chosen]] - starts[out_of]
        n_sources = int(starts[out_of + 1] - starts[out_of])
        for first, n, section in cut(rows, offsets, None, n_sources):
            begin = int(starts[out_of]) + first
            sections.append((into, begin, begin + n, section))
    return Layout(starts=starts, place=place, sections=sections)


def even_blocks(
    destination: Ints, source: Ints, weights: None, n_sources: int
) -> Iterator[tuple[int, int, Section]]:
    """Sub-blocks of equally many sources, a section each."""
    n_blocks = -(-n_sources // _EVEN_SOURCES)
    bounds = (np.arange(n_blocks + 1) * n_sources // n_blocks).tolist()
    n_rows = int(destination.max()) + 1
    key = ((np.searchsorted(bounds, source, side="right") - 1) * n_rows + destination) * n_sources + source
    key.sort()
    rest, source = np.divmod(key, n_sources)
    block, destination = np.divmod(rest, n_rows)
    cuts = np.searchsorted(block, np.arange(len(bounds))).tolist()
    for (first, end), (low, high) in zip(itertools.pairwise(bounds), itertools.pairwise(cuts), strict=True):
        if low < high:
            yield first, end - first, make_section(destination[low:high], source[low:high] - first, None)


def capped(cut: Cut) -> Cut:
    """The same sub-blocks, the larger ones cut again between rows: no row is summed in more parts."""

    def cut_again(
        destination: Ints, source: Ints, weights: None, n: int
    ) -> Iterator[tuple[int, int, Section]]:
        for first, size, section in cut(destination, source, weights, n):
            rows, offsets = section_edges(section)
            order = np.argsort(rows * size + offsets)
            rows, offsets = rows[order], offsets[order]
            parts = -(-len(rows) // _LARGEST_SECTION)
            cuts = np.searchsorted(rows, rows[np.arange(1, parts) * len(rows) // parts])
            for low, high in itertools.pairwise([0, *cuts.tolist(), len(rows)]):
                if low < high:
                    yield first, size, make_section(rows[low:high], offsets[low:high], None)

    return cut_again


def _places(order: Ints) -> Ints:
    places = np.empty(len(order), dtype=np.int64)
    places[order] = np.arange(len(order))
    return places
