"""What speaks against a candidate's scores, in words a reviewer reads before the scores.

The texts are fixed, without numbers, so that they can be filtered by; each is written once, here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from sparkrank.kernels.farms import boosters_hidden_by_core_link, core_member_start

if TYPE_CHECKING:
    from pyspark.sql import Column, DataFrame

NOT_REACHED = "no path leads here from the good core: unknown, not spam"
ONE_SLICE = "leaving one slice out of the good core would take this host below the threshold"
BARE_SUFFIX = "the good core has next to no members under this public suffix"
THIN_CORE = "the good core is thin: one abused link from a member could hide a farm of a thousand hosts"
FEW_SLICES = "the good core has fewer than two slices: how stable the score is cannot be told"

ONE_MEMBER = "nearly all of its trust comes from one core member"

# A core member with ten out-links is an ordinary page; a farm of a thousand is a large one.
_LINK_OUT_LINKS = 10
_FARM_BOOSTERS = 1000.0
# A suffix with less than a tenth of the members that an even spread would give it is left out.
_EVEN_SHARE = 0.1
# All but a tenth: then the others hardly count.
_NEARLY_ALL = 0.9


@dataclass(frozen=True, kw_only=True)
class CoreStrength:
    """How much hangs on single members of the core.

    ``start`` is J, an average member's own share of trust, scaled.  ``hidden_boosters``: the largest
    back-linked farm that one link from a member with ten out-links keeps under the threshold; None at
    a threshold of 1.
    """

    start: float
    hidden_boosters: float | None
    slices: int

    @property
    def cautions(self) -> list[str]:
        """What every candidate of the run must carry."""
        found = []
        if self.slices < 2:
            found.append(FEW_SLICES)
        if self.hidden_boosters is not None and self.hidden_boosters >= _FARM_BOOSTERS:
            found.append(THIN_CORE)
        return found


def core_strength(
    *, good_share: float, n_hosts: int, n_core: int, slices: int, damping: float, min_relative_mass: float
) -> CoreStrength:
    """J of a core and the farm that one of its links hides under the threshold in force."""
    start = core_member_start(good_share, n_hosts, n_core)
    hidden = boosters_hidden_by_core_link(start, _LINK_OUT_LINKS, damping, min_relative_mass)
    return CoreStrength(start=start, hidden_boosters=hidden, slices=slices)


def bare_suffixes(scores: DataFrame) -> DataFrame:
    """Public suffixes (column ``bare_suffix``) with next to no core members: less than a tenth of what
    an even spread of the core over all hosts would give, or none."""
    from pyspark.sql import functions as sf

    by_suffix = scores.groupBy("suffix").agg(
        sf.count(sf.lit(1)).alias("hosts"), sf.sum(sf.col("is_core").cast("long")).alias("members")
    )
    total = by_suffix.agg(sf.sum("hosts").alias("all_hosts"), sf.sum("members").alias("all_members"))
    even = sf.col("all_members") * sf.col("hosts") / sf.col("all_hosts")
    bare = (sf.col("members") == 0) | (sf.col("members") < _EVEN_SHARE * even)
    return by_suffix.crossJoin(sf.broadcast(total)).where(bare).select(sf.col("suffix").alias("bare_suffix"))


def caution_column(strength: CoreStrength, min_relative_mass: float) -> Column:
    """Cautions of a candidate; needs its scores, its measures with what honest thing its shape may be
    (``look_alikes``), and the boolean ``is_bare_suffix``."""
    from pyspark.sql import functions as sf

    # One slice decides where the whole core says candidate and some core without a slice does not.
    one_slice = sf.col("core_reached") & (sf.col("relative_mass_low") < min_relative_mass)
    found = [
        sf.when(~sf.col("core_reached"), NOT_REACHED),
        sf.when(one_slice, ONE_SLICE),
        sf.when(sf.col("is_bare_suffix"), BARE_SUFFIX),
        sf.when(sf.col("largest_core_member_trust_share") >= _NEARLY_ALL, ONE_MEMBER),
        *[sf.lit(text) for text in strength.cautions],
    ]
    own = sf.filter(sf.array(*found), lambda text: text.isNotNull())
    return sf.concat(own, sf.col("look_alikes"))
