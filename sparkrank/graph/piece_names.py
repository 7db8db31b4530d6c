"""The distinct values of a piece of input and what they name.

Every value of a piece is numbered, equal values alike, by its fingerprint.  What a value names is decided
once, when it is new; a row is from then on a number.
"""

from __future__ import annotations

import secrets

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from sparkrank.kernels.fingerprints import N_KEYS, fingerprints
from sparkrank.kernels.key_table import KeyTable
from sparkrank.kernels.xxhash import xxh64
from sparkrank.names.native import decide_names
from sparkrank.names.octets import octets_of
from sparkrank.names.suffixes import SuffixRules, split_hosts

_Rows = NDArray[np.int32]


class PieceNames:
    """Numbers the values of a piece from 0 and keeps what each names."""

    def __init__(self, salt: int, domain_rules: SuffixRules | None, expected: int) -> None:
        """``expected`` is about the number of distinct values; ``domain_rules`` where nodes are domains."""
        self.hosts: list[pa.StringArray] = []
        """Canonical hosts of the values in the order of their numbers, in chunks; null where rejected."""
        self.ids: list[NDArray[np.int64]] = []
        """Ids of the hosts, in the same chunks; a null's means nothing."""
        self._salt = salt
        self._domain_rules = domain_rules
        # Secret, so that no two values can be written that are taken for one.
        octets = secrets.token_bytes(8 * (N_KEYS + 1))
        *keys, self._null = np.frombuffer(octets, np.uint64)
        self._keys = np.array(keys)
        self._table = KeyTable(expected)
        self._usable = np.zeros(max(expected, 1), np.bool_)
        self._rejected: dict[int, tuple[str | None, str]] = {}

    def __len__(self) -> int:
        return self._table.count

    @property
    def usable(self) -> NDArray[np.bool_]:
        """Whether a value names a host: shape (number of values,)."""
        return self._usable[: len(self)]

    def number(self, column: pa.Array) -> _Rows:
        """The number of each row's value: shape (rows,)."""
        if isinstance(column, pa.DictionaryArray):
            return self._number_encoded(column)
        found = fingerprints(*octets_of(column), self._keys)
        if column.null_count:
            found[~column.is_valid().to_numpy(zero_copy_only=False)] = self._null
        numbers, new = self._table.number(found)
        if len(new):
            self._decide(column.take(pa.array(new)))
        return numbers

    def rejection(self, number: int) -> tuple[str | None, str]:
        """A rejected value as text (None for a null), and why."""
        return self._rejected[number]

    def _number_encoded(self, column: pa.DictionaryArray) -> _Rows:
        """Rows of a column that is a dictionary in memory; of its values, only those that rows use."""
        rows = column.indices.cast(pa.int64()).fill_null(len(column.dictionary)).to_numpy()
        used, rows = np.unique(rows, return_inverse=True)
        values = pa.concat_arrays([column.dictionary, pa.nulls(1, column.dictionary.type)])
        return self.number(values.take(pa.array(used)))[rows]

    def _decide(self, values: pa.Array) -> None:
        first = len(self) - len(values)
        decided = decide_names(values)
        hosts = decided.hosts
        if self._domain_rules is not None:
            # A host without a registrable domain is a node of its own.
            hosts = pc.coalesce(split_hosts(hosts, self._domain_rules).domains, hosts)
        self.hosts.append(hosts)
        self.ids.append(xxh64(*octets_of(hosts), self._salt))
        if len(self) > len(self._usable):
            more = np.zeros(len(self), np.bool_)
            self._usable = np.concatenate((self._usable, more))
        usable = hosts.is_valid().to_numpy(zero_copy_only=False)
        self._usable[first : len(self)] = usable
        for at in np.flatnonzero(~usable).tolist():
            value = _text(values[at])
            self._rejected[first + at] = (value, "null" if value is None else decided.reasons[at].as_py())


def _text(value: pa.Scalar) -> str | None:
    octets = value.as_buffer()
    if octets is None:
        return None
    # 200 characters are shown; the rest of a value of megabytes is not worth decoding.
    return str(octets.to_pybytes()[:4000].decode("utf-8", "replace"))
