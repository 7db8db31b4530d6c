"""The published tables. Meanings are written for the person who reviews hosts, not for the program."""

from sparkrank.tables.spec import ColumnSpec, ColumnType, TableSpec, table_markdown

_LEAD = "A score is a lead, not a verdict: look at the host before you judge it."
_UNKNOWN = (
    "Unknown is not spam: honest hosts that the core does not reach look the same, "
    "whole communities of them too."
)

_HOST = ColumnSpec(
    name="host",
    type=ColumnType.STRING,
    unit="text",
    meaning="Host in canonical form (lower case, internationalised names in their ASCII form); "
    "in a domain graph its registrable domain.",
)

_NAME_COLUMNS = (
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

_DEGREE_COLUMNS = (
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

_SCORE_COLUMNS = (
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
        caution=f"{_LEAD} {_UNKNOWN}",
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
        caution=_UNKNOWN,
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

HOST_SCORES = TableSpec(
    name="host_scores",
    meaning="Every host of the graph with its scores, one row a host. " + _LEAD,
    key=("host",),
    order=("host",),
    columns=(_HOST, *_NAME_COLUMNS, *_DEGREE_COLUMNS, *_SCORE_COLUMNS),
)

SPAM_CANDIDATES = TableSpec(
    name="spam_candidates",
    meaning="Hosts to review, in order of priority: those that pass both thresholds, core members excluded. "
    + _LEAD,
    key=("host",),
    order=("rank",),
    columns=(
        ColumnSpec(
            name="rank",
            type=ColumnType.INT,
            unit="position",
            meaning="Position in the order of review, from 1; equal priorities go by host.",
            caution="Says what to look at first, not how sure the program is.",
        ),
        _HOST,
        ColumnSpec(
            name="priority",
            type=ColumnType.DOUBLE,
            unit="see README",
            meaning="What the order goes by, greatest first; the README says how it is made.",
            caution=_LEAD,
        ),
        *_NAME_COLUMNS,
        *_DEGREE_COLUMNS,
        *_SCORE_COLUMNS,
        ColumnSpec(
            name="cautions",
            type=ColumnType.STRINGS,
            unit="text",
            meaning="Reasons to doubt this row's scores, in words; empty where none is known.",
            caution="Read them before the scores.",
        ),
    ),
)

REJECTED_ROWS = TableSpec(
    name="rejected_rows",
    meaning="Input values that could not be used, with the reason and how many rows held them.",
    key=("source", "row_value", "reason"),
    order=("source", "row_value", "reason", "rows"),
    columns=(
        ColumnSpec(
            name="source",
            type=ColumnType.STRING,
            unit="text",
            meaning="Input and column of the value, such as edges.src or core.host.",
        ),
        ColumnSpec(
            name="row_value",
            type=ColumnType.STRING,
            unit="text",
            nullable=True,
            meaning="The value, cut at 200 characters, control characters escaped. "
            "Null where the value was null.",
            caution="Foreign text: do not open it as a link or a formula.",
        ),
        ColumnSpec(
            name="reason",
            type=ColumnType.STRING,
            unit="text",
            meaning="Code of the reason; the README explains each.",
        ),
        ColumnSpec(
            name="rows",
            type=ColumnType.LONG,
            unit="rows",
            meaning="Rows that were rejected for this value and reason.",
        ),
    ),
)

TABLES: dict[str, TableSpec] = {table.name: table for table in (HOST_SCORES, SPAM_CANDIDATES, REJECTED_ROWS)}
"""All tables by name, in the order of the reference."""


def table_named(name: str) -> TableSpec:
    """The table of that name; KeyError that lists the known names if there is none."""
    if name not in TABLES:
        raise KeyError(f"expected one of the tables {', '.join(TABLES)}, found {name}")
    return TABLES[name]


def reference_markdown() -> str:
    """The reference of all tables, for the documentation."""
    return "\n".join(table_markdown(table) for table in TABLES.values())
