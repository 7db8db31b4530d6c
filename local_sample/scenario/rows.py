"""From planted links to rows as a crawl hands them over: repeated, spelled badly, some of them useless."""

from collections.abc import Callable

import numpy as np
import pyarrow as pa

from scenario.honest import HonestWeb
from scenario.settings import Settings
from scenario.web import RELS, IntArray, Web, choose, power_law

PARTITIONS = 4
REPEATED_SHARE = 0.055
SPELLED_SHARE = 0.02
REFUSED_SHARE = 0.01

# Hosts that look wrong and are not: canonical name, and another spelling of it (or none).
ODD_HOSTS: tuple[tuple[str, str | None], ...] = (
    ("xn--mwehavn-q1a.example", "Møwehavn.example"),
    ("xn--bcher-am-kai-dlb.example", "http://bücher-am-kai.example/regal?x=1"),
    ("xn--kstenblick-9db.co.example", "KÜSTENBLICK.co.example"),
    ("192.0.2.17", "http://0xC0000211/"),
    ("198.51.100.4", None),
    ("[2001:db8::7]", "http://[2001:DB8:0:0::7]:8080/"),
    ("localhost", None),
    ("rope,twine.example", None),
    ("net_loft.tarnholm.example", None),
    ("=hyperlink(a1).example", None),
    ("xn--fischbrtchen-bjb.example", "https://Fischbrötchen.example"),
)
# Names that no host can be read from; each fills `src` or `dst` of some rows.
REFUSED_NAMES: tuple[str | None, ...] = (
    None,
    "",
    "   ",
    "www..saltmere.example",
    "quay.example%20",
    "old quay.example",
    "user@mail.example",
    "back\\slash.example",
    "tide\x07table.example",
    "<script>alert(1)</script>.example",
    '=HYPERLINK("http://quay.example","open")',
    "http://",
    "http://quay.example:99999/",
    "https://exa mple.test/",
    "http://1.2.3.4.5/",
    "quay.1234",
    "ferry.example\nberth.example",
    ".leading.example",
    "mailto://@",
    "a" * 64 + ".example",
    "long-" * 1_998 + "nm.example",
)
SPELLINGS: tuple[Callable[[str], str], ...] = (
    str.upper,
    lambda name: f"https://{name}/",
    lambda name: f"http://{name.title()}:8080/index.html?from=coast#top",
    lambda name: f"{name}.",
    lambda name: f"https://reader:secret@{name}/members",
    lambda name: f"//{name}/feed",
    lambda name: f"{name}:443",
    lambda name: f"{name}/~notes",
)


def plant_odd_hosts(web: Web, honest: HonestWeb, settings: Settings) -> None:
    """Plant the hosts with odd names, each linked from a private page; half of them link to hubs."""
    rng = settings.random("odd hosts")
    odd = web.add_hosts([name for name, _ in ODD_HOSTS], shape="odd_name")
    for host, (_, spelling) in zip(odd.tolist(), ODD_HOSTS, strict=True):
        if spelling is not None:
            web.spellings[host] = spelling
    # Twice, so that both spellings of a name occur.
    for _ in range(2):
        web.add_links(choose(rng, honest.people(), len(odd)), odd)
    web.add_links(odd[::2], choose(rng, honest.hubs, len(odd[::2])))


def adopt_unlinked(web: Web, honest: HonestWeb, settings: Settings) -> None:
    """Give every host that no link touches an entry in a directory: a host without a row is in no graph.

    Hosts of communities that nobody outside knows link to themselves instead.
    """
    rng = settings.random("adoption")
    sources, destinations, _ = web.links()
    touched = np.zeros(len(web.names), dtype=bool)
    touched[sources] = touched[destinations] = True
    orphans = np.flatnonzero(~touched)
    apart = np.array([web.roles[host] == "community" for host in orphans.tolist()], dtype=bool)
    directories = honest.by_kind["directories"]
    entries = directories[(rng.random(len(orphans)) * len(directories)).astype(np.int64)]
    web.add_links(np.where(apart, orphans, entries), orphans)


