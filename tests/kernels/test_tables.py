"""Table declarations: columns as agreed, both schemas and the reference made from the one declaration."""

import pyarrow as pa
import pytest

from sparkrank.tables import (
    HOST_SCORES,
    SPAM_CANDIDATES,
    TABLES,
    ColumnSpec,
    ColumnType,
    TableSpec,
    arrow_schema,
    reference_markdown,
    spark_schema,
    table_named,
)

# The agreement with readers of the tables, column by column: name, type, null possible.
SCORES = [
    ("domain", "string", True),
    ("suffix", "string", True),
    ("in_degree", "long", False),
    ("out_degree", "long", False),
    ("pagerank", "double", False),
    ("scaled_pagerank", "double", False),
    ("trust", "double", False),
    ("known_spam_mass", "double", True),
    ("absolute_mass", "double", False),
    ("relative_mass", "double", False),
    ("relative_mass_low", "double", True),
    ("relative_mass_high", "double", True),
    ("is_core", "boolean", False),
    ("core_reached", "boolean", False),
    ("core_distance", "int", True),
]
MEASURED = [
    ("bound_share", "double", False),
    ("bound_amount", "double", False),
    ("bound_sources", "double", False),
    ("independent_breadth", "double", False),
    ("source_variety", "double", False),
    ("alike_sources", "double", False),
    ("exclusive_share", "double", False),
    ("returned_share", "double", False),
    ("circling_share", "double", False),
    ("domain_concentration", "double", False),
    ("suffix_concentration", "double", False),
    ("own_domain_share", "double", False),
    ("handed_on_share", "double", False),
    ("unsupported_share", "double", False),
    ("mutual_target_share", "double", False),
    ("close_share", "double", False),
    ("open_page_share", "double", False),
    ("independent_share", "double", False),
    ("outside_feed", "double", False),
    ("close_sources", "long", False),
    ("optimal_boosters", "double", True),
    ("share_within_1", "double", False),
    ("share_within_2", "double", False),
    ("share_within_3", "double", False),
    ("long_path_share", "double", False),
    ("supporters_at_1", "long", False),
    ("supporters_at_2", "long", False),
    ("supporters_at_3", "long", False),
    ("supporter_growth", "double", False),
    ("largest_core_member_trust_share", "double", True),
    ("direct_unexplained_share", "double", False),
    ("origin_unexplained_share", "double", False),
    ("origin_error_share", "double", False),
]
AGREED = {
    "host_scores": [("host", "string", False), *SCORES],
    "spam_candidates": [
        ("rank", "int", False),
        ("host", "string", False),
        ("priority", "double", False),
        *SCORES,
        *MEASURED,
        ("farm_group", "string", True),
        ("reasons", "array<string>", False),
        ("cautions", "array<string>", False),
        ("attributes", "string", True),
    ],
    "candidate_support": [
        ("host", "string", False),
        ("kind", "string", False),
        ("position", "int", False),
        ("source", "string", False),
        ("contribution", "double", False),
        ("share", "double", False),
        ("unexplained_share", "double", False),
        ("distance", "int", False),
        ("looks_like", "string", True),
        ("link_returned", "boolean", True),
        ("same_domain", "boolean", False),
        ("source_is_candidate", "boolean", False),
        ("source_scaled_pagerank", "double", False),
        ("source_trust", "double", False),
        ("source_absolute_mass", "double", False),
        ("source_relative_mass", "double", False),
        ("source_in_degree", "long", False),
        ("source_out_degree", "long", False),
        ("source_is_core", "boolean", False),
        ("source_core_distance", "int", True),
        ("source_attributes", "string", True),
    ],
    "farm_groups": [
        ("group", "string", False),
        ("host", "string", False),
        ("role", "string", False),
        ("shape", "string", False),
        ("hosts", "long", False),
        ("targets", "long", False),
        ("boosters", "long", False),
        ("domains", "long", False),
        ("largest_domain_share", "double", False),
        ("total_mass", "double", False),
        ("explained_share", "double", False),
    ],
    "rejected_rows": [
        ("source", "string", False),
        ("row_value", "string", True),
        ("reason", "string", False),
        ("rows", "long", False),
    ],
}
AGREED["explained_hosts"] = [("rank", "int", True), *AGREED["spam_candidates"][1:]]
AGREED["explained_support"] = AGREED["candidate_support"]
ORDERS = {
    "explained_hosts": ("host",),
    "explained_support": ("host", "kind", "position"),
    "host_scores": ("host",),
    "spam_candidates": ("rank",),
    "candidate_support": ("host", "kind", "position"),
    "farm_groups": ("group", "host"),
    "rejected_rows": ("source", "row_value", "reason", "rows"),
}


