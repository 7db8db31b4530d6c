"""What puts a candidate where it is, in words: the leading facts of its support.

The texts are fixed, without numbers, so that they can be filtered by; the columns beside them have the
numbers.  They say what the links look like, never whose they are.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pyspark.sql import Column

BOUND = "most of what in-links carry comes from hosts whose walks lead here and that little else supports"
ALIKE = "its sources are many and alike: about as many links out and in"
EXCLUSIVE = "its sources link to little else"
RETURNED = "it links back to most of its sources"
CIRCLING = "rank goes around among its sources before it arrives"
MUTUAL = "its sources link to other candidates, too"
FEW_STANDING = "next to no host with a standing of its own links to it"
NEAR_KNOWN_SPAM = "a tenth or more of its rank comes from listed known spam"
OUTSIDE_CORE = "the good core accounts for less than half of its rank"
OVER_THRESHOLDS = "it is over both thresholds"

MOST_REASONS = 3

# Half of what in-links carry is "most"; a third going around is far beyond what chance links give.
_MOST = 0.5
_CIRCLING = 0.3
_KNOWN = 0.1


def reason_column() -> Column:
    """The first three of the facts that hold, in this order; needs a candidate's scores and measures."""
    from pyspark.sql import functions as sf

    def over(name: str, least: float) -> Column:
        return sf.col(name) >= least

    many_alike = over("alike_sources", _MOST) & over("source_variety", _MOST)
    known = sf.coalesce(sf.col("known_spam_mass") >= _KNOWN * sf.col("scaled_pagerank"), sf.lit(False))
    facts = [
        (over("bound_share", _MOST), BOUND),
        (known, NEAR_KNOWN_SPAM),
        (over("returned_share", _MOST), RETURNED),
        (over("circling_share", _CIRCLING), CIRCLING),
        (over("mutual_target_share", _MOST), MUTUAL),
        (many_alike, ALIKE),
        (over("exclusive_share", _MOST), EXCLUSIVE),
        (sf.col("independent_breadth") < 1, FEW_STANDING),
        (sf.col("core_reached") & over("relative_mass", _MOST), OUTSIDE_CORE),
        (sf.lit(True), OVER_THRESHOLDS),
    ]
    found = sf.array(*(sf.when(holds, text) for holds, text in facts))
    return sf.slice(sf.filter(found, lambda text: text.isNotNull()), 1, MOST_REASONS)
