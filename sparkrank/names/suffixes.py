"""Public suffixes and registrable domains, by the Public Suffix List.

A host's public suffix is set by the longest rule that matches it, an exception rule before all others;
without a rule it is the last label. Its registrable domain is the suffix and one label more.
`*.kobe.jp` makes `kobe.jp` itself a suffix too, as the list's own tests have it.

Source: publicsuffix.org/list, "Format" and "Algorithm"; the list is that of the `publicsuffixlist` package.
"""

import hashlib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Literal, NamedTuple

import numpy as np
import publicsuffixlist
import pyarrow as pa
import pyarrow.compute as pc
from numpy.typing import NDArray

from sparkrank.errors import ConfigError
from sparkrank.kernels.cut import cut
from sparkrank.kernels.labels import LastLabels
from sparkrank.names.addresses import ends_in_number, is_dotted_ipv4
from sparkrank.names.canonical import canonical_host
from sparkrank.names.idn import domain_to_ascii
from sparkrank.names.octets import octets_of, string_array

SuffixSections = Literal["icann", "icann+private"]

_BEGIN, _END = "// ===BEGIN ", "// ===END "
_EXTRA = "names.extra_suffixes"

# Some megabytes of names and positions.
_HOSTS_A_PASS = 1 << 16


@dataclass(frozen=True, kw_only=True)
class SuffixRules:
    """The rules in force, each keyed by its name in ASCII.

    `suffix_labels[name]` is the number of labels of the public suffix of the hosts that are `name` or end
    in it, unless a longer name matches: the name's own number for a plain rule, one more for a wildcard
    below it (cut at the host's own number), one less for an exception.
    """

    suffix_labels: dict[str, int]

    @classmethod
    def load(cls, sections: SuffixSections = "icann+private", extra: Sequence[str] = ()) -> "SuffixRules":
        """The package's rules of these sections, and extra rules in the list's own notation.

        Raises ConfigError naming `names.extra_suffixes[i]` for a rule that cannot be used.
        """
        return cls.of_rules([*_listed_rules(sections), *_extra_rules(extra)])

    @classmethod
    def of_rules(cls, rules: Iterable[str]) -> "SuffixRules":
        """Rules in lower-case ASCII; of rules with one name an exception counts first, then a wildcard."""
        labels: dict[str, int] = {}
        for rule in sorted(set(rules), key=lambda rule: ("*!".find(rule[0]), rule)):
            name = rule.lstrip("!").removeprefix("*.")
            depth = name.count(".") + 1
            labels[name] = depth - 1 if rule[0] == "!" else depth + 1 if rule[0] == "*" else depth
        return cls(suffix_labels=labels)

    @cached_property
    def fingerprint(self) -> str:
        """SHA-256 (hexadecimal) of the rules; equal for equal rules, however they were put together."""
        lines = "".join(f"{name} {labels}\n" for name, labels in sorted(self.suffix_labels.items()))
        return hashlib.sha256(lines.encode("ascii")).hexdigest()

    @cached_property
    def tables_by_depth(self) -> list[tuple[int, pa.Table]]:
        """Tables of the rules' names of L labels, L ascending, for tools that look up many hosts at once.

        Columns: `name`; `labels`, those of the suffix, as in `suffix_labels`; and with two labels `longer`,
        whether longer names end in this one, which may be no rule's name then and has null labels. Plain
        rules of one label are left out: they say what holds without them.
        """
        depths: dict[int, dict[str, int]] = {}
        for name, labels in sorted(self.suffix_labels.items()):
            depth = name.count(".") + 1
            if (depth, labels) != (1, 1):
                depths.setdefault(depth, {})[name] = labels
        beyond = (name for depth, names in depths.items() if depth > 2 for name in names)
        longer = {".".join(name.split(".")[-2:]) for name in beyond}
        if longer:
            depths.setdefault(2, {})
        tables: list[tuple[int, pa.Table]] = []
        for depth in sorted(depths):
            names = sorted({*depths[depth], *longer}) if depth == 2 else sorted(depths[depth])
            columns = {
                "name": pa.array(names, pa.string()),
                "labels": pa.array([depths[depth].get(name) for name in names], pa.int32()),
            }
            if depth == 2:
                columns["longer"] = pa.array([name in longer for name in names], pa.bool_())
            tables.append((depth, pa.table(columns)))
        return tables

    def split(self, host: str) -> tuple[str | None, str | None]:
        """Public suffix and registrable domain of a canonical host.

        Both are None for an IP address and for a name with an empty label; the domain is None for a host
        that is a public suffix itself.
        """
        labels = host.split(".")
        if host.startswith("[") or is_dotted_ipv4(host) or "" in labels:
            return None, None
        count = 1
        for start in range(len(labels)):
            found = self.suffix_labels.get(".".join(labels[start:]))
            if found is not None:
                count = min(found, len(labels))
                break
        suffix = ".".join(labels[-count:])
        return suffix, ".".join(labels[-count - 1 :]) if count < len(labels) else None


