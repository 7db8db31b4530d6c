"""Writes a scenario as the input files of a run."""

import csv
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq

from scenario.build import Scenario

CRAWL = "2026-11"


def write_inputs(scenario: Scenario, folder: Path) -> None:
    """Write the edges, partitioned, and `core.csv`, `known_spam.csv` and `truth.csv` below `folder`.

    Files of an earlier scenario with the same names are overwritten.
    """
    edges = scenario.edges
    part = edges["part"].to_numpy()
    columns = edges.drop_columns(["part"])
    for number in sorted(set(part.tolist())):
        target = folder / "edges" / f"crawl={CRAWL}" / f"part={number}"
        target.mkdir(parents=True, exist_ok=True)
        rows = columns.filter(pa.array(part == number))
        pq.write_table(rows, target / "links.parquet", compression="zstd", compression_level=15)
    write_csv(scenario.core, folder / "core.csv")
    write_csv(scenario.known_spam, folder / "known_spam.csv")
    write_csv(scenario.truth, folder / "truth.csv")


def write_csv(table: pa.Table, path: Path) -> None:
    """Write a table of strings as RFC 4180 has it, but with LF, in UTF-8."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(table.column_names)
        writer.writerows(zip(*(column.to_pylist() for column in table.columns), strict=True))
