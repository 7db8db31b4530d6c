"""The input cut into pieces of work, one scan task each: a function of the files alone."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.errors import InputRefused
from sparkrank.inputs import InputFacts
from sparkrank.places import Place
from sparkrank.shown import one_line, shown_value

# A piece of two million rows is a second of work …
_LEAST_ROWS = 1 << 21
# … and larger ones meet fewer hosts a row that they have not met before, as long as there are enough pieces
# for some cores.
_FEW_PIECES = 8
_FEW_ROWS = 1 << 23
# Beyond that pieces grow with the table so that no tile is put together from more than some hundreds …
_MOST_PIECES = 512
# … until their rows would fill a worker's memory: 32 M are 0.3 GB of numbers, and 2 GB of distinct names.
_MOST_ROWS = 1 << 25
# A piece may be this much larger than wanted if that spares one of a few rows.
_OVERFULL = 1.25
# Rows decoded at once: their text stays near the processor.
_BATCH_ROWS = 1 << 17


@dataclass(frozen=True, kw_only=True)
class RowRange:
    """Row groups of one file: those whose first row is in [first, end)."""

    place: Place
    first: int
    end: int


@dataclass(frozen=True, kw_only=True)
class Piece:
    """What one scan task reads: ``columns`` of some row groups of the input ``source`` (its setting)."""

    source: str
    ranges: tuple[RowRange, ...]
    columns: tuple[str, ...]
    dictionaries: tuple[str, ...]
    """Columns of few distinct values, which are read as Arrow dictionaries."""
    rows: int

    def batches(self) -> Iterator[pa.RecordBatch]:
        """The piece's rows; InputRefused for a damaged file."""
        for part in self.ranges:
            try:
                yield from self._batches(part)
            except (OSError, pa.ArrowException) as error:
                # The check before Java reads footers only; pages can be damaged behind a good one.
                raise InputRefused(
                    f"{self.source}: expected files that can be read to their end, found damage in "
                    f"{shown_value(str(part.place))} ({one_line(error)}); write that file again"
                ) from error

    def _batches(self, part: RowRange) -> Iterator[pa.RecordBatch]:
        with part.place.filesystem.open_input_file(part.place.path) as source:
            file = pq.ParquetFile(source, read_dictionary=list(self.dictionaries))
            groups = _groups_from(file.metadata, part.first, part.end)
            if groups:
                yield from file.iter_batches(
                    batch_size=_BATCH_ROWS,
                    row_groups=groups,
                    columns=list(self.columns),
                    use_threads=False,
                )


def plan_pieces(
    facts: InputFacts, columns: tuple[str, ...], dictionaries: tuple[str, ...] = ()
) -> list[Piece]:
    """Pieces that together read every row of the input once."""
    rows = max(_LEAST_ROWS, min(_FEW_ROWS, facts.rows // _FEW_PIECES), facts.rows // _MOST_PIECES)
    rows = min(_MOST_ROWS, rows)
    pieces: list[Piece] = []
    ranges: list[RowRange] = []
    held = 0

    def close() -> None:
        nonlocal held
        if ranges:
            piece = Piece(
                source=facts.source,
                ranges=tuple(ranges),
                columns=columns,
                dictionaries=dictionaries,
                rows=held,
            )
            pieces.append(piece)
        ranges.clear()
        held = 0

    for file in facts.files:
        place = facts.place if facts.place.size() is not None else facts.place.below(file.name)
        # Equal parts of about the rows wanted: no small rest of a file is a piece of its own.
        parts = max(1, round(file.rows / rows))
        cuts = [file.rows * part // parts for part in range(parts + 1)]
        for first, end in pairwise(cuts):
            if held + end - first > rows * _OVERFULL:
                close()
            ranges.append(RowRange(place=place, first=first, end=end))
            held += end - first
    close()
    return pieces


def _groups_from(metadata: Any, first: int, end: int) -> list[int]:
    groups, row = [], 0
    for group in range(metadata.num_row_groups):
        if first <= row < end:
            groups.append(group)
        row += metadata.row_group(group).num_rows
    return groups
