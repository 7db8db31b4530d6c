"""Columns of a batch of edge rows as arrays."""

from __future__ import annotations

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

# A token of rel between white space or commas, after ASCII lower-casing.
_NOT_FOLLOWED = r"(?:^|[\t\n\v\f\r ,])(?:nofollow|ugc|sponsored)(?:$|[\t\n\v\f\r ,])"


def encoded(column: pa.Array) -> tuple[pa.Array, NDArray[np.int32]]:
    """Values of a text column and each row's index into them; null rows are len(values)."""
    if not isinstance(column, pa.DictionaryArray):
        column = column.dictionary_encode()
    values, index = column.dictionary, column.indices.cast(pa.int32()).fill_null(len(column.dictionary))
    rows = index.to_numpy()
    used = np.zeros(len(values) + 1, np.bool_)
    used[rows] = True
    chosen = np.flatnonzero(used[:-1])
    if 2 * len(chosen) < len(values):
        # The dictionary of a long column chunk: only what these rows use is worth deciding.
        new_index = np.full(len(values) + 1, len(chosen), np.int32)
        new_index[chosen] = np.arange(len(chosen), dtype=np.int32)
        return values.take(pa.array(chosen)), new_index[rows]
    return values, rows


def link_counts(batch: pa.RecordBatch) -> NDArray[np.int64] | None:
    """Links of each row, 0 for null; None where the table does not count links."""
    if "links" not in batch.schema.names:
        return None
    links: NDArray[np.int64] = batch.column("links").cast(pa.int64()).fill_null(0).to_numpy()
    return links


def not_followed(batch: pa.RecordBatch) -> NDArray[np.bool_] | None:
    """Rows whose rel says so, in any case of ASCII letters; None without such a column."""
    if "rel" not in batch.schema.names:
        return None
    values, index = encoded(batch.column("rel"))
    text = pc.ascii_lower(values.cast(pa.string()))
    says_so = pc.match_substring_regex(text, _NOT_FOLLOWED).fill_null(False).to_numpy(zero_copy_only=False)
    rows: NDArray[np.bool_] = np.append(says_so, False)[index]
    return rows
