"""Columns of the hosts input as JSON: how a stranger's values become text that is safe to hand on."""

from __future__ import annotations

import json
from itertools import pairwise

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from sparkrank.shown import SHOWN_CHARACTERS, shown_value

MAX_VALUES = 8
"""Values of one column listed for one host: rows that differ so much say that the column is no attribute."""

ATTRIBUTES_SCHEMA = pa.schema(
    [pa.field("host", pa.string(), nullable=False), pa.field("attributes", pa.string(), nullable=False)]
)

# A character has at most four bytes.
_TEXT_BYTES = 4 * SHOWN_CHARACTERS
# Rows put together at once: at most some 50 MB of text.
_ROWS_A_PASS = 1 << 16


def as_octets(values: pa.Array) -> pa.Array:
    """Text, however it is stored, as large binary; it need not be UTF-8."""
    if isinstance(values, pa.DictionaryArray):
        return as_octets(values.dictionary).take(values.indices)
    if pa.types.is_string_view(values.type):
        values = values.cast(pa.string())
    return values.cast(pa.large_binary())


def json_values(values: pa.Array) -> tuple[pa.Array, pa.Array]:
    """Each value as a JSON scalar (large_string), and numbers again as doubles, for their order.

    Both are null where there is no value; JSON knows no number that is not finite.  Text is shown as
    everywhere (cut, control characters escaped); a date or time is text in ISO form, times in UTC.
    """
    if isinstance(values, pa.DictionaryArray):
        values = values.dictionary.take(values.indices)
    kind, no_order = values.type, pa.nulls(len(values), pa.float64())
    types = pa.types
    if types.is_null(kind):
        return pa.nulls(len(values), pa.large_string()), no_order
    if types.is_string(kind) or types.is_large_string(kind) or types.is_string_view(kind):
        return _json_texts(as_octets(values)), no_order
    if types.is_boolean(kind):
        return values.cast(pa.large_string()), no_order
    if types.is_date(kind):
        return _quoted(values.cast(pa.date32())), no_order
    if types.is_timestamp(kind):
        in_utc = values.cast(pa.timestamp("us"), safe=False)
        return _quoted(in_utc, "" if kind.tz is None else "Z"), no_order
    if types.is_floating(kind):
        values = pc.if_else(pc.is_finite(values), values, pa.scalar(None, kind))
    return values.cast(pa.large_string()), values.cast(pa.float64(), safe=False)


def _quoted(values: pa.Array, suffix: str = "") -> pa.Array:
    text = values.cast(pa.large_string())
    mark = pa.scalar('"', pa.large_string())
    parts = [mark, text, pa.scalar(f'{suffix}"', pa.large_string())]
    return pc.binary_join_element_wise(*parts, pa.scalar("", pa.large_string()))


def _json_texts(octets: pa.Array) -> pa.Array:
    """Decided once a distinct value."""
    encoded = pc.binary_slice(octets, 0, _TEXT_BYTES).dictionary_encode()
    texts = [str(value, "utf-8", "replace") for value in encoded.dictionary.to_pylist()]
    shown = pa.array([json.dumps(shown_value(text), ensure_ascii=False) for text in texts], pa.large_string())
    return shown.take(encoded.indices)


def one_object_a_host(rows: pa.Table, names: list[str]) -> pa.Table:
    """Rows (host, column, value, order) → one row (host, attributes) a host, hosts in order.

    ``column`` is a place in ``names``, ``value`` JSON, ``order`` the number if it is one; there is a row.
    An object's keys are in order; several different values of a column are a list in order.
    """
    ordered = sorted(names)
    place_of = np.array([ordered.index(name) for name in names])
    rows = rows.group_by(["host", "column", "value"], use_threads=False).aggregate([("order", "min")])
    rows = rows.append_column("place", pa.array(place_of[rows["column"].to_numpy()]))
    rows = rows.sort_by([(key, "ascending") for key in ("host", "place", "order_min", "value")])
    rows = rows.combine_chunks()
    hosts_at = _starts(rows["host"])
    # Cut where a host begins.
    passes = np.searchsorted(hosts_at, np.arange(0, rows.num_rows, _ROWS_A_PASS))
    cuts = np.unique(hosts_at[passes[passes < len(hosts_at)]]).tolist()
    bounds = pairwise([*cuts, rows.num_rows])
    return pa.concat_tables([_objects(rows.slice(low, high - low), ordered) for low, high in bounds])


def _starts(hosts: pa.ChunkedArray, place: NDArray[np.int64] | None = None) -> NDArray[np.int64]:
    """Where in sorted rows a host begins, or with places a column of a host: shape (≥ 1,)."""
    new = pc.not_equal(hosts.slice(1), hosts.slice(0, len(hosts) - 1)).to_numpy()
    if place is not None:
        new = new | (place[1:] != place[:-1])
    return np.append(0, np.flatnonzero(new) + 1)


def _objects(rows: pa.Table, names: list[str]) -> pa.Table:
    """``names`` are in order, and ``place`` counts in them."""
    place = rows["place"].to_numpy()
    starts = _starts(rows["host"], place)
    values, counts = _bounded(rows["value"].cast(pa.string()).combine_chunks(), starts)
    lists = _joined(values, np.minimum(counts, MAX_VALUES + 1))
    lists = pc.if_else(pa.array(counts > 1), _around("[", lists, "]"), lists)
    keys = pa.array([json.dumps(name, ensure_ascii=False) for name in names], pa.string())
    entries = pc.binary_join_element_wise(keys.take(pa.array(place[starts])), lists, ": ")
    hosts_at = _starts(rows["host"])
    entries_at = np.searchsorted(starts, hosts_at)
    objects = _around("{", _joined(entries, np.diff(entries_at, append=len(starts))), "}")
    hosts = rows["host"].take(pa.array(hosts_at)).cast(pa.string())
    return pa.table({"host": hosts, "attributes": objects}, schema=ATTRIBUTES_SCHEMA)


def _bounded(values: pa.Array, starts: NDArray[np.int64]) -> tuple[pa.Array, NDArray[np.int64]]:
    """The first values from each start on, where there are more a text that says so; and all their counts."""
    counts = np.diff(starts, append=len(values))
    at = np.arange(len(values)) - np.repeat(starts, counts)
    kept = np.flatnonzero(at <= MAX_VALUES)
    notes = [f'"and {count - MAX_VALUES} more"' for count in counts[counts > MAX_VALUES].tolist()]
    is_note = pa.array(at[kept] == MAX_VALUES)
    return pc.replace_with_mask(values.take(pa.array(kept)), is_note, pa.array(notes, pa.string())), counts


def _joined(values: pa.Array, counts: NDArray[np.int64]) -> pa.Array:
    """Texts of so many values each, joined by commas."""
    offsets = np.zeros(len(counts) + 1, np.int32)
    np.cumsum(counts, out=offsets[1:])
    whole = values.combine_chunks() if isinstance(values, pa.ChunkedArray) else values
    return pc.binary_join(pa.ListArray.from_arrays(pa.array(offsets), whole), ", ")


def _around(begin: str, texts: pa.Array, end: str) -> pa.Array:
    return pc.binary_join_element_wise(pa.scalar(begin), texts, pa.scalar(end), "")
