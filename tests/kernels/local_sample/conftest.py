"""The sample's scenario, generated once, and what a solve with scipy says about it."""

import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
import scipy.sparse
import scipy.sparse.csgraph

SAMPLE = Path(__file__).resolve().parents[3] / "local_sample"
# The generator is a script of the sample, not part of the installed package.
sys.path.insert(0, str(SAMPLE))

from scenario import Scenario, Settings, generate  # noqa: E402

DAMPING, GOOD_SHARE = 0.85, 0.85


@dataclass(frozen=True, kw_only=True)
class Measured:
    """Scaled PageRank, scaled trust and relative mass of each host, (n_hosts,), in the order of the truth."""

    role: np.ndarray
    shape: np.ndarray
    group: np.ndarray
    pagerank: np.ndarray
    trust: np.ndarray
    mass: np.ndarray
    reached: np.ndarray
    is_core: np.ndarray

    @property
    def candidate(self) -> np.ndarray:
        return (self.pagerank >= 10) & (self.mass >= 0.5) & ~self.is_core


def measure(scenario: Scenario) -> Measured:
    """Iterate x = c*T'x + (1-c)*v with scipy, for uniform v and for the core sharing 0.85 equally."""
    graph = scenario.graph
    n_hosts = len(graph.hosts)
    out_degree = np.bincount(graph.sources, minlength=n_hosts)
    shares = 1.0 / out_degree[graph.sources]
    transposed = scipy.sparse.csc_matrix(
        (shares, (graph.destinations, graph.sources)), shape=(n_hosts, n_hosts)
    )
    core = np.concatenate(list(graph.core.values()))
    teleport = np.zeros((n_hosts, 2))
    teleport[:, 0] = 1.0 / n_hosts
    teleport[core, 1] = GOOD_SHARE / len(core)
    # 120 plain steps leave an error below 0.85**120 = 3e-9 of the whole.
    state = teleport.copy()
    for _ in range(120):
        state = DAMPING * (transposed @ state) + (1 - DAMPING) * teleport
    scaled = state * n_hosts / (1 - DAMPING)
    # One more host that links to all of the core: what it reaches is what the core reaches.
    forward = scipy.sparse.csr_matrix(
        (
            np.ones(len(graph.sources) + len(core)),
            (
                np.concatenate([graph.sources, np.full(len(core), n_hosts)]),
                np.concatenate([graph.destinations, core]),
            ),
        ),
        shape=(n_hosts + 1, n_hosts + 1),
    )
    order = scipy.sparse.csgraph.breadth_first_order(forward, n_hosts, return_predecessors=False)
    reached = np.zeros(n_hosts + 1, dtype=bool)
    reached[order] = True
    is_core = np.zeros(n_hosts, dtype=bool)
    is_core[core] = True
    role, shape, group = (np.array(scenario.truth[name].to_pylist()) for name in ("role", "shape", "group"))
    return Measured(
        role=role,
        shape=shape,
        group=group,
        pagerank=scaled[:, 0],
        trust=scaled[:, 1],
        mass=1 - scaled[:, 1] / scaled[:, 0],
        reached=reached[:n_hosts],
        is_core=is_core,
    )


@pytest.fixture(scope="session")
def sample_folder() -> Path:
    return SAMPLE


@pytest.fixture(scope="session")
def scenario() -> Scenario:
    return generate(Settings())


@pytest.fixture(scope="session", name="measure")
def measure_fixture() -> Callable[[Scenario], Measured]:
    """The function itself, for scenarios of other settings."""
    return measure


@pytest.fixture(scope="session")
def measured(scenario: Scenario) -> Measured:
    return measure(scenario)