def test_columns_are_as_agreed() -> None:
    found = {
        table.name: [(c.name, c.type.value, c.nullable) for c in table.columns] for table in TABLES.values()
    }
    assert found == AGREED
    assert {table.name: table.order for table in TABLES.values()} == ORDERS


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_both_schemas_say_the_same(table: TableSpec) -> None:
    arrow, spark = arrow_schema(table), spark_schema(table)
    assert tuple(arrow.names) == tuple(spark.names) == table.column_names
    # pyspark's own mapping to Arrow is the oracle for types.
    from pyspark.sql.pandas.types import to_arrow_schema

    mapped = to_arrow_schema(spark)
    for declared, field, spark_field, oracle in zip(table.columns, arrow, spark.fields, mapped, strict=True):
        assert field.type == oracle.type
        assert field.nullable == oracle.nullable == spark_field.nullable == declared.nullable
        assert field.metadata[b"description"].decode() == declared.description
        assert field.metadata[b"unit"].decode() == declared.unit
        assert spark_field.metadata == {"comment": declared.description, "unit": declared.unit}


@pytest.mark.parametrize("table", TABLES.values(), ids=list(TABLES))
def test_every_column_is_explained(table: TableSpec) -> None:
    assert table.meaning.endswith(".")
    for column in table.columns:
        assert column.unit
        assert column.description.endswith(".")
        if column.nullable:
            assert "Null" in column.meaning, "a reader must learn what null stands for"


def test_cautions_stand_where_a_person_meets_a_score() -> None:
    for table in (HOST_SCORES, SPAM_CANDIDATES):
        assert "A score is a lead, not a verdict" in table.meaning
        assert "A score is a lead, not a verdict" in table.column("relative_mass").description
        for name in ("relative_mass", "core_reached"):
            assert "Unknown is not spam" in table.column(name).description
    for word in ("spammer", "controlled"):
        assert word not in reference_markdown()


def test_reference_has_every_column() -> None:
    lines = reference_markdown().splitlines()
    for table in TABLES.values():
        assert lines.count(f"### `{table.name}`") == 1
    rows = [line for line in lines if line.startswith("| `")]
    assert len(rows) == sum(len(columns) for columns in AGREED.values())
    assert all(row.replace("\\|", "").count("|") == 6 for row in rows)


def test_tables_by_name() -> None:
    assert table_named("host_scores") is HOST_SCORES
    with pytest.raises(
        KeyError,
        match="expected one of the tables host_scores, spam_candidates, candidate_support, farm_groups",
    ):
        table_named("scores")
    with pytest.raises(KeyError, match="table host_scores has no column rank"):
        HOST_SCORES.column("rank")


def test_declarations_check_themselves() -> None:
    column = ColumnSpec(name="a", type=ColumnType.STRING, unit="text", meaning="A.")
    with pytest.raises(ValueError, match="expected distinct column names"):
        TableSpec(name="t", meaning="T.", key=("a",), order=("a",), columns=(column, column))
    for key, order in [(("b",), ("a",)), (("a",), ("b",)), ((), ("a",)), (("a",), ())]:
        with pytest.raises(ValueError, match="expected key and order of its columns"):
            TableSpec(name="t", meaning="T.", key=key, order=order, columns=(column,))


def test_declarations_need_no_session() -> None:
    assert isinstance(arrow_schema(HOST_SCORES), pa.Schema)
