"""What a table declaration is, and the schemas and reference text made from one."""

from __future__ import annotations

import dataclasses
from enum import Enum
from typing import TYPE_CHECKING, Any

import pyarrow as pa

if TYPE_CHECKING:
    from pyspark.sql.types import DataType, StructType


class ColumnType(Enum):
    """The types a published column may have; the value is its name in the reference."""

    STRING = "string"
    LONG = "long"
    INT = "int"
    DOUBLE = "double"
    BOOLEAN = "boolean"
    STRINGS = "array<string>"


_ARROW: dict[ColumnType, Any] = {
    ColumnType.STRING: pa.string(),
    ColumnType.LONG: pa.int64(),
    ColumnType.INT: pa.int32(),
    ColumnType.DOUBLE: pa.float64(),
    ColumnType.BOOLEAN: pa.bool_(),
    ColumnType.STRINGS: pa.list_(pa.field("element", pa.string(), nullable=False)),
}


@dataclasses.dataclass(frozen=True, kw_only=True)
class ColumnSpec:
    """One column: what it holds, in which unit, and what a reader must not conclude from it.

    `unit` is a word such as "hosts" or "scaled PageRank" ("text" for strings, "yes or no" for booleans).
    `nullable` is about the values published; `meaning` then says what null stands for.
    """

    name: str
    type: ColumnType
    unit: str
    meaning: str
    nullable: bool = False
    caution: str | None = None

    @property
    def description(self) -> str:
        """Meaning and caution in one text, as it travels with the data."""
        return self.meaning if self.caution is None else f"{self.meaning} {self.caution}"


@dataclasses.dataclass(frozen=True, kw_only=True)
class TableSpec:
    """One table: a row is identified by `key` and rows are published in the order of `order`."""

    name: str
    meaning: str
    key: tuple[str, ...]
    order: tuple[str, ...]
    columns: tuple[ColumnSpec, ...]

    def __post_init__(self) -> None:
        names = self.column_names
        if len(set(names)) != len(names):
            raise ValueError(f"table {self.name}: expected distinct column names, found {names}")
        unknown = [name for name in (*self.key, *self.order) if name not in names]
        if unknown or not self.key or not self.order:
            raise ValueError(f"table {self.name}: expected key and order of its columns, found {unknown}")

    @property
    def column_names(self) -> tuple[str, ...]:
        """The names in schema order, for the `select` that ends a step."""
        return tuple(column.name for column in self.columns)

    def column(self, name: str) -> ColumnSpec:
        """The column of that name; KeyError with the table's name if there is none."""
        for column in self.columns:
            if column.name == name:
                return column
        raise KeyError(f"table {self.name} has no column {name}")


def arrow_schema(table: TableSpec) -> Any:
    """The `pyarrow.Schema`; each field's metadata carries b"description" and b"unit"."""
    return pa.schema(
        [
            pa.field(
                column.name,
                _ARROW[column.type],
                nullable=column.nullable,
                metadata={b"description": column.description.encode(), b"unit": column.unit.encode()},
            )
            for column in table.columns
        ],
        metadata={b"description": table.meaning.encode()},
    )


def spark_schema(table: TableSpec) -> StructType:
    """The Spark schema; a column's description is its `comment`, beside `unit`, in the field's metadata."""
    # Imported here: declarations are also read where there is no pyspark (input checks, kernels' tests).
    from pyspark.sql import types

    spark: dict[ColumnType, DataType] = {
        ColumnType.STRING: types.StringType(),
        ColumnType.LONG: types.LongType(),
        ColumnType.INT: types.IntegerType(),
        ColumnType.DOUBLE: types.DoubleType(),
        ColumnType.BOOLEAN: types.BooleanType(),
        ColumnType.STRINGS: types.ArrayType(types.StringType(), containsNull=False),
    }
    return types.StructType(
        [
            types.StructField(
                column.name,
                spark[column.type],
                column.nullable,
                {"comment": column.description, "unit": column.unit},
            )
            for column in table.columns
        ]
    )


def table_markdown(table: TableSpec) -> str:
    """The reference of one table as a Markdown section."""
    lines = [
        f"### `{table.name}`",
        "",
        table.meaning,
        "",
        f"Key: {_code_list(table.key)}. Order of rows: {_code_list(table.order)}.",
        "",
        "| column | type | unit | null | meaning |",
        "|---|---|---|---|---|",
    ]
    for column in table.columns:
        null = "possible" if column.nullable else "never"
        meaning = column.description.replace("|", "\\|")
        lines.append(f"| `{column.name}` | {column.type.value} | {column.unit} | {null} | {meaning} |")
    return "\n".join(lines) + "\n"


def _code_list(names: tuple[str, ...]) -> str:
    return ", ".join(f"`{name}`" for name in names)
