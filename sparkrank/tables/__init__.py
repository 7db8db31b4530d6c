"""Every published table, declared once: columns, types, units, key, order and meaning.

`spec` says what a declaration is and makes Spark and Arrow schemas and the reference from it; `declared`
holds the tables themselves.
"""

from sparkrank.tables.declared import (
    HOST_SCORES,
    REJECTED_ROWS,
    SPAM_CANDIDATES,
    TABLES,
    reference_markdown,
    table_named,
)
from sparkrank.tables.spec import ColumnSpec, ColumnType, TableSpec, arrow_schema, spark_schema

__all__ = [
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
