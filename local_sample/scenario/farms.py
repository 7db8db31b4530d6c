"""Link farms of known shapes and sizes (for the shapes' arithmetic see the tests)."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from scenario.honest import HonestWeb
from scenario.settings import Settings
from scenario.web import IntArray, Web, choose, draw_words, power_law
from scenario.words import ADJECTIVES, MARKET_WORDS, TRADES

SMALLEST_FARM = 5


@dataclass(frozen=True, kw_only=True)
class Site:
    """Where one farm is planted: its group name, number of boosters and random stream."""

    web: Web
    honest: HonestWeb
    core: dict[str, IntArray]
    rng: np.random.Generator
    shape: str
    group: str
    boosters: int
    shares_domain: bool

    def target(self) -> IntArray:
        """A new target host, (1,)."""
        words = [draw_words(self.rng, some, 1)[0] for some in (MARKET_WORDS, ADJECTIVES, TRADES)]
        ending = ("example", "co.example", "test")[int(self.rng.random() * 3)]
        name = f"{'-'.join(words)}.{ending}"
        return self.web.add_hosts([name], role="target", shape=self.shape, group=self.group)

    def plant_boosters(self, count: int, role: str = "booster") -> IntArray:
        """New boosters, (count,), all below one domain or each with a domain of its own."""
        words = zip(
            draw_words(self.rng, MARKET_WORDS, count),
            draw_words(self.rng, ADJECTIVES, count),
            draw_words(self.rng, TRADES, count),
            strict=True,
        )
        # The names tell nothing of the shape: a reader of the sample should have to look at the links.
        home = f".{'-'.join(draw_words(self.rng, MARKET_WORDS, 2))}-{draw_words(self.rng, TRADES, 1)[0]}.test"
        endings = draw_words(
            self.rng, (".example", ".co.example", ".test", ".pages-harbourhost.example"), count
        )
        names = [
            f"{first}-{second}-{third}{home if self.shares_domain else ending}"
            for (first, second, third), ending in zip(words, endings, strict=True)
        ]
        return self.web.add_hosts(names, role=role, shape=self.shape, group=self.group)

    def some(self, among: IntArray, count: int) -> IntArray:
        """`count` draws from `among`, with repetition, (count,)."""
        return among[(self.rng.random(count) * len(among)).astype(np.int64)]


def plant(web: Web, honest: HonestWeb, core: dict[str, IntArray], settings: Settings) -> None:
    """Plant the farms that the settings name, each shape in sizes from 5 boosters to the largest."""
    shapes: dict[str, Callable[[Site], None]] = {
        "one_way_star": _one_way_star,
        "back_star": _back_star,
        "ring": _ring,
        "alliance": _alliance,
        "two_tier": _two_tier,
        "camouflage": _camouflage,
        "expired": _expired,
        "comment_fed": _comment_fed,
        "abused_core": _abused_core,
    }
    count = settings.scaled(settings.farms_per_shape, at_least=min(1, settings.farms_per_shape))
    for shape in settings.farm_shapes:
        rng = settings.random(f"farm {shape}")
        for number in range(count):
            # Sizes are spread evenly over the logarithm, one farm a stratum.
            spread = (number + float(rng.random())) / count
            size = SMALLEST_FARM * (settings.largest_farm / SMALLEST_FARM) ** spread
            site = Site(
                web=web,
                honest=honest,
                core=core,
                rng=rng,
                shape=shape,
                group=f"{shape}_{number + 1}",
                boosters=int(size),
                shares_domain=number % 2 == 1,
            )
            first = len(web.names)
            shapes[shape](site)
            _link_by_accident(site, np.arange(first, len(web.names)))


def _link_by_accident(site: Site, hosts: IntArray) -> None:
    """Free entries in directories and careless links of private pages, as every busy host collects some.

    Because of them the core reaches most farms, some by a thread, some by a rope.
    """
    careless = np.concatenate([site.honest.people(), site.honest.by_kind["directories"]])
    strength = power_law(site.rng.random(2), 0.8, 40.0).astype(np.int64)
    if site.rng.random() < 0.85:
        site.web.add_links(site.some(careless, int(strength[0])), hosts[:1])
        count = int(strength[1]) + len(hosts) // 40
        site.web.add_links(site.some(careless, count), site.some(hosts, count))


def _one_way_star(site: Site) -> None:
    target, boosters = site.target(), site.plant_boosters(site.boosters)
    site.web.add_links(boosters, target)


def _back_star(site: Site) -> None:
    target, boosters = site.target(), site.plant_boosters(site.boosters)
    site.web.add_links(boosters, target)
    site.web.add_links(target, boosters)


def _ring(site: Site) -> None:
    target, boosters = site.target(), site.plant_boosters(site.boosters)
    site.web.add_links(boosters, np.roll(boosters, -1))
    site.web.add_links(boosters, target)
    site.web.add_links(target, boosters[:1])


def _alliance(site: Site) -> None:
    """Two or three targets that link to each other, each with boosters of its own."""
    partners = 2 if site.boosters < 60 else 3
    targets = np.concatenate([site.target() for _ in range(partners)])
    boosters = site.plant_boosters(max(site.boosters, partners))
    site.web.add_links(boosters, targets[np.arange(len(boosters)) % partners])
    for shift in range(1, partners):
        site.web.add_links(targets, np.roll(targets, shift))


def _two_tier(site: Site) -> None:
    """Feeders link to boosters, boosters to the target, the target back to the boosters."""
    target = site.target()
    boosters = site.plant_boosters(max(2, site.boosters // 4))
    feeders = site.plant_boosters(max(3, site.boosters - len(boosters)), role="feeder")
    site.web.add_links(feeders, boosters[np.arange(len(feeders)) % len(boosters)])
    site.web.add_links(boosters, target)
    site.web.add_links(target, boosters)


def _camouflage(site: Site) -> None:
    """A star with back-links whose boosters and target also link to well-liked places."""
    _back_star(site)
    members = np.flatnonzero(np.array(site.web.groups) == site.group)
    sources = np.repeat(members, 1 + (site.rng.random(len(members)) * 3).astype(np.int64))
    site.web.add_links(sources, site.some(site.honest.hubs, len(sources)))


def _expired(site: Site) -> None:
    """An honest shop's name that lapsed and was bought: old links still point to it."""
    shops = np.setdiff1d(site.honest.by_kind["shops"], site.honest.linkers)
    free = shops[[site.web.roles[host] == "good" and not site.web.shapes[host] for host in shops.tolist()]]
    liked = free[np.argsort(-site.honest.appeal[free], kind="stable")][10:60]
    target = choose(site.rng, liked, 1)
    site.web.mark(target, role="target", shape=site.shape, group=site.group)
    boosters = site.plant_boosters(max(30, site.boosters))
    site.web.add_links(boosters, target)
    site.web.add_links(target, boosters)


