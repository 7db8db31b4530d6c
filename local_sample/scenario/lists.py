"""The good core and the list of known farm hosts, as an editor would hand them in."""

import numpy as np
import pyarrow as pa

from scenario.honest import SLICES, HonestWeb
from scenario.settings import Settings
from scenario.web import IntArray, Web, choose

REVIEWERS = ("A. Fenwick", "J. Osei", "M. Tarn", "R. Solveig")
NOTES = (
    "",
    "",
    "",
    "about page and imprint read",
    'calls itself "the coast\'s own", imprint complete',
    "two editors, public register entry",
    "Küstenarchiv, checked by phone",
)
# Entries that name no host of the crawl, as every hand-kept list has some.
UNMATCHED = (
    ("www.closed-last-year.ac.example", "universities"),
    ("http://old-reading-room.org.example/about", "libraries"),
    ("HARBOUR-MUSEUM-THAT-MOVED.org.example", "museums"),
)


def choose_core(honest: HonestWeb, settings: Settings, n_hosts: int) -> dict[str, IntArray]:
    """Core members by slice: `core_share` of `n_hosts`, every slice in proportion to its institutions."""
    rng = settings.random("core")
    institutions = {name: np.intersect1d(honest.by_kind[name], honest.linkers) for name in SLICES}
    eligible = sum(len(hosts) for hosts in institutions.values())
    wanted = settings.core_share * n_hosts
    return {
        name: np.sort(choose(rng, hosts, max(1, round(wanted * len(hosts) / eligible))))
        for name, hosts in institutions.items()
    }


def core_table(web: Web, core: dict[str, IntArray], settings: Settings) -> pa.Table:
    """The core list: host, slice, weight, reviewed_on, reviewer, note; a few names in other spellings."""
    rng = settings.random("core list")
    rows: list[tuple[str, str, str, str, str, str]] = []
    for slice_name, hosts in core.items():
        for number, host in enumerate(hosts.tolist()):
            name = web.names[host]
            spelled = {1: f"https://{name}/", 3: name.upper(), 5: f"{name}."}.get(number, name)
            weight = "2" if rng.random() < 0.06 else "1"
            rows.append((spelled, slice_name, weight, *_review(rng)))
            if number == 7:  # a second entry of the same host: the larger weight counts
                rows.append((name, slice_name, "0.5", *_review(rng)))
    rows += [(name, slice_name, "1", *_review(rng)) for name, slice_name in UNMATCHED]
    columns = ("host", "slice", "weight", "reviewed_on", "reviewer", "note")
    return pa.table(dict(zip(columns, map(list, zip(*rows, strict=True)), strict=True)))


def _review(rng: np.random.Generator) -> tuple[str, str, str]:
    month, day = 1 + int(rng.random() * 10), 1 + int(rng.random() * 28)
    reviewer = REVIEWERS[int(rng.random() * len(REVIEWERS))]
    return f"2026-{month:02d}-{day:02d}", reviewer, NOTES[int(rng.random() * len(NOTES))]


def known_spam_table(web: Web, settings: Settings) -> pa.Table:
    """Farm hosts that somebody reported before: every twelfth or so of the boosters, some targets."""
    rng = settings.random("known spam")
    share = {"booster": 0.08, "feeder": 0.04, "target": 0.1}
    # A target that was an honest host before, or is fed by abuse, is what nobody has noticed yet.
    listed = [
        (web.names[host], web.roles[host])
        for host, draw in enumerate(rng.random(len(web.names)).tolist())
        if draw < share.get(web.roles[host], 0.0) and web.shapes[host] not in ("expired", "abused_core")
    ]
    return pa.table(
        {
            "host": pa.array([name for name, _ in listed], pa.string()),
            "note": pa.array(["reported by a reader" for _ in listed], pa.string()),
        }
    )
