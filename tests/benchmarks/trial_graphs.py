"""Linear systems x = A·x + u on which iterations are tried: the graphs, and their hosts that iterate.

Four graphs are made here, each hard in another way: a crawl (hubs, half of the hosts without out-links),
plain R-MAT, a web with planted rings and long cycles of hosts that link only to each other, and communities
that hardly link to one another, whose trust crosses from one to the next slowly.  The fifth is a table of
one's own.
"""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
from crawl_graph import CrawlSettings, chunks
from crawl_names import scatter
from numpy.typing import NDArray
from scipy import sparse

from sparkrank.kernels import peel

Ints = NDArray[np.int64]
Floats = NDArray[np.float64]

DAMPING = 0.85
GOOD_SHARE = 0.85
N_SLICES = 7  # and PageRank: the product's eight columns
_PEEL_ROUNDS = 3  # the product's limit
_CORE_SHARE = 0.001  # of the hosts, as the generator of crawls has it; ten a slice at least
_QUADRANTS = (0.57, 0.76, 0.95)  # Graph500's quadrants .57, .19, .19, .05, summed up (from memory)
_EDGES_AN_ID = 16


@dataclass(frozen=True, kw_only=True)
class System:
    """The hosts that iterate, in the order of hashed ids, in scaled units (a host without in-links has 1)."""

    hosts: Ints
    """Ids of the hosts: shape (n,)."""
    matrix: sparse.csr_array
    """A = c·Tᵀ between hosts that iterate, out-weights those of the whole graph: shape (n, n)."""
    teleport: Floats
    """What the product starts from: shape (n, k)."""
    constant: Floats
    """The teleport and what hosts that were computed before send: u, shape (n, k)."""
    flow_per_score: Floats
    """c / out-weight: shape (n,)."""

    @property
    def n_hosts(self) -> int:
        return len(self.flow_per_score)


