"""A base graph that farms and look-alikes are planted into, as flat arrays."""

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

# What a host is to the judge of an order. Helpers of a farm may score high; whether listing one is right is
# a matter of taste, so they can be left out of a figure or count as wrong.
HONEST, TARGET, HELPER = 0, 1, 2


@dataclass(frozen=True, kw_only=True)
class BaseGraph:
    """A graph before planting: one link a pair, no self-links.

    `sources`, `destinations` (n_links,) are hosts from 0; `domains`, `suffixes` (n_hosts,) number registrable
    domains and public suffixes; `core` (n_hosts,) says who is in the good core.
    """

    sources: IntArray
    destinations: IntArray
    domains: IntArray
    suffixes: IntArray
    core: BoolArray

    @property
    def n_hosts(self) -> int:
        return len(self.core)


class PlantedWeb:
    """A base with more hosts and links added; `roles` and `shapes` hold the truth of every host."""

    def __init__(self, base: BaseGraph, random: np.random.Generator, *, hard: bool) -> None:
        self.base, self.random, self.hard = base, random, hard
        self.n_hosts = base.n_hosts
        self.core = base.core.copy()
        self._links: list[tuple[IntArray, IntArray]] = [(base.sources, base.destinations)]
        self._domains, self._suffixes = [base.domains], [base.suffixes]
        self._next_domain = int(base.domains.max()) + 1
        self._next_suffix = int(base.suffixes.max()) + 1
        self._roles = [np.zeros(base.n_hosts, dtype=np.int8)]
        self.shape_names: list[str] = ["base"]
        self._shapes = [np.zeros(base.n_hosts, dtype=np.int64)]
        self._marks: list[tuple[IntArray, int, int]] = []
        degree = np.bincount(base.sources, minlength=base.n_hosts)
        support = np.bincount(base.destinations, minlength=base.n_hosts)
        self.linking = np.flatnonzero((degree > 0) & ~base.core)
        self.linking_core = np.flatnonzero((degree > 0) & base.core)
        self.liked = np.flatnonzero(support > 0)
        self._liking = np.cumsum(support[self.liked])
        self.best_known = self.liked[np.argsort(-support[self.liked], kind="stable")[:200]]

    def hosts(
        self, count: int, shape: str, *, role: int = HONEST, domain: str | int = "own", suffix: int = 0
    ) -> IntArray:
        """New hosts, (count,): each with a domain of its own, all of one new domain, or of domain number."""
        new = np.arange(self.n_hosts, self.n_hosts + count)
        self.n_hosts += count
        if domain == "own":
            domains = self._next_domain + np.arange(count)
        else:
            domains = np.full(count, self._next_domain if domain == "shared" else domain)
        self._next_domain += count + 1
        self._domains.append(domains)
        self._suffixes.append(np.full(count, suffix))
        self._roles.append(np.full(count, role, dtype=np.int8))
        self._shapes.append(np.full(count, self._shape(shape)))
        return new

    def copied(self, chosen: BoolArray, shape: str) -> IntArray:
        """Once more the hosts of the base for which `chosen` (n_hosts of the base,) holds and that link among
        each other, with those links, as domains of a new suffix: nobody else links to them."""
        inside = chosen[self.base.sources] & chosen[self.base.destinations]
        ends = np.concatenate([self.base.sources[inside], self.base.destinations[inside]])
        originals, place = np.unique(ends, return_inverse=True)
        new = self.hosts(len(originals), shape, suffix=self.new_suffix())
        domains, number = np.unique(self.base.domains[originals], return_inverse=True)
        self._domains[-1] = self._next_domain + number
        self._next_domain += len(domains) + 1
        count = int(inside.sum())
        self.link(new[place[:count]], new[place[count:]])
        return new

    def domain_of(self, host: int) -> int:
        return int(np.concatenate(self._domains)[host])

    def new_suffix(self) -> int:
        self._next_suffix += 1
        return self._next_suffix

    def mark(self, hosts: IntArray, role: int, shape: str) -> None:
        """Give hosts of the base a part to play."""
        self._marks.append((hosts, role, self._shape(shape)))

    def link(self, sources: IntArray, destinations: IntArray) -> None:
        """Links, one a pair of the broadcast arguments."""
        source, destination = np.broadcast_arrays(sources, destinations)
        self._links.append((source.ravel(), destination.ravel()))

    def some(self, among: IntArray, count: int) -> IntArray:
        """`count` draws with repetition."""
        return among[self.random.integers(0, len(among), count)]

    def popular(self, count: int) -> IntArray:
        """`count` hosts of the base, half of them of the best known 200, half in proportion to their fame."""
        draw = self.random.random(count) * self._liking[-1]
        known = self.liked[np.searchsorted(self._liking, draw, side="right")]
        return np.where(self.random.random(count) < 0.5, self.some(self.best_known, count), known)

    def size(self, low: float, high: float) -> int:
        """A number between two, even over its logarithm."""
        return int(low * (high / low) ** self.random.random())

    def share(self, among: IntArray, share: float) -> IntArray:
        return among[self.random.random(len(among)) < share]

    def finished(self) -> "Finished":
        sources = np.concatenate([part[0] for part in self._links])
        destinations = np.concatenate([part[1] for part in self._links])
        other = sources != destinations
        pairs = np.unique(sources[other] * self.n_hosts + destinations[other])
        roles, shapes = np.concatenate(self._roles), np.concatenate(self._shapes)
        for hosts, role, shape in self._marks:
            roles[hosts], shapes[hosts] = role, shape
        graph = BaseGraph(
            sources=pairs // self.n_hosts,
            destinations=pairs % self.n_hosts,
            domains=np.concatenate(self._domains),
            suffixes=np.concatenate(self._suffixes),
            core=np.pad(self.core, (0, self.n_hosts - len(self.core))),
        )
        return Finished(graph=graph, roles=roles, shapes=shapes, shape_names=tuple(self.shape_names))

    def _shape(self, name: str) -> int:
        if name not in self.shape_names:
            self.shape_names.append(name)
        return self.shape_names.index(name)


@dataclass(frozen=True, kw_only=True)
class Finished:
    """The planted graph and its truth: `roles`, `shapes` (n_hosts,); `shapes` are places in `shape_names`."""

    graph: BaseGraph
    roles: NDArray[np.int8]
    shapes: IntArray
    shape_names: tuple[str, ...]

    def of_shapes(self, names: Iterable[str]) -> BoolArray:
        return np.isin(self.shapes, [self.shape_names.index(n) for n in names if n in self.shape_names])
