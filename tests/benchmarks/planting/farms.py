"""Link farms, each with habits of its own: size, domains, feed, decoys, returned links."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planting.web import HELPER, TARGET, IntArray, PlantedWeb


@dataclass(frozen=True, kw_only=True)
class Habits:
    """How one farm's owner works.

    `feed`: honest pages that link to the target; `decoys`: largest number of links of a booster to popular
    hosts; `strays`: share of boosters that an honest page links to; `returned`: share of boosters that the
    target links back to; `domain`: whose domain the boosters live on.
    """

    boosters: int
    feed: int
    decoys: int
    strays: float
    returned: float
    domain: str


def draw_habits(web: PlantedWeb, *, smallest: int = 12, largest: int = 300) -> Habits:
    random = web.random
    if random.random() < 0.04:
        largest *= 8
    return Habits(
        boosters=web.size(smallest, largest),
        feed=int(random.choice([0, 0, web.size(1, 6), web.size(4, 50)])),
        decoys=int(random.choice([0, 0, 0, 1, 3, 6] if web.hard else [0, 0, 0, 0, 1, 3])),
        strays=float(random.choice([0.0, 0.0, 0.0, 0.05, 0.25 if web.hard else 0.1])),
        returned=float(random.choice([0.0, 0.0, 0.3, 1.0])),
        domain=str(random.choice(["own", "own", "shared", "target"])),
    )


def plant_target(web: PlantedWeb, shape: str, habits: Habits) -> IntArray:
    target = web.hosts(1, shape, role=TARGET)
    web.link(web.some(web.linking, habits.feed), target)
    return target


def plant_boosters(web: PlantedWeb, shape: str, habits: Habits, count: int, target: IntArray) -> IntArray:
    """Boosters with decoys and strays, without their links to the target."""
    domain = web.domain_of(int(target[0])) if habits.domain == "target" else habits.domain
    boosters = web.hosts(count, shape, role=HELPER, domain=domain)
    if habits.decoys:
        per_host = web.random.integers(0 if habits.decoys < 3 else 1, habits.decoys + 1, count)
        web.link(np.repeat(boosters, per_host), web.popular(int(per_host.sum())))
    strays = web.share(boosters, habits.strays)
    web.link(web.some(web.linking, len(strays)), strays)
    return boosters


def _star(web: PlantedWeb, shape: str, habits: Habits) -> tuple[IntArray, IntArray]:
    target = plant_target(web, shape, habits)
    boosters = plant_boosters(web, shape, habits, habits.boosters, target)
    web.link(boosters, target)
    web.link(target, web.share(boosters, habits.returned))
    return target, boosters


def star(web: PlantedWeb) -> None:
    _star(web, "star", draw_habits(web))


def ring(web: PlantedWeb) -> None:
    """Boosters that link to the next, some of them to the one before too, all but a few to the target."""
    habits = draw_habits(web)
    target = plant_target(web, "ring", habits)
    boosters = plant_boosters(web, "ring", habits, habits.boosters, target)
    web.link(boosters, np.roll(boosters, -1))
    if web.random.random() < 0.3:
        web.link(boosters, np.roll(boosters, 1))
    web.link(web.share(boosters, float(web.random.choice([1.0, 1.0, 0.7]))), target)
    web.link(target, boosters[:1] if habits.returned == 0 else web.share(boosters, habits.returned))


def two_tier(web: PlantedWeb) -> None:
    habits = draw_habits(web, smallest=20)
    target = plant_target(web, "two_tier", habits)
    middle = max(2, int(habits.boosters * web.random.uniform(0.03, 0.4)))
    boosters = plant_boosters(web, "two_tier", habits, middle, target)
    feeders = web.hosts(habits.boosters, "two_tier", role=HELPER)
    web.link(feeders, boosters[np.arange(len(feeders)) % middle])
    if web.random.random() < 0.3:
        web.link(feeders, web.some(boosters, len(feeders)))
    web.link(boosters, target)
    web.link(target, web.share(boosters, habits.returned))


def alliance(web: PlantedWeb) -> None:
    habits = draw_habits(web)
    stars = [_star(web, "alliance", habits)[0] for _ in range(int(web.random.integers(2, 6)))]
    targets = np.concatenate(stars)
    for shift in range(1, len(targets)):
        web.link(targets, np.roll(targets, shift))


def shared_net(web: PlantedWeb) -> None:
    """Boosters that serve several targets at once."""
    habits = draw_habits(web, smallest=40)
    targets = np.concatenate(
        [plant_target(web, "shared_net", habits) for _ in range(int(web.random.integers(2, 5)))]
    )
    boosters = plant_boosters(web, "shared_net", habits, habits.boosters, targets)
    for target in targets:
        served = web.share(boosters, float(web.random.uniform(0.6, 1.0)))
        web.link(served, target)
        web.link(np.array([target]), web.share(served, habits.returned))


def exchange(web: PlantedWeb) -> None:
    """Several farms whose boosters also link to the other farms' targets now and then."""
    habits = draw_habits(web)
    stars = [_star(web, "exchange", habits) for _ in range(int(web.random.integers(2, 7)))]
    targets = np.concatenate([target for target, _ in stars])
    for target, boosters in stars:
        traded = web.share(boosters, 0.3)
        web.link(traded, web.some(targets, len(traded)))
        web.link(target, web.some(targets, 2))