def make_system(src: Ints, dst: Ints, slices: list[Ints] | None = None) -> System:
    """The system of a graph's distinct links between different hosts.

    ``slices`` are the core's members by slice; chosen at random from the hosts with out-links if not given.
    """
    n = int(max(src.max(), dst.max())) + 1
    shuffled = np.random.default_rng(11).permutation(n)
    key = np.unique((src * n + dst)[src != dst])
    src, dst = shuffled[key // n], shuffled[key % n]
    out_degree = np.bincount(src, minlength=n)
    if slices is None:
        size = max(10 * N_SLICES, int(_CORE_SHARE * n))
        core = np.random.default_rng(12).permutation(np.flatnonzero(out_degree))[:size]
        slices = np.array_split(core, N_SLICES)
    else:
        slices = [shuffled[members] for members in slices]
    teleport = np.zeros((n, 1 + len(slices)))
    teleport[:, 0] = 1.0
    for at, members in enumerate(slices, 1):
        teleport[members, at] = GOOD_SHARE * n / sum(map(len, slices))
    factor = DAMPING / np.maximum(out_degree, 1)
    matrix = sparse.csr_array((factor[src], (dst, src)), shape=(n, n))
    codes = _peeled(src, dst, n)
    score = teleport.copy()
    for code in range(1, _PEEL_ROUNDS + 1):
        layer = np.flatnonzero(codes == code)
        score[layer] += matrix[layer] @ np.where((codes > 0)[:, None], score, 0.0)
    kept, before = np.flatnonzero(codes == 0), np.flatnonzero(codes > 0)
    rows = matrix[kept]
    return System(
        hosts=np.argsort(shuffled)[kept],
        matrix=rows[:, kept],
        teleport=teleport[kept],
        constant=teleport[kept] + rows[:, before] @ score[before],
        flow_per_score=factor[kept],
    )


def _peeled(src: Ints, dst: Ints, n: int) -> NDArray[np.int8]:
    """The product's codes: 0 for hosts that iterate, above 0 for those computed before."""
    codes = peel.first_sinks(np.zeros(n, np.int8), np.bincount(src, minlength=n))
    for number in range(2, _PEEL_ROUNDS + 1):
        codes = peel.next_round(codes, peel.marked(src, codes[dst], n), -number)
    codes = peel.first_sources(codes, np.bincount(dst, minlength=n))
    for number in range(2, _PEEL_ROUNDS + 1):
        codes = peel.next_round(codes, peel.marked(dst, codes[src], n), number)
    return codes


def crawl(edges: int) -> System:
    """A generated crawl, as the other benchmarks have it."""
    sources, destinations = zip(*chunks(CrawlSettings(edges=edges)), strict=True)
    return make_system(np.concatenate(sources), np.concatenate(destinations))


def r_mat(edges: int) -> System:
    """Plain R-MAT (Chakrabarti, Zhan & Faloutsos 2004, from memory)."""
    bits = max(8, round(np.log2(edges / _EDGES_AN_ID)))
    return make_system(*_draw_r_mat(edges, bits, seed=21))


def _draw_r_mat(edges: int, bits: int, seed: int) -> tuple[Ints, Ints]:
    random = np.random.default_rng(seed)
    src, dst = np.zeros(edges, np.int64), np.zeros(edges, np.int64)
    for bit in range(bits):
        draw = random.random(edges)
        lower = draw >= _QUADRANTS[1]
        src |= lower.astype(np.int64) << bit
        dst |= np.where(lower, draw >= _QUADRANTS[2], draw >= _QUADRANTS[0]).astype(np.int64) << bit
    return scatter(src, bits), scatter(dst, bits)


def rings(edges: int) -> System:
    """R-MAT with a tenth as many hosts more, in rings of 2 to 400 hosts whose only out-link is the next one.

    A ring of d hosts has the eigenvalues c times the d-th roots of 1: nothing in it decays faster than c, and
    rings of many lengths have more such modes than any mixture takes out.
    """
    bits = max(8, round(np.log2(edges / _EDGES_AN_ID)))
    src, dst = _draw_r_mat(edges, bits, seed=31)
    random = np.random.default_rng(32)
    first, sources, destinations = 1 << bits, [src], [dst]
    while first < 1.1 * (1 << bits):
        size = int(random.choice([2, 3, 4, 6, 10, 25, 60, 150, 400]))
        ring = first + np.arange(size)
        feeders = random.choice(src, 1 + size // 10)
        sources += [ring, feeders]
        destinations += [np.roll(ring, -1), random.choice(ring, len(feeders))]
        first += size
    return make_system(np.concatenate(sources), np.concatenate(destinations))


def communities(edges: int) -> System:
    """Twenty communities, one link in 5,000 between two of them; each slice of the core in one of its own.

    No host is without out-links, so nothing leaks and modes between communities decay by hardly less than c.
    """
    random = np.random.default_rng(41)
    n_communities, size = 20, max(64, edges // _EDGES_AN_ID // 20)
    n = n_communities * size
    src = np.concatenate([np.arange(n), random.integers(0, n, edges - n)])
    # Places by a power of a uniform draw: some hosts have far more in-links than others.
    dst = src // size * size + (size * random.random(edges) ** 3).astype(np.int64)
    dst = np.where(src == dst, src // size * size + (src + 1) % size, dst)
    dst = np.where(random.random(edges) < 2e-4, random.integers(0, n, edges), dst)
    members = max(10, int(_CORE_SHARE * n / N_SLICES))
    slices = [at * size + random.choice(size, members, replace=False) for at in range(N_SLICES)]
    return make_system(src, dst, slices)


def own_table(path: Path) -> System:
    """A Parquet edge table of one's own: `src` and `dst`, strings taken as they are."""
    table = pq.read_table(path, columns=["src", "dst"])
    src, dst = (table[name].combine_chunks() for name in ("src", "dst"))
    known = pc.and_(src.is_valid(), dst.is_valid())
    src, dst = src.filter(known), dst.filter(known)
    hosts = pc.unique(pa.concat_arrays([src, dst]))
    ids = [pc.index_in(ends, hosts).to_numpy().astype(np.int64) for ends in (src, dst)]
    return make_system(ids[0], ids[1])
