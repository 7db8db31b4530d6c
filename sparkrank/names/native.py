"""Canonical hosts in native Spark expressions, and Python for the odd values these cannot decide.

Edge tables hold billions of strings, nearly all of them plain: letters, digits, hyphens, dots. For
those the canonical host is a piece of the value in lower case, and `plain_host` finds it without leaving
the JVM. Everything else goes distinct to `canonical_host`, once a value.

`plain_host` never disagrees with `canonical_host` where it answers; where it is not sure it is null.
"""

import pyarrow as pa
from pyspark.sql import Column, DataFrame
from pyspark.sql import functions as sf
from pyspark.sql.types import StringType, StructField, StructType

from sparkrank.names.canonical import MAX_NAME_CHARACTERS, canonical_host

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
