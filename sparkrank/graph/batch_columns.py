"""Columns of a batch of edge rows as arrays."""

from __future__ import annotations

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

# A token of rel between white space or commas, after ASCII lower-casing.
_NOT_FOLLOWED = r"(?:^|[\t\n\v\f\r ,])(?:nofollow|ugc|sponsored)(?:$|[\t\n\v\f\r ,])"


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
    column = batch.column("rel")
    if not isinstance(column, pa.DictionaryArray):
        column = column.dictionary_encode()
    text = pc.ascii_lower(column.dictionary.cast(pa.string()))
    says_so = pc.match_substring_regex(text, _NOT_FOLLOWED).fill_null(False).to_numpy(zero_copy_only=False)
    index = column.indices.cast(pa.int64()).fill_null(len(text)).to_numpy()
    rows: NDArray[np.bool_] = np.append(says_so, False)[index]
    return rows
