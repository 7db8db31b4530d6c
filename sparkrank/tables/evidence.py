"""What reviewers read: candidates in their order, and what their scores are made of."""

import dataclasses

from sparkrank.tables.columns import DEGREE_COLUMNS, HOST, LEAD, NAME_COLUMNS, SCORE_COLUMNS
from sparkrank.tables.groups import FARM_GROUP
from sparkrank.tables.measures import SUPPORT_MEASURES
from sparkrank.tables.spec import ColumnSpec, ColumnType, TableSpec

_ATTRIBUTES = ColumnSpec(
    name="attributes",
    type=ColumnType.STRING,
    unit="JSON",
    nullable=True,
    meaning="What the hosts input says of the host beside its name: one JSON object, keys in order; a list "
    "where rows differ. Null where it says nothing. Texts are cut at 200 characters, control characters "
    "escaped.",
    caution="No score knows of it. Foreign text: do not open it as a link or a formula.",
)

SPAM_CANDIDATES = TableSpec(
    name="spam_candidates",
    meaning="Hosts to review, in order of priority: those that pass both thresholds, core members excluded. "
    + LEAD,
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
        HOST,
        ColumnSpec(
            name="priority",
            type=ColumnType.DOUBLE,
            unit="see README",
            meaning="What the order goes by, greatest first; the README says how it is made.",
            caution=LEAD,
        ),
        *NAME_COLUMNS,
        *DEGREE_COLUMNS,
        *SCORE_COLUMNS,
        *SUPPORT_MEASURES,
        FARM_GROUP,
        ColumnSpec(
            name="reasons",
            type=ColumnType.STRINGS,
            unit="text",
            meaning="Up to three facts of its links that put the row where it is, in words.",
            caution="What links look like; they do not say whose they are.",
        ),
        ColumnSpec(
            name="cautions",
            type=ColumnType.STRINGS,
            unit="text",
            meaning="Reasons to doubt this row's scores, in words; empty where none is known.",
            caution="Read them before the scores.",
        ),
        _ATTRIBUTES,
    ),
)

SOURCE_COLUMNS = (
    "scaled_pagerank",
    "trust",
    "absolute_mass",
    "relative_mass",
    "in_degree",
    "out_degree",
    "is_core",
    "core_distance",
)
"""Scores of a source that its row repeats."""


def _of_source(name: str) -> ColumnSpec:
    """A score of the source, as ``host_scores`` has it."""
    declared = {column.name: column for column in (*DEGREE_COLUMNS, *SCORE_COLUMNS)}[name]
    null = " Null where no path leads to the source from the core." if declared.nullable else ""
    return dataclasses.replace(
        declared, name=f"source_{name}", meaning=f"The source's own {name}, as in `host_scores`.{null}"
    )


CANDIDATE_SUPPORT = TableSpec(
    name="candidate_support",
    meaning="Where each candidate's PageRank comes from, in two views: by the hosts that link to it "
    "(direct), and by the hosts whose own start reaches it over paths of any length (origin). Both views "
    "divide the same score: never add the two. The sources that carry 95% are listed, the largest first, "
    "up to evidence.listed_sources. " + LEAD,
    key=("host", "kind", "source"),
    order=("host", "kind", "position"),
    columns=(
        HOST,
        ColumnSpec(
            name="kind",
            type=ColumnType.STRING,
            unit="text",
            meaning="direct: what the source's link passes on of its score. origin: what the source's "
            "own start, which is 1, gives over all paths; the candidate itself is one of its origins.",
            caution="Never add rows of both kinds.",
        ),
        ColumnSpec(
            name="position",
            type=ColumnType.INT,
            unit="position",
            meaning="Position among the candidate's sources of this kind, from 1, by falling contribution.",
        ),
        ColumnSpec(
            name="source",
            type=ColumnType.STRING,
            unit="text",
            meaning="The host that gives, in canonical form.",
            caution="Being listed says nothing of a host: most know nothing of where their rank goes.",
        ),
        ColumnSpec(
            name="contribution",
            type=ColumnType.DOUBLE,
            unit="scaled PageRank",
            meaning="What the source gives. All direct contributions and 1, the candidate's own start, "
            "add up to its scaled PageRank; so do all origins.",
        ),
        ColumnSpec(
            name="share",
            type=ColumnType.DOUBLE,
            unit="share of the host's own PageRank",
            meaning="contribution divided by the candidate's scaled PageRank.",
        ),
        ColumnSpec(
            name="unexplained_share",
            type=ColumnType.DOUBLE,
            unit="share of the host's own PageRank",
            meaning="The share that the listed sources of this kind leave: direct, of what in-links carry; "
            "origin, of everything. The same in each row of a candidate and kind.",
        ),
        ColumnSpec(
            name="distance",
            type=ColumnType.INT,
            unit="links",
            meaning="Links on the shortest path followed from the source to the candidate; 0 is itself.",
        ),
        ColumnSpec(
            name="looks_like",
            type=ColumnType.STRING,
            unit="text",
            nullable=True,
            meaning="What a direct source looks like by its links: close, open_page or independent, as the "
            "README explains. Null for the kind origin.",
            caution="A look, from links alone: it names no owner and no intent.",
        ),
        ColumnSpec(
            name="link_returned",
            type=ColumnType.BOOLEAN,
            unit="yes or no",
            nullable=True,
            meaning="Whether the candidate links back to the source. Null for the kind origin.",
        ),
        ColumnSpec(
            name="same_domain",
            type=ColumnType.BOOLEAN,
            unit="yes or no",
            meaning="Whether the source has the candidate's registrable domain.",
        ),
        ColumnSpec(
            name="source_is_candidate",
            type=ColumnType.BOOLEAN,
            unit="yes or no",
            meaning="Whether the source is looked at in its own right, too.",
            caution=LEAD,
        ),
        *(_of_source(name) for name in SOURCE_COLUMNS),
        dataclasses.replace(_ATTRIBUTES, name="source_attributes"),
    ),
)

_QUESTION = (
    "Hosts that somebody asked about last, listed or not, with the evidence that candidates have. For a host "
    "that is not listed, others count as candidates only if they were asked for with it. "
)

EXPLAINED_HOSTS = TableSpec(
    name="explained_hosts",
    meaning=_QUESTION + LEAD,
    key=("host",),
    order=("host",),
    columns=(
        *(
            dataclasses.replace(
                column,
                nullable=True,
                meaning=f"{column.meaning} Null for a host that is no candidate.",
            )
            if column.name == "rank"
            else column
            for column in SPAM_CANDIDATES.columns
        ),
    ),
)

EXPLAINED_SUPPORT = dataclasses.replace(
    CANDIDATE_SUPPORT,
    name="explained_support",
    meaning=f"What `candidate_support` has, of the hosts in `explained_hosts`. {LEAD}",
)
