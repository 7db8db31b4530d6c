"""What a run says of every host, and of the input that it could not use."""

from sparkrank.tables.columns import DEGREE_COLUMNS, HOST, LEAD, NAME_COLUMNS, SCORE_COLUMNS
from sparkrank.tables.spec import ColumnSpec, ColumnType, TableSpec

HOST_SCORES = TableSpec(
    name="host_scores",
    meaning="Every host of the graph with its scores, one row a host. " + LEAD,
    key=("host",),
    order=("host",),
    columns=(HOST, *NAME_COLUMNS, *DEGREE_COLUMNS, *SCORE_COLUMNS),
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
