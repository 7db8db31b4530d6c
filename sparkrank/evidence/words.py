"""The evidence for one host in words, for a terminal: what a reviewer opens, and what answers an appeal."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from sparkrank.config import Candidates
from sparkrank.shown import shown_value

Row = Mapping[str, Any]

_SHOWN_SOURCES = 10  # as many as fit a screen beside the rest; the table has all

LEAD = "A score is a lead, not a verdict: it says how links run, not whose they are or what was meant."


def explanation(host: Row, support: Iterable[Row], thresholds: Candidates) -> str:
    """A row of ``explained_hosts`` and its rows of ``explained_support`` in words."""
    lines = [shown_value(host["host"]), f"  {_standing(host, thresholds)}", *_scores(host), *_sources(host)]
    lines += [f"  why: {text}" for text in host["reasons"]]
    lines += [f"  but: {text}" for text in host["cautions"]]
    if host["attributes"] is not None:
        lines.append(f"  the hosts input says: {shown_value(host['attributes'])}")
    rows = list(support)
    for kind, title in (
        ("direct", "hosts that link here, by what their links bring"),
        ("origin", "hosts whose own start arrives here, over paths of any length"),
    ):
        chosen = sorted((row for row in rows if row["kind"] == kind), key=lambda row: row["position"])
        if chosen:
            lines += [f"  {title}:", *(_source(row) for row in chosen[:_SHOWN_SOURCES])]
            lines.append(f"    {_rest(chosen)}")
    return "\n".join([*lines, f"  {LEAD}"])


def _standing(host: Row, thresholds: Candidates) -> str:
    """Whether the host is listed, and why not."""
    if host["rank"] is not None:
        return f"candidate number {host['rank']:,} for review"
    if host["is_core"]:
        return "not listed: a member of the good core"
    short = []
    if host["scaled_pagerank"] < thresholds.min_scaled_pagerank:
        short.append(
            f"scaled PageRank {host['scaled_pagerank']:.4g} is below {thresholds.min_scaled_pagerank:.4g}"
        )
    if host["relative_mass"] < thresholds.min_relative_mass:
        short.append(f"relative mass {host['relative_mass']:.4g} is below {thresholds.min_relative_mass:.4g}")
    return f"not listed: {' and '.join(short)}"


def _scores(host: Row) -> list[str]:
    reach = (
        f"{host['core_distance']} links from the nearest core member"
        if host["core_reached"]
        else "no path leads here from the good core: unknown, not spam"
    )
    lines = [
        f"  PageRank {host['scaled_pagerank']:,.4g} times that of a host without in-links; the good core "
        f"accounts for {host['trust']:,.4g}; relative mass {host['relative_mass']:.4g}",
        f"  {reach}",
    ]
    if host["relative_mass_low"] is not None:
        low, high = host["relative_mass_low"], host["relative_mass_high"]
        lines.append(f"  relative mass from {low:.4g} to {high:.4g} over cores without one of their slices")
    if host["known_spam_mass"]:
        share = host["known_spam_mass"] / host["scaled_pagerank"]
        lines.append(f"  {share:.1%} of its PageRank comes from listed known spam")
    return lines


def _sources(host: Row) -> list[str]:
    if host["in_degree"] == 0:
        return ["  no host links here"]
    lines = [
        f"  {host['in_degree']:,} hosts link here, it links to {host['out_degree']:,}",
        f"  of what in-links carry, {host['close_share']:.0%} comes from sources that look close, "
        f"{host['open_page_share']:.0%} from pages that may be open to anyone, "
        f"{host['independent_share']:.0%} from independent ones",
    ]
    if host["optimal_boosters"] is not None:
        lines.append(
            f"  without the feed from outside, a farm of {host['optimal_boosters']:,.0f} back-linked hosts "
            "would do as much"
        )
    return lines


def _source(row: Row) -> str:
    notes = [f"{row['distance']} links away" if row["kind"] == "origin" else f"looks {row['looks_like']}"]
    if row["link_returned"]:
        notes.append("linked back")
    if row["same_domain"]:
        notes.append("same domain")
    if row["source_is_core"]:
        notes.append("core member")
    notes.append(f"PageRank {row['source_scaled_pagerank']:,.4g}")
    return f"    {row['share']:7.2%}  {shown_value(row['source'])}  ({', '.join(notes)})"


def _rest(rows: list[Row]) -> str:
    shown = sum(row["share"] for row in rows[:_SHOWN_SOURCES])
    listed = sum(row["share"] for row in rows)
    more = max(0, len(rows) - _SHOWN_SOURCES)
    return (
        f"{listed - shown:7.2%}  of {more:,} more in the table; {rows[0]['unexplained_share']:.2%} is "
        "of hosts that are not listed"
    )
