"""Honest places that look like farms, and honest communities that the core does not reach."""

from collections.abc import Callable

import numpy as np

from scenario.honest import HonestWeb
from scenario.settings import Settings
from scenario.web import IntArray, Web, WeightedGroups, choose, draw_words, power_law
from scenario.words import ADJECTIVES, BOATS, ISLES, PEOPLE, PURSUITS, TOWNS, TRADES

# Platforms whose users' hosts link home: domain, users at scale 1. The first is a public suffix of the
# sample's own rules, so its users have domains of their own; the others' users share the platform's.
HOSTING_PLATFORMS = (("pages-harbourhost.example", 260), ("driftpages.example", 190), ("shopkeel.test", 120))


def plant(web: Web, honest: HonestWeb, settings: Settings) -> None:
    """Plant the look-alikes that the settings name."""
    planters: dict[str, Callable[[Web, HonestWeb, Settings, np.random.Generator], None]] = {
        "fishing_coop": _fishing_coop,
        "island_blogs": _island_blogs,
        "platform": _platforms,
        "footer_credit": _footer_credits,
        "web_ring": _web_ring,
        "office_portal": _office_portal,
    }
    for name in settings.lookalikes:
        planters[name](web, honest, settings, settings.random(f"lookalike {name}"))


def _link_among(web: Web, members: IntArray, rng: np.random.Generator, fewest_links: int) -> None:
    """Seven in ten members link to others of the community, a few of them much liked."""
    linkers = members[rng.random(len(members)) < 0.7]
    degree = np.floor(fewest_links * power_law(rng.random(len(linkers)), 1.9, 12.0)).astype(np.int64)
    sources = np.repeat(linkers, degree)
    liking = WeightedGroups(
        np.zeros(len(members), dtype=np.int64), power_law(rng.random(len(members)), 0.9, 900.0)
    )
    web.add_links(
        sources, members[liking.draw(np.zeros(len(sources), dtype=np.int64), rng.random(len(sources)))]
    )


