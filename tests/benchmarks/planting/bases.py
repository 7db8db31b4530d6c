"""Bases to plant into: the sample's honest web, a crawl-like R-MAT graph, an edge table of one's own."""

import sys
from pathlib import Path

import numpy as np
import pyarrow.compute as pc
import pyarrow.csv as pacsv
import pyarrow.parquet as pq
from crawl_graph import CrawlSettings, chunks, names_of

from planting.web import HONEST, TARGET, BaseGraph, Finished, IntArray
from sparkrank.names.suffixes import SuffixRules

_SAMPLE = Path(__file__).resolve().parents[3] / "local_sample"
_EXTRA = ("ac.example", "co.example", "gov.example", "org.example", "sch.example", "*.isles.example")
_CRAWL_CORE_SHARE = 0.01


def coast(seed: int, *, farms: bool) -> Finished:
    """The sample's web of another seed, without or with the sample's own farms; its look-alikes stay."""
    sys.path.insert(0, str(_SAMPLE))
    from scenario import FARM_SHAPES, Settings, generate

    scenario = generate(Settings(seed=seed, farm_shapes=FARM_SHAPES if farms else ()))
    graph = scenario.graph
    core = np.zeros(len(graph.hosts), dtype=np.bool_)
    core[np.concatenate(list(graph.core.values()))] = True
    domains, suffixes = numbered_names(list(graph.hosts))
    role = np.array(scenario.truth["role"].to_pylist())
    helper = np.isin(role, ["booster", "feeder"])
    roles = np.select([role == "target", helper], [TARGET, 2], HONEST).astype(np.int8)
    alike = np.isin(role, ["lookalike", "community"])
    base = BaseGraph(
        sources=graph.sources, destinations=graph.destinations, domains=domains, suffixes=suffixes, core=core
    )
    shapes = np.where(alike, 1, 0)
    return Finished(graph=base, roles=roles, shapes=shapes, shape_names=("base", "lookalike"))


def crawl(seed: int, *, edges: int = 300_000) -> BaseGraph:
    """A crawl-like graph with a random core among hosts that link."""
    settings = CrawlSettings(edges=edges, seed=seed)
    parts = list(chunks(settings))
    source, destination = (np.concatenate([part[side] for part in parts]) for side in (0, 1))
    seen, ids = np.unique(np.concatenate([source, destination]), return_inverse=True)
    names = names_of(settings)
    domains, _ = names.domains(seen)
    linking = np.bincount(ids[: len(source)], minlength=len(seen)) > 0
    random = np.random.Generator(np.random.PCG64([seed, 9]))
    core = linking & (random.random(len(seen)) < _CRAWL_CORE_SHARE)
    return _distinct(ids[: len(source)], ids[len(source) :], domains, names.groups(seen), core)


def of_table(edges: Path, core_list: Path) -> BaseGraph:
    """An edge table (src, dst) and a core list (host, slice) of one's own; odd names are left out."""
    table = pq.read_table(edges, columns=["src", "dst"])
    strict = r"^[a-z0-9_-]+(\.[a-z0-9_-]+)*$"
    sides = [pc.utf8_lower(table[name]) for name in ("src", "dst")]
    fine = [pc.match_substring_regex(side, strict) for side in sides]
    kept = pc.and_(*fine)
    source, destination = (side.filter(kept).to_pylist() for side in sides)
    names, ids = np.unique(np.array(source + destination), return_inverse=True)
    members = [host.lower() for host in pacsv.read_csv(core_list)["host"].to_pylist()]
    domains, suffixes = numbered_names(names.tolist())
    count = len(source)
    return _distinct(ids[:count], ids[count:], domains, suffixes, np.isin(names, members))


def numbered_names(hosts: list[str]) -> tuple[IntArray, IntArray]:
    """Numbers of the registrable domains and public suffixes of hosts; a host without one is alone."""
    rules = SuffixRules.load("icann+private", _EXTRA)
    parts = [rules.split(host) for host in hosts]
    domains = [domain or f"{host}." for host, (_, domain) in zip(hosts, parts, strict=True)]
    suffixes = [suffix or "" for suffix, _ in parts]
    numbers = [np.unique(np.array(names), return_inverse=True)[1] for names in (domains, suffixes)]
    return numbers[0], numbers[1]


def _distinct(
    source: IntArray, destination: IntArray, domains: IntArray, suffixes: IntArray, core: np.ndarray
) -> BaseGraph:
    n = len(core)
    other = source != destination
    pairs = np.unique(source[other] * n + destination[other])
    return BaseGraph(
        sources=pairs // n,
        destinations=pairs % n,
        domains=np.unique(domains, return_inverse=True)[1],
        suffixes=suffixes,
        core=core,
    )
