"""Shows the first candidates of a finished run: `python local_sample/show.py --config FILE`.

Reads the manifest and the tables it names, nothing else: what a reader without Spark would do.
"""

import argparse
import json
import sys
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sparkrank.config import load_config
from sparkrank.errors import SparkrankError
from sparkrank.places import Place, resolve
from sparkrank.publish.attempts import manifest_place
from sparkrank.shown import shown_value

SHOWN_CANDIDATES = 10
WIDEST_HOST = 60


def read_table(output: Place, manifest: dict[str, Any], name: str) -> Any:
    """The rows of a table in their order, as a `pyarrow.Table`."""
    files = [output.below(file["path"]) for file in manifest["tables"][name]["files"]]
    return pa.concat_tables([pq.read_table(file.path, filesystem=file.filesystem) for file in files])


def candidate_lines(rows: list[dict[str, Any]], groups: dict[str, str]) -> list[str]:
    """The candidates as lines of a table, hosts cut and escaped; ``groups`` says what each group is."""
    lines = [("rank", "host", "scaled PageRank", "relative mass", "its range", "cautions", "in a group")]
    for row in rows:
        host = shown_value(row["host"])
        low, high = row["relative_mass_low"], row["relative_mass_high"]
        lines.append(
            (
                str(row["rank"]),
                host if len(host) <= WIDEST_HOST else host[: WIDEST_HOST - 1] + "…",
                f"{row['scaled_pagerank']:,.1f}",
                f"{row['relative_mass']:.3f}",
                "unknown" if low is None else f"{low:.3f} to {high:.3f}",
                str(len(row["cautions"])),
                groups.get(row["farm_group"], "none"),
            )
        )
    widths = [max(len(line[i]) for line in lines) for i in range(len(lines[0]))]
    # Text to the left, numbers to the right.
    aligned = [
        [cell.ljust(width) if i in (1, 6) else cell.rjust(width) for i, (cell, width) in enumerate(pairs)]
        for pairs in (list(zip(line, widths, strict=True)) for line in lines)
    ]
    return ["  ".join(cells).rstrip() for cells in aligned]


def main() -> int:
    """Print the first candidates and where the results are; the exit status."""
    parser = argparse.ArgumentParser(description="Show the first candidates of a finished run.")
    parser.add_argument("--config", required=True, metavar="FILE")
    parser.add_argument("--set", action="append", default=[], metavar="SECTION.KEY=VALUE")
    # Arguments of the job that came before mean nothing here.
    arguments, _ = parser.parse_known_args()
    try:
        config = load_config(arguments.config, arguments.set)
        output = resolve(config.run.output)
        place = manifest_place(output, config.run.id)
        manifest = json.loads(place.read_bytes())
    except (SparkrankError, OSError, ValueError) as error:
        print(f"sparkrank: {error}", file=sys.stderr)
        return 1
    candidates = read_table(output, manifest, "spam_candidates")
    rows = candidates.slice(0, SHOWN_CANDIDATES).to_pylist()
    members = read_table(output, manifest, "farm_groups").to_pylist()
    groups = {row["group"]: f"of {row['hosts']:,} hosts, {row['shape']}" for row in members}
    hosts = manifest["tables"]["host_scores"]["rows"]
    print(f"\nThe first {len(rows)} of {candidates.num_rows:,} candidates among {hosts:,} hosts:\n")
    print("\n".join(candidate_lines(rows, groups)))
    print("\nA score is a lead, not a verdict; unknown is not spam.")
    print("Read a row's cautions and look at the host before you judge it.\n")
    for name, table in manifest["tables"].items():
        folder = table["files"][0]["path"].rpartition("/")[0]
        print(f"{name + ':':<17}{table['rows']:>8,} rows in {output}/{folder}")
    print(f"{'manifest:':<26}{place}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
