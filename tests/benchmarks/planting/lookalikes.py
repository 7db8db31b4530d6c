"""Honest places that look like farms: what the core does not reach, and what many small hosts link to."""

from collections.abc import Callable

import numpy as np

from planting.web import IntArray, PlantedWeb


def _lively(web: PlantedWeb, hosts: IntArray, *, out: float, known: float) -> None:
    """Links of small sites: to popular and to any hosts of the base (0 to `out`), and from its pages."""
    per_host = web.random.geometric(1.0 / (1.0 + out), len(hosts)) - 1
    sources = np.repeat(hosts, per_host)
    popular = web.random.random(len(sources)) < 0.6
    where = np.where(popular, web.popular(len(sources)), web.some(web.liked, len(sources)))
    web.link(sources, where)
    friends = np.repeat(web.share(hosts, known), 1)
    web.link(web.some(web.linking, len(friends)), friends)


def _liveliness(web: PlantedWeb) -> dict[str, float]:
    """From sites that link a lot and are known to sites that are neither; the latter on hard webs only."""
    if not web.hard:
        return {"out": float(web.random.uniform(1.0, 4.0)), "known": float(web.random.uniform(0.3, 0.9))}
    return {
        "out": float(web.random.choice([0.3, 1.0, 2.0, 4.0])),
        "known": float(web.random.choice([0.05, 0.2, 0.5, 0.8])),
    }


def platform(web: PlantedWeb) -> None:
    """Users' sub-hosts link home; home links to some of them."""
    home = web.hosts(1, "platform")
    users = web.hosts(web.size(20, 600), "platform", domain=web.domain_of(int(home[0])))
    web.link(web.share(users, float(web.random.uniform(0.6, 1.0))), home)
    web.link(home, web.share(users, float(web.random.choice([0.0, 0.05, 0.3, 1.0]))))
    _lively(web, users, **_liveliness(web))
    web.link(web.some(web.linking, web.size(1, 30)), home)


def hoster(web: PlantedWeb) -> None:
    """Customers with domains of their own link to their hoster."""
    home = web.hosts(1, "hoster")
    customers = web.hosts(web.size(30, 500), "hoster")
    web.link(web.share(customers, float(web.random.uniform(0.5, 1.0))), home)
    _lively(web, customers, **_liveliness(web))
    web.link(web.some(web.linking, web.size(2, 30)), home)


def footer_credit(web: PlantedWeb) -> None:
    """A designer credited by clients: linking hosts of the base, new small sites, or both."""
    designer = web.hosts(1, "footer_credit")
    known = web.some(web.linking, web.size(10, 300))
    if web.random.random() < 0.6:
        new = web.hosts(web.size(15, 300), "footer_credit")
        _lively(web, new, **_liveliness(web))
        web.link(new, designer)
        known = known[: len(known) // 4]
    web.link(known, designer)
    web.link(designer, web.share(known, float(web.random.choice([0.0, 0.1, 0.5]))))


def hobby_ring(web: PlantedWeb) -> None:
    """Members link to both neighbours and to the ring's page, which lists them."""
    home = web.hosts(1, "hobby_ring")
    members = web.hosts(web.size(15, 150), "hobby_ring")
    web.link(members, np.roll(members, 1))
    if web.random.random() < 0.7:
        web.link(members, np.roll(members, -1))
    web.link(members, home)
    if web.random.random() < 0.7:
        web.link(home, members)
    _lively(web, members, **_liveliness(web))


def office_portal(web: PlantedWeb) -> None:
    """Offices and their portal link to each other; other hosts know them."""
    portal = web.hosts(1, "office_portal")
    domain = web.domain_of(int(portal[0])) if web.random.random() < 0.7 else "own"
    offices = web.hosts(web.size(15, 120), "office_portal", domain=domain)
    web.link(offices, portal)
    web.link(portal, offices)
    _lively(web, offices, **_liveliness(web))
    web.link(web.some(web.linking, web.size(2, 20)), portal)


def directory(web: PlantedWeb) -> None:
    """Lists hosts of the base and small new sites, a part of which link back."""
    home = web.hosts(1, "directory")
    listed = web.some(web.linking, web.size(60, 900))
    small = web.hosts(web.size(10, 300), "directory")
    _lively(web, small, **_liveliness(web))
    listed = np.concatenate([listed, small])
    web.link(home, listed)
    web.link(web.share(listed, float(web.random.uniform(0.1, 0.6))), home)


def fan_star(web: PlantedWeb) -> None:
    """One-page sites about one thing that link to it; a part of the web does, too."""
    centre = web.hosts(1, "fan_star")
    fans = web.hosts(web.size(15, 300), "fan_star")
    web.link(fans, centre)
    _lively(web, fans, **_liveliness(web))
    web.link(web.some(web.linking, int(len(fans) * web.random.uniform(0.05, 0.6)) + 1), centre)


def community(web: PlantedWeb) -> None:
    """A language, island or trade whose hosts link to each other and out; next to nobody links in."""
    suffix = web.new_suffix()
    count = web.size(80, 900)
    kind = str(web.random.choice(["own", "own", "shared"]))
    members = web.hosts(count, "community", domain=kind, suffix=suffix)
    linkers = web.share(members, float(web.random.uniform(0.4, 0.95)))
    fewest = float(web.random.choice([1.0, 2.0, 4.0, 6.0] if web.hard else [2.0, 4.0, 6.0]))
    degree = np.floor(fewest * np.minimum(web.random.pareto(1.9, len(linkers)) + 1.0, 12.0)).astype(np.int64)
    liking = np.minimum(web.random.pareto(0.9, count) + 1.0, 900.0)
    sources = np.repeat(linkers, degree)
    web.link(sources, members[web.random.choice(count, len(sources), p=liking / liking.sum())])
    web.link(web.share(linkers, 0.2), web.popular(1))
    out = web.share(linkers, float(web.random.uniform(0.1, 0.6)))
    web.link(out, web.popular(len(out)))
    web.link(web.some(web.linking, int(web.random.integers(0, 4))), web.some(members, 1))


def tiered_association(web: PlantedWeb) -> None:
    """Members link to their branch, branches to the head office, both link back: unreached by the core."""
    suffix = web.new_suffix()
    head = web.hosts(1, "tiered_association", suffix=suffix)
    branches = web.hosts(web.size(5, 25), "tiered_association", suffix=suffix)
    members = web.hosts(web.size(60, 500), "tiered_association", suffix=suffix)
    own = branches[web.random.integers(0, len(branches), len(members))]
    web.link(members, own)
    web.link(own, members)
    web.link(branches, head)
    web.link(head, branches)
    sources = np.repeat(web.share(members, 0.7), 3)
    web.link(sources, web.some(members, len(sources)))
    _lively(web, members, out=0.4, known=0.0)


def unreached_part(web: PlantedWeb) -> None:
    """A copy of a part of the base, by domains: honest links as they are, out of the core's reach."""
    chosen = web.random.random(int(web.base.domains.max()) + 1) < web.random.uniform(0.3, 0.6)
    hosts = web.share(web.copied(chosen[web.base.domains], "unreached_part"), 0.2)
    web.link(hosts, web.popular(len(hosts)))


LOOKALIKES: dict[str, Callable[[PlantedWeb], None]] = {
    shape.__name__: shape
    for shape in (
        platform, hoster, footer_credit, hobby_ring, office_portal, directory, fan_star, community,
        tiered_association,
    )
}  # fmt: skip