def _listed_rules(sections: SuffixSections) -> list[str]:
    wanted = {"ICANN", "PRIVATE"} if sections == "icann+private" else {"ICANN"}
    rules: list[str] = []
    section = ""
    for line in Path(publicsuffixlist.PSLFILE).read_text(encoding="utf-8").splitlines():
        if line.startswith(_BEGIN):
            section = line.removeprefix(_BEGIN).split(" ")[0]
        elif line.startswith(_END):
            section = ""
        elif line.strip() and not line.startswith("//") and section in wanted:
            rules.append(_ascii_rule(line.split()[0]))
    return rules


def _ascii_rule(rule: str) -> str:
    prefix = rule[: 1 if rule.startswith("!") else 2 if rule.startswith("*.") else 0]
    name = domain_to_ascii(rule[len(prefix) :])
    if name is None:
        raise ValueError(f"public suffix rule without an ASCII form: {rule!r}")
    return prefix + name


def _extra_rules(extra: Sequence[str]) -> list[str]:
    return [_extra_rule(rule, f"{_EXTRA}[{position}]") for position, rule in enumerate(extra)]


def _extra_rule(rule: str, where: str) -> str:
    prefix = rule[: 1 if rule.startswith("!") else 2 if rule.startswith("*.") else 0]
    name = rule[len(prefix) :]
    # A rule's name obeys the rules of a bare host, without port, path or trailing dot.
    host = canonical_host(name).host
    if host is None or any(char in name for char in ":/*![") or ends_in_number(host):
        raise ConfigError(
            f"{where}: expected a public suffix rule such as 'pages.example', '*.example' or "
            f"'!www.example', found {rule!r}; correct or remove it"
        )
    if prefix == "!" and "." not in host:
        raise ConfigError(f"{where}: expected an exception of two labels or more, found {rule!r}; remove it")
    return prefix + host


class SplitHosts(NamedTuple):
    """Public suffixes and registrable domains of n hosts, null where a host has none."""

    suffixes: pa.StringArray
    domains: pa.StringArray


def split_hosts(hosts: pa.Array, rules: SuffixRules) -> SplitHosts:
    """Public suffixes and registrable domains of canonical hosts (strings, nulls allowed).

    Null as in `SuffixRules.split`. One lookup a rule length: the names of L labels are looked up for the
    hosts' last L labels, and the longest match wins.
    """
    parts = [_split(hosts.slice(at, _HOSTS_A_PASS), rules) for at in range(0, len(hosts), _HOSTS_A_PASS)]
    if not parts:
        return SplitHosts(pa.array([], pa.string()), pa.array([], pa.string()))
    return SplitHosts(*(pa.concat_arrays(columns) for columns in zip(*parts, strict=True)))


def _split(hosts: pa.Array, rules: SuffixRules) -> SplitHosts:
    data, offsets = octets_of(hosts)
    labels = LastLabels(data, offsets)
    count = np.ones(len(hosts), dtype=np.int64)
    may_match = np.ones(len(hosts), dtype=np.bool_)
    for depth, table in rules.tables_by_depth:
        at = np.flatnonzero(may_match & (labels.n_labels >= depth))
        begin = offsets[1:].copy()
        begin[at] = labels.begin(depth)[at]
        ends = string_array(cut(data, offsets, begin, offsets[1:]), (offsets[1:] - begin)[at])
        place = pc.index_in(ends, value_set=table["name"])
        found = table["labels"].take(place).fill_null(0).to_numpy()
        count[at] = np.where(found > 0, found, count[at])
        if "longer" in table.column_names:
            may_match[at] = table["longer"].take(place).fill_null(False).to_numpy()
    is_name = labels.n_labels > 0
    if hosts.null_count:
        is_name &= hosts.is_valid().to_numpy(zero_copy_only=False)

    def last(wanted: NDArray[np.int64], there: NDArray[np.bool_]) -> pa.StringArray:
        begin = np.where(there, labels.begin(wanted), offsets[1:])
        return string_array(cut(data, offsets, begin, offsets[1:]), offsets[1:] - begin, there)

    # A wildcard rule may ask for more labels than a host has: then the host itself is the suffix.
    return SplitHosts(last(count, is_name), last(count + 1, is_name & (labels.n_labels > count)))
