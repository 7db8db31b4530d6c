"""Every published table, declared once: columns, types, units, key, order and meaning.

`spec` says what a declaration is and makes Spark and Arrow schemas and the reference from it; `scores` and
`evidence` hold the tables themselves, `columns` what they share, `declared` all of them by name.
"""

from sparkrank.tables.declared import TABLES, reference_markdown, table_named
from sparkrank.tables.evidence import (
    CANDIDATE_SUPPORT,
    EXPLAINED_HOSTS,
    EXPLAINED_SUPPORT,
    SPAM_CANDIDATES,
)
from sparkrank.tables.groups import FARM_GROUPS
from sparkrank.tables.scores import HOST_SCORES, REJECTED_ROWS
from sparkrank.tables.spec import ColumnSpec, ColumnType, TableSpec, arrow_schema, spark_schema

__all__ = [
    "CANDIDATE_SUPPORT",
    "EXPLAINED_HOSTS",
    "EXPLAINED_SUPPORT",
    "FARM_GROUPS",
    "HOST_SCORES",
    "REJECTED_ROWS",
    "SPAM_CANDIDATES",
    "TABLES",
    "ColumnSpec",
    "ColumnType",
    "TableSpec",
    "arrow_schema",
    "reference_markdown",
    "spark_schema",
    "table_named",
]
