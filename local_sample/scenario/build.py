"""`generate`: the parts of the scenario in order."""

from dataclasses import dataclass

import numpy as np
import pyarrow as pa

from scenario import farms, honest, lists, lookalikes, rows
from scenario.settings import Settings
from scenario.web import FIRST_UNFOLLOWED_REL, IntArray, Web


@dataclass(frozen=True, kw_only=True)
class Graph:
    """The graph that the rows mean: canonical hosts, and one link a pair that is followed, no self-links.

    `sources` and `destinations` are (n_links,) positions in `hosts`, ordered by source, then destination.
    `core` maps each slice to the positions of its members.
    """

    hosts: tuple[str, ...]
    sources: IntArray
    destinations: IntArray
    core: dict[str, IntArray]


@dataclass(frozen=True, kw_only=True)
class Scenario:
    """One generated web.

    `edges` has src, dst string, links int64, rel string (all nullable) and part int32; `core` has host,
    slice, weight, reviewed_on, reviewer, note and `known_spam` host, note, all string; `truth` has one row
    a host in the order of `graph.hosts`: host, role, shape, group, all string. `graph` says the same as
    `edges` without the dirt, for checks and experiments that need no engine.
    """

    settings: Settings
    edges: pa.Table
    core: pa.Table
    known_spam: pa.Table
    truth: pa.Table
    graph: Graph


def generate(settings: Settings) -> Scenario:
    """Make the scenario of these settings; equal settings give equal rows (on one numpy version)."""
    web = Web()
    coast = honest.plant(web, settings)
    lookalikes.plant(web, coast, settings)
    # The core is chosen among hosts that exist before the farms; about a fifth of all hosts is still to come.
    core = lists.choose_core(coast, settings, settings.scaled(20_000))
    farms.plant(web, coast, core, settings)
    rows.plant_odd_hosts(web, coast, settings)
    rows.adopt_unlinked(web, coast, settings)
    return Scenario(
        settings=settings,
        edges=rows.edge_rows(web, settings),
        core=lists.core_table(web, core, settings),
        known_spam=lists.known_spam_table(web, settings),
        truth=pa.table(
            {
                "host": pa.array(web.names, pa.string()),
                "role": pa.array(web.roles, pa.string()),
                "shape": pa.array(web.shapes, pa.string()),
                "group": pa.array(web.groups, pa.string()),
            }
        ),
        graph=_graph(web, core),
    )


def _graph(web: Web, core: dict[str, IntArray]) -> Graph:
    source, destination, rel = web.links()
    followed = (rel < FIRST_UNFOLLOWED_REL) & (source != destination)
    n_hosts = len(web.names)
    # One integer a pair, so that sorting and merging is one pass.
    pairs = np.unique(source[followed] * n_hosts + destination[followed])
    return Graph(hosts=tuple(web.names), sources=pairs // n_hosts, destinations=pairs % n_hosts, core=core)
