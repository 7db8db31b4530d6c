"""Closed forms of farm arithmetic, in scaled units (a host without in-links scores 1).

Common practice in the trade, no single source; also Gyöngyi & Garcia-Molina, "Link Spam Alliances",
VLDB 2005 (from memory).
"""

from __future__ import annotations

import math


def farm_score(boosters: float, damping: float, *, back_links: bool) -> float:
    """Score of the target of an isolated single farm.

    Boosters link to the target alone; with back-links the target links back to all of them and to
    nothing else.
    """
    one_way = 1.0 + damping * boosters
    return one_way / (1.0 - damping**2) if back_links else one_way


def optimal_boosters(score: float, damping: float) -> float | None:
    """Boosters of the farm with back-links that has this score; None where the score needs no farm."""
    boosters = (score * (1.0 - damping**2) - 1.0) / damping
    return boosters if boosters >= 0 else None


def core_member_start(good_share: float, n_hosts: int, n_core: int) -> float:
    """J: what an average core member gets of trust before any link, γN / core members."""
    return good_share * n_hosts / n_core


def boosters_hidden_by_core_link(
    start: float, out_links: int, damping: float, max_relative_mass: float
) -> float | None:
    """Largest farm that one link from a core member keeps under a threshold of relative mass.

    ``start`` is J and ``out_links`` the member's number of out-links.  The farm's boosters are
    back-linked.  None where no farm is over the threshold (a threshold of 1).
    """
    if max_relative_mass >= 1.0:
        return None
    boosters = (damping * start / (out_links * (1.0 - max_relative_mass)) - 1.0) / damping
    return max(0.0, boosters) if math.isfinite(boosters) else None
