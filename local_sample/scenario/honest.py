"""The honest web of the coast: institutions, businesses, people, directories and far-away giants."""

from dataclasses import dataclass

import numpy as np

from scenario.settings import Settings
from scenario.web import (
    REL_SHARES,
    RELS,
    FloatArray,
    IntArray,
    Web,
    WeightedGroups,
    choose,
    draw_words,
    power_law,
)
from scenario.words import (
    ADJECTIVES,
    DEPARTMENTS,
    OFFICES,
    PAPERS,
    PEOPLE,
    PURSUITS,
    TOWNS,
    TRADES,
)


@dataclass(frozen=True, kw_only=True)
class Kind:
    """One kind of honest host: how many at scale 1, how many of them link, how much, how well liked."""

    name: str
    hosts: int
    linking_share: float
    fewest_links: int
    appeal: float


# Slices of the core, each an institution's kind of its own.
SLICES = ("universities", "councils", "libraries", "press", "museums", "schools")
KINDS = (
    Kind(name="universities", hosts=160, linking_share=0.95, fewest_links=14, appeal=12.0),
    Kind(name="councils", hosts=192, linking_share=0.95, fewest_links=12, appeal=9.0),
    Kind(name="libraries", hosts=110, linking_share=0.95, fewest_links=16, appeal=6.0),
    Kind(name="press", hosts=80, linking_share=0.95, fewest_links=18, appeal=14.0),
    Kind(name="museums", hosts=90, linking_share=0.9, fewest_links=10, appeal=6.0),
    Kind(name="schools", hosts=240, linking_share=0.85, fewest_links=8, appeal=3.0),
    Kind(name="shops", hosts=6600, linking_share=0.1, fewest_links=4, appeal=1.0),
    Kind(name="companies", hosts=2700, linking_share=0.2, fewest_links=6, appeal=1.5),
    Kind(name="guesthouses", hosts=900, linking_share=0.15, fewest_links=4, appeal=1.0),
    Kind(name="clubs", hosts=1700, linking_share=0.4, fewest_links=8, appeal=1.2),
    Kind(name="hobbies", hosts=1400, linking_share=0.55, fewest_links=10, appeal=1.2),
    Kind(name="blogs", hosts=1600, linking_share=0.7, fewest_links=12, appeal=1.2),
    Kind(name="directories", hosts=10, linking_share=1.0, fewest_links=250, appeal=25.0),
    Kind(name="giants", hosts=12, linking_share=0.5, fewest_links=5, appeal=300.0),
)
# Where a link goes: a place in the same town, one of the same circle, or whatever is well liked anywhere. The
# circle of an institution or a business is its kind; private people link much more within theirs.
TOWN_SHARE, CIRCLE_SHARE = 0.4, 0.25
PRIVATE_KINDS = ("clubs", "hobbies", "blogs")
PRIVATE_TOWN_SHARE, PRIVATE_CIRCLE_SHARE = 0.15, 0.65
PRIVATE_CIRCLES = 32
# Scales every out-degree, so that the sample comes to about 150,000 rows.
LINKS_FACTOR = 1.3


@dataclass(frozen=True, kw_only=True)
class HonestWeb:
    """What other parts need to know: hosts by kind, the town of each and who links.

    `town` and `appeal` are (n_honest,), by host number; `linkers` are the hosts that have out-links.
    """

    by_kind: dict[str, IntArray]
    town: IntArray
    appeal: FloatArray
    linkers: IntArray

    @property
    def hubs(self) -> IntArray:
        """Well-liked places that anyone might link to."""
        return np.concatenate([self.by_kind[kind] for kind in ("universities", "press", "giants")])

    def people(self) -> IntArray:
        """Linking hosts of private persons and clubs, (m,)."""
        personal = np.concatenate([self.by_kind[kind] for kind in PRIVATE_KINDS])
        return np.intersect1d(personal, self.linkers)


def plant(web: Web, settings: Settings) -> HonestWeb:
    """Plant the honest hosts and the links between them; must come first, so that numbers run from 0."""
    rng = settings.random("honest hosts")
    by_kind: dict[str, IntArray] = {}
    towns, appeals, linking, fewest = [], [], [], []
    for kind in KINDS:
        count = settings.scaled(kind.hosts, at_least=6)
        # Zipf's law for the sizes of towns.
        share = np.cumsum(1.0 / np.arange(1, len(TOWNS) + 1))
        town = np.searchsorted(share / share[-1], rng.random(count), side="right").clip(max=len(TOWNS) - 1)
        by_kind[kind.name] = web.add_hosts(_names(kind.name, town, rng))
        towns.append(town)
        appeals.append(kind.appeal * power_law(rng.random(count), 1.15, 400.0))
        linking.append(rng.random(count) < kind.linking_share)
        fewest.append(np.full(count, kind.fewest_links))
    town, appeal = np.concatenate(towns), np.concatenate(appeals)
    linkers = np.flatnonzero(np.concatenate(linking))
    honest = HonestWeb(by_kind=by_kind, town=town, appeal=appeal, linkers=linkers)
    degree = np.floor(
        np.concatenate(fewest)[linkers] * power_law(rng.random(len(linkers)), 1.9, 60.0) * LINKS_FACTOR
    ).astype(np.int64)
    _link_by_liking(web, honest, np.repeat(linkers, np.maximum(degree, 1)), settings)
    _link_within_domains(web, honest, settings)
    _plant_chains(web, honest, settings)
    return honest


