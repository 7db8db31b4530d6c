"""One small web with every shape that the engine treats in its own way, and its exact scores."""

import itertools
from dataclasses import dataclass
from functools import cached_property

import networkx as nx
import numpy as np
import pyarrow as pa

from tests.steps.graphs import sparse_solve

GOOD_SHARE = 0.6
DAMPING = 0.85


@dataclass(frozen=True, kw_only=True)
class Web:
    """Rows of an edge table and lists, with the graph that they mean."""

    rows: list[tuple[str, str, int]]
    """(source, destination, links), repeats and self-links among them."""
    isolated: list[str]
    """Hosts of the hosts list that no row names."""
    core: list[tuple[str, str, float]]
    """(host, slice, weight); the last entry is no host of the graph."""
    known_spam: list[str]

    @cached_property
    def hosts(self) -> list[str]:
        """All hosts in the order of their names."""
        return sorted({*self.isolated, *(host for row in self.rows for host in row[:2])})

    @cached_property
    def at(self) -> dict[str, int]:
        return {host: i for i, host in enumerate(self.hosts)}

    def edges(self, *, weighted: bool) -> dict[tuple[int, int], float]:
        """Weights of the distinct edges without self-links."""
        merged: dict[tuple[int, int], float] = {}
        for source, destination, links in self.rows:
            if source != destination:
                pair = (self.at[source], self.at[destination])
                merged[pair] = (merged.get(pair, 0) + links) if weighted else 1
        return merged

    def graph(self, *, weighted: bool) -> nx.DiGraph:
        graph = nx.DiGraph()
        graph.add_nodes_from(range(len(self.hosts)))
        graph.add_weighted_edges_from((u, v, w) for (u, v), w in self.edges(weighted=weighted).items())
        return graph

    @property
    def members(self) -> list[tuple[str, str, float]]:
        """Core entries whose hosts the graph has."""
        return [entry for entry in self.core if entry[0] in self.at]

    def trust_start(self, without: str | None = None) -> np.ndarray:
        """u of the trust of the core, less one slice: γ·N shared by weight."""
        members = [entry for entry in self.members if entry[1] != without]
        total = sum(weight for _, _, weight in members)
        start = np.zeros(len(self.hosts))
        for host, _, weight in members:
            start[self.at[host]] = GOOD_SHARE * len(self.hosts) * weight / total
        return start

    def spam_start(self) -> np.ndarray:
        start = np.zeros(len(self.hosts))
        start[[self.at[host] for host in self.known_spam]] = 1
        return start

    def solve(self, start: np.ndarray, *, weighted: bool) -> np.ndarray:
        """Exact scores from a start, by scipy."""
        return sparse_solve(len(self.hosts), self.edges(weighted=weighted), start, DAMPING)

    def edge_table(self, seed: int = 0) -> pa.Table:
        """The rows in an order of the seed's."""
        rows = [self.rows[i] for i in np.random.default_rng(seed).permutation(len(self.rows))]
        source, destination, links = zip(*rows, strict=True)
        return pa.table({"src": list(source), "dst": list(destination), "links": pa.array(links, pa.int64())})


def make_web(seed: int = 7) -> Web:
    """About 900 hosts: a strongly linked middle, a hub, what feeds it, what it feeds, and what is apart."""
    rng = np.random.default_rng(seed)
    rows: list[tuple[str, str, int]] = []

    def link(source: str, destination: str) -> None:
        rows.append((f"{source}.example", f"{destination}.example", int(rng.integers(1, 50))))

    def chain(first: str, name: str, length: int, last: str) -> None:
        hosts = [first, *(f"{name}{i}" for i in range(length)), last]
        for source, destination in itertools.pairwise(hosts):
            link(source, destination)

    middle = [f"m{i}" for i in range(300)]
    popular = rng.zipf(1.5, 2000) % 300
    for host in middle:
        for to in rng.choice(popular, int(rng.integers(1, 9))):
            link(host, middle[to])
    # A hub with more in-links than a diagonal of the storage is worth, and its back-links.
    for i in range(250):
        link(f"leaf{i}", "hub")
    for to in rng.choice(300, 40, replace=False):
        link("hub", middle[to])
        link(middle[to], "hub")
    # Chains longer than the peel cap of three rounds, from the sources and to the sinks.
    for i in range(6):
        chain(f"source{i}", f"in{i}-", 7, middle[10 * i])
        chain(middle[10 * i], f"out{i}-", 7, f"sink{i}")
        chain(f"apart{i}", f"path{i}-", 5, f"end{i}")
    for i in range(200):
        link(middle[int(rng.integers(300))], f"page{i % 120}")
    # Components of their own: a pair, a ring with a tail, a farm with back-links.
    link("pair0", "pair1")
    link("pair1", "pair0")
    chain("ring0", "ring-", 4, "ring0")
    link("ring0", "tail")
    for i in range(30):
        link(f"booster{i}", "target")
        link("target", f"booster{i}")
    # Repeats, and links of hosts to themselves; one host has no other.
    for i in range(0, len(rows), 9):
        rows.append((rows[i][0], rows[i][1], int(rng.integers(1, 50))))
    for host in ("hub", "leaf0", "alone", middle[5]):
        link(host, host)
    core = [(f"m{i}.example", f"slice {'abc'[i % 3]}", float(rng.integers(1, 6))) for i in range(100, 130)]
    core += [("source0.example", "slice a", 2.0), ("page3.example", "slice b", 1.0)]
    core += [("ring0.example", "slice c", 0.5), ("missing.example", "slice c", 9.0)]
    known_spam = ["target.example", "booster3.example", "leaf7.example", "m20.example"]
    isolated = ["quiet0.example", "quiet1.example"]
    return Web(rows=rows, isolated=isolated, core=core, known_spam=known_spam)