def expired(web: PlantedWeb) -> None:
    """A liked host of the base, without links of its own, that is the target now."""
    habits = draw_habits(web, smallest=25)
    linked = np.setdiff1d(web.liked, np.concatenate([web.linking, web.linking_core]))
    target = web.some(linked[~web.core[linked]], 1)
    web.mark(target, TARGET, "expired")
    boosters = plant_boosters(web, "expired", habits, habits.boosters, target)
    web.link(boosters, target)
    web.link(target, web.share(boosters, habits.returned))


def comments(web: PlantedWeb) -> None:
    """Some boosters, and links left on pages of ordinary hosts."""
    habits = draw_habits(web)
    target, _ = _star(web, "comments", habits)
    web.link(web.some(web.linking, web.size(5, 80)), target)


def core_comments(web: PlantedWeb) -> None:
    """Some boosters, and links left on pages of core members: the mass may be below zero."""
    habits = draw_habits(web)
    target, _ = _star(web, "core_comments", habits)
    web.link(web.some(web.linking_core, int(web.random.integers(1, 5))), target)


def thin(web: PlantedWeb) -> None:
    """Boosters with many links elsewhere."""
    habits = draw_habits(web, smallest=60)
    target = plant_target(web, "thin", habits)
    boosters = plant_boosters(web, "thin", habits, habits.boosters, target)
    web.link(boosters, target)
    per_host = web.random.integers(2, 6, len(boosters))
    web.link(np.repeat(boosters, per_host), web.popular(int(per_host.sum())))


def mesh(web: PlantedWeb) -> None:
    """Boosters that link to each other at random and to the target."""
    habits = draw_habits(web)
    target = plant_target(web, "mesh", habits)
    boosters = plant_boosters(web, "mesh", habits, habits.boosters, target)
    per_host = web.random.integers(1, 5, len(boosters))
    web.link(np.repeat(boosters, per_host), web.some(boosters, int(per_host.sum())))
    web.link(boosters, target)
    web.link(target, web.share(boosters, habits.returned))


def pyramid(web: PlantedWeb) -> None:
    """Three tiers below the target."""
    habits = draw_habits(web, smallest=60)
    target = plant_target(web, "pyramid", habits)
    upper = plant_boosters(web, "pyramid", habits, max(2, habits.boosters // 20), target)
    middle = plant_boosters(web, "pyramid", habits, max(6, habits.boosters // 4), target)
    lower = web.hosts(habits.boosters, "pyramid", role=HELPER)
    web.link(lower, middle[np.arange(len(lower)) % len(middle)])
    web.link(middle, upper[np.arange(len(middle)) % len(upper)])
    web.link(upper, target)


FARMS: dict[str, Callable[[PlantedWeb], None]] = {
    shape.__name__: shape
    for shape in (
        star, ring, two_tier, alliance, shared_net, exchange, expired, comments, core_comments, thin, mesh,
        pyramid,
    )
}  # fmt: skip
