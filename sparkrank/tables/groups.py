"""Which hosts look as if they belong together: rows of ``farm_groups``."""

from sparkrank.tables.columns import LEAD
from sparkrank.tables.spec import ColumnSpec, ColumnType, TableSpec

_IN_GROUP = "The same in each row of a group."
_GROUP_LEAD = "A group is a lead, not a verdict."
_NO_OWNER = (
    "It names no owner: friends, clubs, platforms and the sites of one maker are linked like this, too."
)

FARM_GROUP = ColumnSpec(
    name="farm_group",
    type=ColumnType.STRING,
    unit="text",
    nullable=True,
    meaning="Name of the group in `farm_groups` that the host is a member of. Null where it is in none.",
    caution=f"{_GROUP_LEAD} {_NO_OWNER}",
)
"""The column by which other tables name the group of a host."""

FARM_GROUPS = TableSpec(
    name="farm_groups",
    meaning="Candidates and the hosts that support them, as far as links say that they belong together: one "
    "row a member, so that a group is reviewed at once. Sources belong to the candidate to which they give "
    "the largest part of what they have, a tenth or more of their links and a fifth of their walks; "
    "candidates stay together if one supports another or a quarter of what each gets comes from sources of "
    f"both. Candidates without such sources are in no group. {_GROUP_LEAD} {LEAD}",
    key=("group", "host"),
    order=("group", "host"),
    columns=(
        ColumnSpec(
            name="group",
            type=ColumnType.STRING,
            unit="text",
            meaning="Name of the group: its candidate of most absolute mass, the first by name where several "
            "have it.",
            caution=_GROUP_LEAD,
        ),
        ColumnSpec(
            name="host",
            type=ColumnType.STRING,
            unit="text",
            meaning="The member, in canonical form. A host is in one group at most.",
            caution="Being a member says nothing of who a host belongs to.",
        ),
        ColumnSpec(
            name="role",
            type=ColumnType.STRING,
            unit="text",
            meaning="target: a candidate. booster: no candidate, but a source of one. both: a candidate that "
            "supports another of the group.",
            caution="A place in the links, not an intent.",
        ),
        ColumnSpec(
            name="shape",
            type=ColumnType.STRING,
            unit="text",
            meaning="How it is linked: star, star_with_back_links, ring (boosters link to one another, too), "
            "two_tier (boosters have what they give from hosts behind them), alliance (several targets "
            f"share or help each other), mixed; the README has the rules. {_IN_GROUP}",
            caution=_NO_OWNER,
        ),
        ColumnSpec(
            name="hosts",
            type=ColumnType.LONG,
            unit="hosts",
            meaning=f"Members of the group. {_IN_GROUP}",
        ),
        ColumnSpec(
            name="targets",
            type=ColumnType.LONG,
            unit="hosts",
            meaning=f"Members that are candidates, those of role both among them. {_IN_GROUP}",
        ),
        ColumnSpec(
            name="boosters",
            type=ColumnType.LONG,
            unit="hosts",
            meaning=f"Members that are no candidates. {_IN_GROUP}",
        ),
        ColumnSpec(
            name="domains",
            type=ColumnType.LONG,
            unit="registrable domains",
            meaning=f"Different registrable domains of the members; a host without one counts as one. "
            f"{_IN_GROUP}",
        ),
        ColumnSpec(
            name="largest_domain_share",
            type=ColumnType.DOUBLE,
            unit="share of the members",
            meaning=f"Members on the most frequent registrable domain. {_IN_GROUP}",
            caution="Near 1 it may be one platform with many users.",
        ),
        ColumnSpec(
            name="total_mass",
            type=ColumnType.DOUBLE,
            unit="scaled PageRank",
            meaning=f"Absolute mass of all members, added up. {_IN_GROUP}",
            caution=f"What members hand on to each other counts in each of them. {LEAD}",
        ),
        ColumnSpec(
            name="explained_share",
            type=ColumnType.DOUBLE,
            unit="share of what in-links carry",
            meaning="What members give the group's candidates by strong links, of all that their in-links "
            f"carry. {_IN_GROUP}",
            caution="Low, the candidates would score about as much without the group.",
        ),
    ),
)
"""Key and order are the same: a group's rows are neighbours."""
