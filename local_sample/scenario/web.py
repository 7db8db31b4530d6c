"""The web under construction: hosts by number, links between them, and the truth about each."""

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

IntArray = NDArray[np.int64]
FloatArray = NDArray[np.float64]

# Values of `rel` as crawled pages carry them, null first; the second part marks the ones that say
# nofollow, ugc or sponsored, which is what the sample's own check of the graph goes by.
RELS: tuple[str | None, ...] = (
    None,
    "noopener",
    "noopener noreferrer",
    "me",
    "external",
    "nofollow",
    "UGC",
    "sponsored noopener",
    "NoFollow, External",
    "ugc\tnofollow",
)
REL_SHARES: tuple[float, ...] = (0.86, 0.05, 0.03, 0.005, 0.01, 0.025, 0.008, 0.006, 0.004, 0.002)
FIRST_UNFOLLOWED_REL = 5


class Web:
    """Hosts and links as they are planted, before anything is spelled badly or repeated.

    Host numbers run from 0 in order of planting. `role` is one of target, booster, feeder, abused, lookalike,
    community, good; `shape` and `group` name the structure a host belongs to, empty for none.
    """

    def __init__(self) -> None:
        self.names: list[str] = []
        self.roles: list[str] = []
        self.shapes: list[str] = []
        self.groups: list[str] = []
        # Hosts that are always written another way than their canonical name (IDN, IPv6).
        self.spellings: dict[int, str] = {}
        self._taken: set[str] = set()
        self._links: list[tuple[IntArray, IntArray, IntArray]] = []

    def add_hosts(
        self, names: Iterable[str], *, role: str = "good", shape: str = "", group: str = ""
    ) -> IntArray:
        """Plant hosts; a name that is taken gets a number in its first label. Returns their numbers, (n,)."""
        first = len(self.names)
        for name in names:
            free, number = name, 2
            while free in self._taken:
                label, rest = name.split(".", 1)
                free, number = f"{label}-{number}.{rest}", number + 1
            self._taken.add(free)
            self.names.append(free)
        count = len(self.names) - first
        self.roles += [role] * count
        self.shapes += [shape] * count
        self.groups += [group] * count
        return np.arange(first, first + count, dtype=np.int64)

    def mark(self, hosts: IntArray, *, role: str, shape: str, group: str) -> None:
        """Give hosts planted earlier another part to play."""
        for host in hosts.tolist():
            self.roles[host], self.shapes[host], self.groups[host] = role, shape, group

    def add_links(
        self, sources: IntArray | int, destinations: IntArray | int, rel: IntArray | int = 0
    ) -> None:
        """Plant links, one a pair of the broadcast arguments; `rel` are positions in `RELS`."""
        source, destination, code = np.broadcast_arrays(sources, destinations, rel)
        self._links.append(
            (
                source.ravel().astype(np.int64),
                destination.ravel().astype(np.int64),
                code.ravel().astype(np.int64),
            )
        )

    def links(self) -> tuple[IntArray, IntArray, IntArray]:
        """Sources, destinations and positions in `RELS` of all links so far, each (m,), as planted."""
        source, destination, rel = (np.concatenate(part) for part in zip(*self._links, strict=True))
        return source, destination, rel


class WeightedGroups:
    """Draws members of groups in proportion to their weights; `group` and `weight` are (n,)."""

    def __init__(self, group: IntArray, weight: FloatArray) -> None:
        self._order = np.argsort(group, kind="stable")
        self._ends = np.concatenate([[0.0], np.cumsum(weight[self._order])])
        self._starts = np.searchsorted(group[self._order], np.arange(int(group.max()) + 2))

    def draw(self, group: IntArray, uniform: FloatArray) -> IntArray:
        """One member of each wanted group, (m,); a group that is drawn from must have members."""
        first, behind = self._starts[group], self._starts[group + 1]
        low, high = self._ends[first], self._ends[behind]
        place = np.searchsorted(self._ends, low + uniform * (high - low), side="right") - 1
        # Rounding may put a draw just beside its group.
        place = np.clip(place, first, behind - 1)
        member: IntArray = self._order[place]
        return member


def power_law(uniform: FloatArray, alpha: float, largest: float) -> FloatArray:
    """Pareto values of at least 1 with tail exponent `alpha`, cut at `largest`, from uniform ones."""
    return np.minimum((1.0 - uniform) ** (-1.0 / alpha), largest)


def choose(rng: np.random.Generator, among: IntArray, count: int) -> IntArray:
    """`count` different members of `among`, or all of them where there are fewer."""
    return among[np.argsort(rng.random(len(among)), kind="stable")[:count]]


def draw_words(rng: np.random.Generator, words: Sequence[str], count: int) -> list[str]:
    """`count` words, with repetition."""
    return [words[place] for place in (rng.random(count) * len(words)).astype(np.int64).tolist()]
