"""Columns that several tables share. Meanings are written for the person who reviews hosts."""

from sparkrank.tables.spec import ColumnSpec, ColumnType

LEAD = "A score is a lead, not a verdict: look at the host before you judge it."
UNKNOWN = (
    "Unknown is not spam: honest hosts that the core does not reach look the same, "
    "whole communities of them too."
)

HOST = ColumnSpec(
    name="host",
    type=ColumnType.STRING,
    unit="text",
    meaning="Host in canonical form (lower case, internationalised names in their ASCII form); "
    "in a domain graph its registrable domain.",
)

NAME_COLUMNS = (
    ColumnSpec(
        name="domain",
        type=ColumnType.STRING,
        unit="text",
        nullable=True,
        meaning="Registrable domain. Null where there is none: an IP address or a public suffix itself.",
    ),
    ColumnSpec(
        name="suffix",
        type=ColumnType.STRING,
        unit="text",
        nullable=True,
        meaning="Public suffix. Null for an IP address.",
    ),
)

DEGREE_COLUMNS = (
    ColumnSpec(
        name="in_degree",
        type=ColumnType.LONG,
        unit="hosts",
        meaning="Hosts that link here, each counted once, itself never.",
    ),
    ColumnSpec(
        name="out_degree",
        type=ColumnType.LONG,
        unit="hosts",
        meaning="Hosts linked from here, each counted once, itself never.",
    ),
)

SCORE_COLUMNS = (
    ColumnSpec(
        name="pagerank",
        type=ColumnType.DOUBLE,
        unit="share of the whole",
        meaning="PageRank as a share: over all hosts it sums to 1.",
    ),
    ColumnSpec(
        name="scaled_pagerank",
        type=ColumnType.DOUBLE,
        unit="scaled PageRank",
        meaning="PageRank in units of what a host without in-links gets (which is 1).",
    ),
    ColumnSpec(
        name="trust",
        type=ColumnType.DOUBLE,
        unit="scaled PageRank",
        meaning="The part of scaled PageRank that the reviewed good core accounts for, the core standing for "
        "the whole estimated good share; 0 where no path leads here from the core. "
        "It can exceed scaled_pagerank near the core.",
        caution="High trust is no endorsement of a host.",
    ),
    ColumnSpec(
        name="known_spam_mass",
        type=ColumnType.DOUBLE,
        unit="scaled PageRank",
        nullable=True,
        meaning="The part of scaled PageRank that comes from listed known spam: a lower bound of the mass "
        "from spam. Null without a list.",
        caution="A linked victim has it too.",
    ),
    ColumnSpec(
        name="absolute_mass",
        type=ColumnType.DOUBLE,
        unit="scaled PageRank",
        meaning="The part of scaled PageRank that the good core does not account for (scaled_pagerank less "
        "trust, at least known_spam_mass). Negative where the core accounts for more than all of it.",
        caution="Large hosts have much of it for their size alone: useless as a list by itself.",
    ),
    ColumnSpec(
        name="relative_mass",
        type=ColumnType.DOUBLE,
        unit="share of the host's own PageRank",
        meaning="absolute_mass divided by scaled_pagerank: 1 where nothing comes from the core, "
        "0 or less where the core accounts for all of it.",
        caution=f"{LEAD} {UNKNOWN}",
    ),
    ColumnSpec(
        name="relative_mass_low",
        type=ColumnType.DOUBLE,
        unit="share of the host's own PageRank",
        nullable=True,
        meaning="Least relative mass over the whole core and every core without one of its slices. "
        "Null with fewer than two slices.",
        caution="Far from relative_mass_high, one slice of the core carries the score.",
    ),
    ColumnSpec(
        name="relative_mass_high",
        type=ColumnType.DOUBLE,
        unit="share of the host's own PageRank",
        nullable=True,
        meaning="Greatest relative mass over the whole core and every core without one of its slices. "
        "Null with fewer than two slices.",
        caution="Far from relative_mass_low, one slice of the core carries the score.",
    ),
    ColumnSpec(
        name="is_core",
        type=ColumnType.BOOLEAN,
        unit="yes or no",
        meaning="Whether the host is a member of the good core that was found in the graph.",
        caution="Core members are vetted by people and can go bad.",
    ),
    ColumnSpec(
        name="core_reached",
        type=ColumnType.BOOLEAN,
        unit="yes or no",
        meaning="Whether any path of links leads from the core to the host. Where not, trust is 0 "
        "and the core says nothing about the host.",
        caution=UNKNOWN,
    ),
    ColumnSpec(
        name="core_distance",
        type=ColumnType.INT,
        unit="links",
        nullable=True,
        meaning="Links on the shortest path from the nearest core member, which has 0 itself. "
        "Null where no path leads here from the core.",
        caution="Near is no endorsement, far is no evidence.",
    ),
)
