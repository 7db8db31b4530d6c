"""The linear model solved densely: what every faster way of computing it is held against.

numpy's LAPACK solve of the textbook equation, written without a look at the program's kernels and
sharing none of their code.
"""

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

DAMPING = 0.85

LANGVILLE_MEYER = (0.03721197, 0.05395735, 0.04150565, 0.37508082, 0.20599833, 0.28624589)
"""Normalised PageRank of ``langville_meyer`` at damping .9, as the tests of the networkx package carry
it: eight digits."""


def transition(edges: Iterable[Sequence[float]], n: int) -> NDArray[np.float64]:
    """T[u, v] = weight(u, v) / total weight out of u: shape (n, n).

    ``edges`` are (u, v) or (u, v, weight), positions from 0; equal pairs add up.  Rows of hosts without
    out-links are zero: they leak.
    """
    weight = np.zeros((n, n))
    for u, v, *rest in edges:
        weight[int(u), int(v)] += rest[0] if rest else 1.0
    total = weight.sum(axis=1, keepdims=True)
    return np.divide(weight, total, out=np.zeros_like(weight), where=total > 0)


def dense_solve(
    edges: Iterable[Sequence[float]], n: int, teleport: ArrayLike, damping: float = DAMPING
) -> NDArray[np.float64]:
    """x = c·T'x + u in scaled units, where u is ``teleport``: ones for PageRank.

    ``teleport`` has shape (n,) or (k, n), in units of 1/N: a host without in-links gets its own share
    of it.  The answer has the same shape.
    """
    start = np.asarray(teleport, dtype=np.float64)
    system = np.eye(n) - damping * transition(edges, n).T
    return np.linalg.solve(system, start.T).T


class Named:
    """A small graph whose hosts have names: ``Named("a>b c; b>c")`` has the edges a→b, a→c, b→c."""

    def __init__(self, text: str, hosts: Sequence[str] = ()) -> None:
        pairs = [
            (source.strip(), target)
            for source, targets in (part.split(">") for part in text.split(";"))
            for target in targets.split()
        ]
        self.hosts = list(hosts) or sorted({host for pair in pairs for host in pair})
        self.at = {host: i for i, host in enumerate(self.hosts)}
        self.n = len(self.hosts)
        self.edges = [(self.at[source], self.at[target]) for source, target in pairs]

    def vector(self, values: dict[str, float]) -> NDArray[np.float64]:
        """The values by host, 0 elsewhere: shape (n,)."""
        vector = np.zeros(self.n)
        for host, value in values.items():
            vector[self.at[host]] = value
        return vector


def mass_example() -> Named:
    """The 12-host example of Gyöngyi, Berkhin, Garcia-Molina & Pedersen, "Link Spam Detection Based on
    Mass Estimation", VLDB 2006 (edges from memory)."""
    boosters = "; ".join(f"s{i}>s0" for i in range(1, 5))
    return Named(f"g0>x; g2>x; s0>x; g1>g0; s5>g0; g3>g2; s6>g2; {boosters}")


def trust_example() -> Named:
    """The 7-host example of Gyöngyi, Garcia-Molina & Pedersen, "Combating Web Spam with TrustRank",
    VLDB 2004 (edges from memory)."""
    return Named("1>2; 2>3 4; 3>2; 4>5; 5>6 7; 6>3")


def langville_meyer() -> Named:
    """The 6-host example of Langville & Meyer, "A survey of eigenvector methods of web information
    retrieval", as the tests of the networkx package carry it."""
    return Named("1>2 3; 3>1 2 5; 4>5 6; 5>4 6; 6>4")


def encyclopaedia() -> Named:
    """The 11-host example of the encyclopaedia article on PageRank (edges from memory); A has no
    out-links."""
    many = "; ".join(f"{host}>B E" for host in "GHI")
    return Named(f"B>C; C>B; D>A B; E>B D F; F>B E; {many}; J>E; K>E")