def edge_rows(web: Web, settings: Settings) -> pa.Table:
    """All rows: src, dst string; links int64; rel string, all nullable; part int32, the partition.

    A row lies in the partition of its source host, a repeated one anywhere, as when a host is crawled twice.
    """
    rng = settings.random("rows")
    source, destination, rel = web.links()
    again = np.flatnonzero(rng.random(len(source)) < REPEATED_SHARE)
    source, destination = (np.concatenate([side, side[again]]) for side in (source, destination))
    rel = np.concatenate([rel, rel[again]])
    part = source * 2_654_435_761 % 1_000_003 % PARTITIONS
    part[-len(again) :] = (rng.random(len(again)) * PARTITIONS).astype(np.int64)
    links = power_law(rng.random(len(source)), 1.1, 5_000.0).astype(np.int64)
    refused_src, refused_dst, refused_links = _refused_rows(web, round(len(source) * REFUSED_SHARE), rng)
    n_refused = len(refused_src)
    names = pa.array(web.names, pa.string())
    rels = pa.array(RELS, pa.string()).take(pa.array(rel))
    table = pa.table(
        {
            "src": pa.concat_arrays([_spelled(web, names, source, rng), refused_src]),
            "dst": pa.concat_arrays([_spelled(web, names, destination, rng), refused_dst]),
            "links": pa.concat_arrays([pa.array(links), refused_links]),
            "rel": pa.concat_arrays([rels, pa.nulls(n_refused, pa.string())]),
            "part": pa.array(np.concatenate([part, np.arange(n_refused) % PARTITIONS]).astype(np.int32)),
        }
    )
    # Stable, so rows of a partition keep their order: by source as planted.
    return table.take(pa.array(np.argsort(table["part"].to_numpy(), kind="stable")))


def _spelled(web: Web, names: pa.Array, hosts: IntArray, rng: np.random.Generator) -> pa.Array:
    """Names of `hosts`, a small share of them in another spelling that means the same host."""
    column = names.take(pa.array(hosts)).to_pylist()
    style = (rng.random(len(hosts)) * len(SPELLINGS)).astype(np.int64)
    plain = np.array(
        [name.rsplit(".", 1)[-1] in ("example", "test") and name[0].isalpha() for name in web.names]
    )
    for place in np.flatnonzero((rng.random(len(hosts)) < SPELLED_SHARE) & plain[hosts]).tolist():
        column[place] = SPELLINGS[style[place]](column[place])
    special = np.isin(hosts, np.array(sorted(web.spellings), dtype=np.int64)) & (rng.random(len(hosts)) < 0.6)
    for place in np.flatnonzero(special).tolist():
        column[place] = web.spellings[int(hosts[place])]
    return pa.array(column, pa.string())


def _refused_rows(web: Web, count: int, rng: np.random.Generator) -> tuple[pa.Array, pa.Array, pa.Array]:
    """src, dst and links of rows that must be set aside, for the name or for the number of links."""
    partners = [web.names[host] for host in (rng.random(count) * len(web.names)).astype(np.int64).tolist()]
    others = [web.names[host] for host in (rng.random(count) * len(web.names)).astype(np.int64).tolist()]
    sources: list[str | None] = []
    destinations: list[str | None] = []
    links: list[int | None] = []
    for row, (partner, other) in enumerate(zip(partners, others, strict=True)):
        fault = row % (len(REFUSED_NAMES) + 2)
        if fault < len(REFUSED_NAMES):
            bad = REFUSED_NAMES[fault]
            # Mostly a page that links to rubbish; at times the crawled name itself is.
            swapped = row % 5 == 0
            sources.append(bad if swapped else partner)
            destinations.append(partner if swapped else bad)
            links.append(1)
        else:
            sources.append(partner)
            destinations.append(other)
            links.append(None if fault == len(REFUSED_NAMES) else -(row % 3))
    return pa.array(sources, pa.string()), pa.array(destinations, pa.string()), pa.array(links, pa.int64())
