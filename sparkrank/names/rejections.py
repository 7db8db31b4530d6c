"""Input values that could not be used, counted for `rejected_rows`."""

import dataclasses
from collections import Counter
from collections.abc import Iterable

from sparkrank.shown import shown_value


@dataclasses.dataclass(frozen=True, kw_only=True)
class Rejection:
    """A row of `rejected_rows`: where the value stood, how it is shown, the reason's code, how many rows."""

    source: str
    row_value: str | None
    reason: str
    rows: int


def count_rejections(source: str, found: Iterable[tuple[str | None, str]]) -> tuple[Rejection, ...]:
    """The rejections of one source from (value, reason code) pairs, one a row, in the order of the table.

    Values that are shown alike count together, since a reader could not tell them apart.
    """
    counted = Counter((None if value is None else shown_value(value), reason) for value, reason in found)
    return tuple(
        Rejection(source=source, row_value=value, reason=reason, rows=rows)
        for (value, reason), rows in sorted(
            counted.items(), key=lambda item: (item[0][0] is not None, item[0][0] or "", item[0][1])
        )
    )
