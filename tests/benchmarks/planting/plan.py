"""Which farms and look-alikes one seed plants into a base."""

import dataclasses
from collections.abc import Sequence

import numpy as np

from planting.farms import FARMS
from planting.lookalikes import LOOKALIKES, unreached_part
from planting.web import BaseGraph, Finished, PlantedWeb

# Kept out of the choosing of the order; only the last judgement plants them.
LEFT_OUT_FARMS = ("pyramid", "mesh", "exchange")
LEFT_OUT_LOOKALIKES = ("tiered_association", "fan_star")
# A web has a few communities that the core does not reach, and they have many liked hosts each.
_COMMUNITIES = (3, 8)


def plant(
    base: BaseGraph,
    seed: int,
    *,
    farms: Sequence[str],
    lookalikes: Sequence[str],
    each: int,
    hard: bool,
    unreached_parts: int = 0,
) -> Finished:
    """`each` farms a shape and about as many look-alikes a kind, in a base whose core is thinned by chance.

    On a hard web the sources of look-alikes may be as unknown as boosters are, and boosters link to more
    decoys: some honest stars are farms then, as far as links go. `unreached_parts` copies of parts of the
    base are out of the core's reach: all their hosts have the relative mass of a farm without a feed.
    """
    random = np.random.Generator(np.random.PCG64([seed, 7]))
    web = PlantedWeb(_thinned(base, random), random, hard=hard)
    for name in farms:
        for _ in range(each):
            FARMS[name](web)
    for name in lookalikes:
        low, high = _COMMUNITIES if name in ("community", "tiered_association") else (each // 2, each)
        for _ in range(int(random.integers(low, high + 1))):
            LOOKALIKES[name](web)
    for _ in range(unreached_parts):
        unreached_part(web)
    return web.finished()


def _thinned(base: BaseGraph, random: np.random.Generator) -> BaseGraph:
    """The base with all of its core, a part, or a handful; at times without the core of some suffixes."""
    core = base.core & (random.random(base.n_hosts) < random.choice([1.0, 1.0, 0.3, 0.05]))
    if random.random() < 0.3:
        core &= ~np.isin(base.suffixes, random.choice(np.unique(base.suffixes), 2))
    return base if core.sum() < 5 else dataclasses.replace(base, core=core)
