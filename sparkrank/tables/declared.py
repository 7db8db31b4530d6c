"""All published tables by name, and their reference."""

from sparkrank.tables.evidence import (
    CANDIDATE_SUPPORT,
    EXPLAINED_HOSTS,
    EXPLAINED_SUPPORT,
    SPAM_CANDIDATES,
)
from sparkrank.tables.groups import FARM_GROUPS
from sparkrank.tables.scores import HOST_SCORES, REJECTED_ROWS
from sparkrank.tables.spec import TableSpec, table_markdown

_ALL = (
    HOST_SCORES,
    SPAM_CANDIDATES,
    CANDIDATE_SUPPORT,
    FARM_GROUPS,
    REJECTED_ROWS,
    EXPLAINED_HOSTS,
    EXPLAINED_SUPPORT,
)

TABLES: dict[str, TableSpec] = {table.name: table for table in _ALL}
"""All tables by name, in the order of the reference."""


def table_named(name: str) -> TableSpec:
    """The table of that name; KeyError that lists the known names if there is none."""
    if name not in TABLES:
        raise KeyError(f"expected one of the tables {', '.join(TABLES)}, found {name}")
    return TABLES[name]


def reference_markdown() -> str:
    """The reference of all tables, for the documentation."""
    return "\n".join(table_markdown(table) for table in TABLES.values())