def _fishing_coop(web: Web, honest: HonestWeb, settings: Settings, rng: np.random.Generator) -> None:
    """Boats, harbour co-operatives and their federation, under another top-level domain.

    Nothing outside links in, so no core member reaches them; they link out to the coast.
    """
    truth = {"role": "community", "shape": "fishing_coop", "group": "fishing_coop"}
    federation = web.add_hosts(["www.fishing-coops.test"], **truth)
    harbours = web.add_hosts([f"{town}-coop.test" for town in TOWNS[:14]], **truth)
    count = settings.scaled(440, at_least=30)
    port = (rng.random(count) * len(harbours)).astype(np.int64)
    boat = draw_words(rng, BOATS, count)
    boats = web.add_hosts(
        [
            f"{name}{number}.{TOWNS[place]}-boats.test"
            for number, (name, place) in enumerate(zip(boat, port, strict=True))
        ],
        **truth,
    )
    web.add_links(boats, harbours[port])
    web.add_links(harbours[port], boats)
    web.add_links(harbours, federation)
    web.add_links(federation, harbours)
    web.add_links(choose(rng, boats, count // 3), federation)
    _link_among(web, boats, rng, 3)
    out = choose(rng, boats, count // 4)
    web.add_links(out, honest.hubs[(rng.random(len(out)) * len(honest.hubs)).astype(np.int64)])


def _island_blogs(web: Web, honest: HonestWeb, settings: Settings, rng: np.random.Generator) -> None:
    """Blogs of four islands, each island a public suffix of its own; nobody on the coast links to them."""
    count = settings.scaled(320, at_least=30)
    who, where, what = (draw_words(rng, words, count) for words in (PEOPLE, ISLES, PURSUITS))
    blogs = web.add_hosts(
        [
            f"{person}-{pursuit}.{isle}.isles.example"
            for person, isle, pursuit in zip(who, where, what, strict=True)
        ],
        role="community",
        shape="island_blogs",
        group="island_blogs",
    )
    _link_among(web, blogs, rng, 6)
    out = choose(rng, blogs, count // 3)
    web.add_links(out, honest.hubs[(rng.random(len(out)) * len(honest.hubs)).astype(np.int64)])


def _platforms(web: Web, honest: HonestWeb, settings: Settings, rng: np.random.Generator) -> None:
    """Hosting platforms: users link home in the footer, friends on the coast link to the users."""
    for domain, users_at_scale_1 in HOSTING_PLATFORMS:
        count = settings.scaled(users_at_scale_1, at_least=12)
        home = web.add_hosts([f"www.{domain}"], role="lookalike", shape="platform", group=domain)
        person, about = draw_words(rng, PEOPLE, count), draw_words(rng, TRADES, count)
        users = web.add_hosts(
            [f"{who}-{what}.{domain}" for who, what in zip(person, about, strict=True)],
            shape="platform",
            group=domain,
        )
        web.add_links(users[rng.random(count) < 0.85], home)
        web.add_links(home, choose(rng, users, count // 8))
        friends = choose(rng, honest.people(), count)
        web.add_links(friends, users[(rng.random(len(friends)) * count).astype(np.int64)])
        web.add_links(choose(rng, honest.by_kind["press"], 3), home)
        sources = np.repeat(users[rng.random(count) < 0.5], 5)
        web.add_links(
            sources, honest.linkers[(rng.random(len(sources)) * len(honest.linkers)).astype(np.int64)]
        )


def _footer_credits(web: Web, honest: HonestWeb, settings: Settings, rng: np.random.Generator) -> None:
    """Designers credited in the footers of their clients, who are ordinary shops."""
    for name, clients_at_scale_1 in (("tidewright-design", 260), ("quillandkeel", 110)):
        group = f"{name}.co.example"
        designer = web.add_hosts([f"www.{group}"], role="lookalike", shape="footer_credit", group=group)
        clients = choose(rng, honest.by_kind["shops"], settings.scaled(clients_at_scale_1, at_least=12))
        web.mark(clients, role="good", shape="footer_credit", group=group)
        web.add_links(clients, designer)
        web.add_links(designer, choose(rng, clients, 15))


def _web_ring(web: Web, honest: HonestWeb, settings: Settings, rng: np.random.Generator) -> None:
    """A hobby ring: every member links to the next, to the one before and to the ring's own page."""
    count = settings.scaled(48, at_least=12)
    truth = {"role": "lookalike", "shape": "web_ring", "group": "lighthouse-ring.example"}
    home = web.add_hosts(["lighthouse-ring.example"], **truth)
    names = zip(draw_words(rng, PEOPLE, count), draw_words(rng, ADJECTIVES, count), strict=True)
    ring = web.add_hosts([f"{person}-{word}-lamp.example" for person, word in names], **truth)
    web.add_links(ring, np.roll(ring, -1))
    web.add_links(ring, np.roll(ring, 1))
    web.add_links(ring, home)
    web.add_links(home, ring)
    web.add_links(choose(rng, honest.people(), 4), choose(rng, ring, 4))


def _office_portal(web: Web, honest: HonestWeb, settings: Settings, rng: np.random.Generator) -> None:
    """A municipal portal that all its offices link to and that links back: the shape of an optimal farm."""
    group = "coast-services.gov.example"
    count = settings.scaled(70, at_least=12)
    portal = web.add_hosts([f"www.{group}"], role="lookalike", shape="office_portal", group=group)
    offices = web.add_hosts(
        [f"office{number}.{group}" for number in range(count)], shape="office_portal", group=group
    )
    web.add_links(offices, portal)
    web.add_links(portal, offices)
    web.add_links(choose(rng, honest.by_kind["councils"], 6), choose(rng, offices, 6))
    web.add_links(choose(rng, honest.by_kind["press"], 2), portal)