def _names(kind: str, town_numbers: IntArray, rng: np.random.Generator) -> list[str]:
    """Names of one kind, one a town number."""
    count = len(town_numbers)
    town = [TOWNS[number] for number in town_numbers.tolist()]
    adjective = draw_words(rng, ADJECTIVES, count)
    first = draw_words(rng, PEOPLE, count)
    pursuit, trade = draw_words(rng, PURSUITS, count), draw_words(rng, TRADES, count)
    prefix = draw_words(rng, ("", "", "www."), count)
    department, office = draw_words(rng, DEPARTMENTS, count), draw_words(rng, OFFICES, count)
    paper = draw_words(rng, PAPERS, count)
    rows = zip(town, adjective, first, pursuit, trade, prefix, department, office, paper, strict=True)
    # All institutions of a town share a few domains, hence the locality of their links.
    patterns = {
        "universities": "{6}.{0}.ac.example",
        "councils": "{7}.{0}.gov.example",
        "libraries": "{1}.{0}-libraries.org.example",
        "press": "{5}{0}-{8}.co.example",
        "museums": "{5}{3}-museum-{0}.org.example",
        "schools": "{1}-school.{0}.sch.example",
        "shops": "{5}{1}-{4}-{0}.co.example",
        "companies": "{5}{1}{4}.example",
        "guesthouses": "{1}-house-{0}.co.example",
        "clubs": "{5}{0}-{3}.org.example",
        "hobbies": "{3}.{2}-{1}.example",
        "blogs": "{2}-in-{0}.example",
        "directories": "{5}{1}-directory.example",
        "giants": "{5}{1}wave.test",
    }
    return [patterns[kind].format(*row) for row in rows]


def _circles(honest: HonestWeb, rng: np.random.Generator) -> IntArray:
    """The circle of each honest host, (n_honest,): its kind's number, or one of the private circles."""
    kinds = honest.by_kind.items()
    kind = np.concatenate([np.full(len(hosts), number) for number, (_, hosts) in enumerate(kinds)])
    private = np.concatenate([np.full(len(hosts), name in PRIVATE_KINDS) for name, hosts in kinds])
    # Squaring makes the first circles the crowded ones; the last are small, and the core knows few of them.
    circle = np.floor(PRIVATE_CIRCLES * rng.random(len(kind)) ** 2).astype(np.int64)
    return np.where(private, len(honest.by_kind) + circle, kind)


def _link_by_liking(web: Web, honest: HonestWeb, sources: IntArray, settings: Settings) -> None:
    """Each source links to a place of its town, of its circle, or to what is well liked anywhere."""
    rng = settings.random("honest links")
    circle = _circles(honest, rng)
    private = circle[sources] >= len(honest.by_kind)
    town_below = np.where(private, PRIVATE_TOWN_SHARE, TOWN_SHARE)
    circle_below = town_below + np.where(private, PRIVATE_CIRCLE_SHARE, CIRCLE_SHARE)
    uniform, mode = rng.random(len(sources)), rng.random(len(sources))
    anywhere = np.zeros(len(circle), dtype=np.int64)
    # Far-away giants belong to no town.
    town = np.where(circle == len(honest.by_kind) - 1, len(TOWNS), honest.town)
    destination = np.where(
        mode < town_below,
        WeightedGroups(town, honest.appeal).draw(honest.town[sources], uniform),
        np.where(
            mode < circle_below,
            WeightedGroups(circle, honest.appeal).draw(circle[sources], uniform),
            WeightedGroups(anywhere, honest.appeal).draw(anywhere[sources], uniform),
        ),
    )
    rel = np.searchsorted(np.cumsum(REL_SHARES), rng.random(len(sources))).clip(max=len(RELS) - 1)
    web.add_links(sources, destination, rel)


def _link_within_domains(web: Web, honest: HonestWeb, settings: Settings) -> None:
    """Offices and departments of one domain link to each other, as site navigation does."""
    rng = settings.random("domain links")
    for kind in ("universities", "councils", "libraries", "schools"):
        hosts = honest.by_kind[kind]
        for town in np.unique(honest.town[hosts]).tolist():
            members = hosts[honest.town[hosts] == town][:40]
            source, destination = (side.ravel() for side in np.meshgrid(members, members))
            kept = (source != destination) & (rng.random(len(source)) < 0.25)
            web.add_links(source[kept], destination[kept])


def _plant_chains(web: Web, honest: HonestWeb, settings: Settings) -> None:
    """Two logs of voyages, a host a day, each linking to the next; and hosts that link to themselves."""
    rng = settings.random("chains")
    for ship in ("eddy", "windrose"):
        days = settings.scaled(60, at_least=12)
        chain = web.add_hosts([f"day{day}.{ship}-log.example" for day in range(1, days + 1)], shape="chain")
        web.add_links(chain[:-1], chain[1:])
        if ship == "eddy":
            web.add_links(choose(rng, honest.people(), 1), chain[:1])
    alone = web.add_hosts(
        [f"alone{number}.example" for number in range(settings.scaled(30))], shape="isolated"
    )
    web.add_links(alone, alone)