def _comment_fed(site: Site) -> None:
    """Few boosters; the rest of the feed is links left on the comment pages of ordinary hosts."""
    target, boosters = site.target(), site.plant_boosters(max(SMALLEST_FARM, site.boosters // 4))
    site.web.add_links(boosters, target)
    site.web.add_links(target, boosters)
    abused = choose(site.rng, site.honest.people(), max(10, min(120, site.boosters)))
    site.web.mark(abused, role="abused", shape=site.shape, group=site.group)
    site.web.add_links(abused, target)
    # Half of the pages mark what readers write; those links lend nothing.
    site.web.add_links(choose(site.rng, site.honest.people(), len(abused)), target, 9)


def _abused_core(site: Site) -> None:
    """A small farm fed by one open guest book on a library's page that belongs to the core."""
    target, boosters = site.target(), site.plant_boosters(6 + int(site.rng.random() * 18))
    site.web.add_links(boosters, target)
    site.web.add_links(target, boosters)
    word = draw_words(site.rng, ADJECTIVES, 1)[0]
    guest_book = site.web.add_hosts(
        [f"guestbook.{word}-reading-room.org.example"], role="abused", shape=site.shape, group=site.group
    )
    libraries = site.honest.by_kind["libraries"]
    site.web.add_links(choose(site.rng, libraries, 2), guest_book)
    site.web.add_links(guest_book, choose(site.rng, libraries, 1))
    site.web.add_links(guest_book, target)
    site.core["libraries"] = np.concatenate([site.core["libraries"], guest_book])
