"""What the values of an input name: plain ones decided many at a time, the odd ones in Python.

Edge tables hold billions of strings. A reader hands over the distinct values of a chunk; the kernel cuts
the hosts out of the plain ones, and `canonical_host` decides each odd one. Odd values such as addresses and
IDNA names come back chunk after chunk, so the last ones decided are remembered.

The plain way never disagrees with `canonical_host` where it answers.
"""

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from sparkrank.kernels.plain_hosts import find_plain_hosts
from sparkrank.names.canonical import CanonicalName, canonical_host
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
    # A null may have bytes of its own, which mean nothing.
    valid = values.is_valid().to_numpy(zero_copy_only=False)
    plain = (found.lengths > 0) & valid
    hosts = string_array(found.data, found.lengths, plain)
    reasons = pa.nulls(len(values), pa.string())
    odd = np.flatnonzero(~plain)
    if len(odd) == 0:
        return DecidedNames(hosts=hosts, reasons=reasons)
    names = []
    octets = data.data
    rows = (offsets[odd].tolist(), offsets[odd + 1].tolist(), valid[odd].tolist())
    for begin, end, is_value in zip(*rows, strict=True):
        names.append(_name_of(str(octets[begin:end], "utf-8", "replace") if is_value else None))
    is_odd = pa.array(~plain)
    return DecidedNames(
        hosts=pc.replace_with_mask(hosts, is_odd, pa.array([name.host for name in names], pa.string())),
        reasons=pc.replace_with_mask(reasons, is_odd, pa.array([name.reason for name in names], pa.string())),
    )


def _name_of(value: str | None) -> CanonicalName:
    keep = value is None or len(value) < _REMEMBERED_CHARACTERS
    return _remembered(value) if keep else canonical_host(value)


@lru_cache(maxsize=_REMEMBERED_VALUES)
def _remembered(value: str | None) -> CanonicalName:
    return canonical_host(value)
