"""What the values of an input name: plain ones decided many at a time, the odd ones in Python.

Edge tables hold billions of strings. A reader hands over the distinct values of a chunk; the kernel cuts
the hosts out of the plain ones, and `canonical_host` decides each odd one. Odd values such as addresses and
IDNA names come back chunk after chunk, so the last ones decided are remembered.

The plain way never disagrees with `canonical_host` where it answers.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray
from pyspark.sql import Column, DataFrame
from pyspark.sql import functions as sf
from pyspark.sql.types import StringType, StructField, StructType

from sparkrank.kernels.plain_hosts import find_plain_hosts
from sparkrank.names.canonical import MAX_NAME_CHARACTERS, CanonicalName, canonical_host
from sparkrank.names.octets import octets_of, string_array

# Names and short URLs; with a few hundred bytes a value and its answer, some 30 MB at most.
_REMEMBERED_VALUES = 1 << 16
_REMEMBERED_CHARACTERS = 300


@dataclass(frozen=True, kw_only=True)
class DecidedNames:
    """What n values name; exactly one of the two is null at each place."""

    hosts: pa.StringArray
    """Canonical hosts, null where a value names none."""
    reasons: pa.StringArray
    """Keys of REASONS, null where there is a host."""


def decide_names(values: pa.Array | pa.ChunkedArray) -> DecidedNames:
    """The canonical host of every value, or the reason why there is none, in the order of the values.

    `values` are of type string, large_string, binary or large_binary and may hold nulls (reason `null`);
    bytes that are not UTF-8 are read as U+FFFD. Values that occur twice are decided twice. The hosts of one
    call have at most 2 GiB. Raises TypeError for values of another type.
    """
    chunks = values.chunks if isinstance(values, pa.ChunkedArray) else [values]
    decided = [_decide(chunk) for chunk in chunks]
    if len(decided) == 1:
        return decided[0]
    none = pa.array([], pa.string())
    return DecidedNames(
        hosts=pa.concat_arrays([none, *(names.hosts for names in decided)]),
        reasons=pa.concat_arrays([none, *(names.reasons for names in decided)]),
    )


def _decide(values: pa.Array) -> DecidedNames:
    data, offsets = octets_of(values)
    found = find_plain_hosts(data, offsets)
    plain = found.lengths > 0
    if values.null_count:
        plain &= pc.is_valid(values).to_numpy(zero_copy_only=False)
    hosts = string_array(found.data, found.lengths, plain)
    reasons = pa.nulls(len(values), pa.string())
    if plain.all():
        return DecidedNames(hosts=hosts, reasons=reasons)
    names = list(_odd_names(values, data, offsets, np.flatnonzero(~plain)))
    odd = pa.array(~plain)
    return DecidedNames(
        hosts=pc.replace_with_mask(hosts, odd, pa.array([name.host for name in names], pa.string())),
        reasons=pc.replace_with_mask(reasons, odd, pa.array([name.reason for name in names], pa.string())),
    )


def _odd_names(
    values: pa.Array, data: NDArray[np.uint8], offsets: NDArray[np.int64], odd: NDArray[np.int64]
) -> Iterator[CanonicalName]:
    # A null may have bytes of its own, which mean nothing.
    valid = pc.is_valid(values.take(pa.array(odd))) if values.null_count else None
    for at, (begin, end) in enumerate(zip(offsets[odd].tolist(), offsets[odd + 1].tolist(), strict=True)):
        if valid is not None and not valid[at].as_py():
            yield canonical_host(None)
            continue
        text = data[begin:end].tobytes().decode("utf-8", "replace")
        yield _remembered(text) if len(text) < _REMEMBERED_CHARACTERS else canonical_host(text)


@lru_cache(maxsize=_REMEMBERED_VALUES)
def _remembered(value: str) -> CanonicalName:
    return canonical_host(value)


# Possessive quantifiers (`*+`) keep matching linear; bounded input keeps the matcher's recursion bounded.
# No flags: under (?i) with Unicode folding, the Kelvin sign would pass for a k.
_LABEL = r"(?![xX][nN]--)[A-Za-z0-9_-]{1,63}+"
# The last label does not start with a digit: whatever might be an IPv4 number is left to Python.
_LAST_LABEL = r"(?![xX][nN]--)[A-Za-z_-][A-Za-z0-9_-]{0,62}+"
_NAME = rf"((?:{_LABEL}\.(?=[A-Za-z0-9_-]))*+{_LAST_LABEL})\.?+"

# Ports of 60000 and more, or with leading zeros beyond four digits, are rare enough for Python.
_URL = (
    r"\A(?:(?:[hH][tT][tT][pP][sS]?+|[fF][tT][pP]|[wW][sS][sS]?+):)?+//"
    rf"{_NAME}(?::(?:[1-5][0-9]{{4}}|[0-9]{{0,4}}))?+(?:[/?#\\]|\z)"
)
# A path of printable ASCII without space, `#` and `?`; a value with `//` never gets here.
_BARE = rf"\A{_NAME}(?::(?:[1-5][0-9]{{4}}|[0-9]{{1,4}}))?+(?:/[!\"$->@-~]*+)?+\z"


def plain_host(column: Column) -> Column:
    """The canonical host of a plain value; null for null and for every value Python has to look at.

    Plain are names of letters, digits, `-`, `_` and dots without `xn--` labels and without a digit at the
    start of the last label, as bare hosts with an optional port and path or in http, https, ftp, ws and wss
    URLs without user info. At most the first 253 characters of a value are matched.
    """
    # Longer values end in a space, which nothing matches: a name that reaches the cut is left to Python,
    # so that a name cannot pass for a shorter one, and no name is over the limit.
    head = sf.when(sf.octet_length(column) <= MAX_NAME_CHARACTERS, column).otherwise(
        sf.concat(sf.substring(column, 1, MAX_NAME_CHARACTERS), sf.lit(" "))
    )
    found = sf.when(sf.contains(column, sf.lit("//")), sf.regexp_extract(head, _URL, 1)).otherwise(
        sf.regexp_extract(head, _BARE, 1)
    )
    # Only ASCII was matched, so lower-casing cannot bring in a character from elsewhere.
    return sf.lower(sf.nullif(found, sf.lit("")))


_NAME_TYPE = StructType([StructField("host", StringType()), StructField("reason", StringType())])


def _canonical_names(values: pa.Array) -> pa.Array:
    hosts: list[str | None] = []
    reasons: list[str | None] = []
    for value in values:
        octets = value.as_buffer()
        # Spark strings may hold bytes that are not UTF-8; URLs arrive through UTF-8 decoding with U+FFFD.
        name = canonical_host(None if octets is None else octets.to_pybytes().decode("utf-8", "replace"))
        hosts.append(name.host)
        reasons.append(name.reason)
    return pa.StructArray.from_arrays(
        [pa.array(hosts, pa.string()), pa.array(reasons, pa.string())], names=["host", "reason"]
    )


def odd_name_map(odd: DataFrame) -> DataFrame:
    """What every distinct `value` (string) of `odd` names: columns `value`, `host`, `reason`.

    Exactly one of `host` and `reason` (a key of REASONS) is set. A null value is a row of its own, with
    the reason `null`: join it null-safe or leave it out.
    """
    named = sf.arrow_udf(_canonical_names, _NAME_TYPE)  # type: ignore[attr-defined]  # not in pyspark's stubs
    distinct = odd.select("value").distinct()
    return distinct.select("value", named(sf.col("value").cast("binary")).alias("name")).select(
        "value", sf.col("name.host").alias("host"), sf.col("name.reason").alias("reason")
    )
