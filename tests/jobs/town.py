"""A small invented web with every kind of row: what goes in, and what must be counted."""

from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as pq

BOOSTERS = 40
LONELY = 14
LONG_NAME = "a" * 10_000 + ".example"

Row = tuple[str | None, str | None, int | None, str | None]

# Six towns in a ring, the only hosts that iterate; each links to three pages that link nowhere, so that
# little flows around and few steps are needed.
TOWNS = [f"town-{i}.example" for i in range(6)]
GOOD: list[Row] = [
    *((TOWNS[i], TOWNS[(i + 1) % 6], 1, None) for i in range(6)),
    *((TOWNS[i], f"shop-{i}-{j}.example", 1, None) for i in range(6) for j in range(3)),
]
# A farm that an open guest book of a town feeds, and a place that no town links to.
FARM: list[Row] = [(f"booster-{i}.test", "target.test", 1, None) for i in range(BOOSTERS)]
GUEST_BOOK: list[Row] = [(TOWNS[1], "target.test", 1, "external")]
ISLAND: list[Row] = [(f"reader-{i}.example", "island.example", 1, None) for i in range(LONELY)]
# Accepted rows that add no edge: a spelling of a known pair, links that lend nothing, a self-link.
SAME: list[Row] = [("HTTP://Town-0.Example.:80/a", "//town-1.example", 3, None)]
NOT_FOLLOWED: list[Row] = [(TOWNS[0], "advert.test", 1, "external,NoFollow"), (TOWNS[2], TOWNS[5], 1, "UGC")]
SELF: list[Row] = [("alone.example", "alone.example", 1, None)]
# (row, source, reason, value as shown)
REJECTED: list[tuple[Row, str, str, str | None]] = [
    ((None, TOWNS[0], 1, None), "edges.src", "null", None),
    ((TOWNS[0], "", 1, None), "edges.dst", "empty", ""),
    (("town\x00.example", TOWNS[0], 1, None), "edges.src", "not_bare", "town\\x00.example"),
    ((TOWNS[0], "<b>bold</b>.example", 1, None), "edges.dst", "bad_character", "<b>bold</b>.example"),
    ((TOWNS[0], "http://\u202eelpmaxe/", 1, None), "edges.dst", "bad_idna", "http://\\u202eelpmaxe/"),
    ((LONG_NAME, TOWNS[0], 1, None), "edges.src", "too_long", "a" * 200),
    ((TOWNS[0], TOWNS[3], 0, None), "edges.links", "bad_links", "0"),
    ((TOWNS[0], TOWNS[3], None, "nofollow"), "edges.links", "bad_links", None),
]

ACCEPTED = GOOD + FARM + GUEST_BOOK + ISLAND + SAME + NOT_FOLLOWED + SELF
EDGES = GOOD + FARM + GUEST_BOOK + ISLAND
# advert.test and alone.example have no edge; their hosts count all the same.
HOSTS = 6 + 18 + (BOOSTERS + 1) + (LONELY + 1) + 2

CORE = (
    "host,slice,note\r\n"
    "town-0.example,north,\r\n"
    'HTTPS://TOWN-3.EXAMPLE/,south,"harbour, old"\r\n'
    "elsewhere.example,north,\r\n"
)
KNOWN_SPAM = "host\nbooster-0.test\nbooster-1.test\n"


def write_edges(path: Path, rows: list[Row]) -> Path:
    """An edge table with all four columns."""
    src, dst, links, rel = (list(column) for column in zip(*rows, strict=True))
    table = pa.table(
        {
            "src": pa.array(src, pa.string()),
            "dst": pa.array(dst, pa.string()),
            "links": pa.array(links, pa.int64()),
            "rel": pa.array(rel, pa.string()),
        }
    )
    path.parent.mkdir(parents=True, exist_ok=True)
    pq.write_table(table, path)
    return path


def write_town(folder: Path) -> None:
    """The inputs `edges.parquet`, `core.csv` and `known_spam.csv`."""
    write_edges(folder / "edges.parquet", ACCEPTED + [row for row, *_ in REJECTED])
    (folder / "core.csv").write_bytes(CORE.encode())
    (folder / "known_spam.csv").write_text(KNOWN_SPAM)
