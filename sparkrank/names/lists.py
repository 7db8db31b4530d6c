"""The reviewed lists: the good core and, where there is one, known spam.

They are read on the driver before any JVM starts: lists are made by people and are small beside a crawl.
Names become canonical as those of edges do, so that a list matches the graph however it spells them.
"""

import dataclasses
import math
import re
from typing import Any, Protocol

import pyarrow as pa

from sparkrank.config import Config
from sparkrank.errors import InputRefused
from sparkrank.names.canonical import canonical_host
from sparkrank.names.list_files import Entry, read_list_file
from sparkrank.names.rejections import Rejection, count_rejections
from sparkrank.names.slices import NO_SUFFIX
from sparkrank.places import Place, resolve
from sparkrank.shown import shown_value

LIST_REASONS = {
    "not_a_domain": "in a domain graph an entry counts only if it is its registrable domain or the www. of it"
}
"""Reasons for which an entry is rejected beyond those of its name, with explanations."""

# Names that are surely their own canonical form; anything else takes the long way round.
_LABEL = "[a-z0-9](?:[a-z0-9-]{0,61}[a-z0-9])?"
_PLAIN_HOST = re.compile(rf"(?!xn--|.*\.xn--)(?:{_LABEL}\.)+(?=[a-z]){_LABEL}")

HOSTS_SCHEMA: Any = pa.schema(
    [
        pa.field("host", pa.string(), nullable=False),
        pa.field("slice", pa.string(), nullable=False),
        pa.field("weight", pa.float64(), nullable=False),
        pa.field("row", pa.int64(), nullable=False),
    ]
)
"""A list's table: canonical host (key), slice, weight (> 0), and the row that it was read from."""


class SuffixSplit(Protocol):
    """What is needed of the suffix rules: a host's public suffix and registrable domain, None where none."""

    def split(self, host: str) -> tuple[str | None, str | None]: ...


@dataclasses.dataclass(frozen=True, kw_only=True)
class HostList:
    """A list that was read.

    `kind` is "core" or "known_spam"; `hosts` a `pyarrow.Table` in the schema HOSTS_SCHEMA, ordered by host,
    each host once; `rows` the number of entries read and `duplicates` how many of them repeated a host;
    `fingerprint` the SHA-256 of the list's content.
    """

    kind: str
    hosts: Any
    rejections: tuple[Rejection, ...]
    rows: int
    duplicates: int
    fingerprint: str


@dataclasses.dataclass(frozen=True, kw_only=True)
class HostLists:
    """Both lists of a run; `known_spam` is None without such a list."""

    core: HostList
    known_spam: HostList | None


def read_lists(config: Config, rules: SuffixSplit) -> HostLists:
    """The lists that the configuration names; InputRefused where one cannot be used or they contradict."""
    core = read_core(config.input.core, node=config.graph.node, rules=rules)
    if not config.input.known_spam:
        return HostLists(core=core, known_spam=None)
    known_spam = read_known_spam(config.input.known_spam, node=config.graph.node, rules=rules)
    check_disjoint(core, known_spam)
    return HostLists(core=core, known_spam=known_spam)


def read_core(path: str, *, node: str, rules: SuffixSplit) -> HostList:
    """The good core at a path or URI; `node` is "host" or "domain".

    Raises InputRefused where the list cannot be read, contradicts itself, or has no usable entry.
    """
    place = resolve(path)
    core = _read("core", place, node, rules)
    if core.hosts.num_rows == 0:
        first = "".join(f', the first of them "{r.row_value}": {r.reason}' for r in core.rejections[:1])
        raise InputRefused(
            f"input.core at {shown_value(str(place))}: expected at least one usable host, "
            f"found {core.rows} rows, none usable{first}; trust starts from these hosts, add some"
        )
    return core


def read_known_spam(path: str, *, node: str, rules: SuffixSplit) -> HostList:
    """Known spam at a path or URI, as `read_core`, but the list may be empty."""
    return _read("known_spam", resolve(path), node, rules)


def check_disjoint(core: HostList, known_spam: HostList) -> None:
    """InputRefused, by row, where a host is in both lists."""
    core_rows = dict(zip(core.hosts["host"].to_pylist(), core.hosts["row"].to_pylist(), strict=True))
    both = [
        (host, core_rows[host], row)
        for host, row in zip(
            known_spam.hosts["host"].to_pylist(), known_spam.hosts["row"].to_pylist(), strict=True
        )
        if host in core_rows
    ]
    if both:
        host, core_row, spam_row = both[0]
        more = f" and {len(both) - 1} more" if len(both) > 1 else ""
        raise InputRefused(
            f"input.core and input.known_spam: expected no host in both, found {shown_value(host)} "
            f"(row {core_row} and row {spam_row}){more}; remove it from one of them"
        )


def _read(kind: str, place: Place, node: str, rules: SuffixSplit) -> HostList:
    source = f"input.{kind}"
    where = f"{source} at {shown_value(str(place))}"
    read = read_list_file(source, place)
    rejected: list[tuple[str | None, str]] = []
    kept: dict[str, Entry] = {}
    for entry in read.entries:
        host, reason = _node_name(entry.host, node, rules)
        if host is None:
            rejected.append((entry.host, reason))
            continue
        sliced = entry
        if entry.slice is None:
            sliced = dataclasses.replace(entry, slice=rules.split(host)[0] or NO_SUFFIX)
        earlier = kept.setdefault(host, sliced)
        if earlier.slice != sliced.slice:
            raise InputRefused(
                f"{where}: expected one slice a host, found {shown_value(host)} "
                f'in "{earlier.slice}" (row {earlier.row}) and "{sliced.slice}" (row {sliced.row}); keep one'
            )
        if sliced.weight > earlier.weight:
            kept[host] = sliced
    # Plain sum: fsum raises on overflow, and only the size of the total matters here.
    if not math.isfinite(sum(entry.weight for entry in kept.values())):
        raise InputRefused(
            f"{where}: expected weights with a finite total, found a larger one; "
            "only their proportions count, divide them all"
        )
    return HostList(
        kind=kind,
        hosts=_hosts_table(kept),
        rejections=count_rejections(f"{kind}.host", rejected),
        rows=len(read.entries),
        duplicates=len(read.entries) - len(rejected) - len(kept),
        fingerprint=read.fingerprint,
    )


def _node_name(value: str | None, node: str, rules: SuffixSplit) -> tuple[str | None, str]:
    """The node that an entry stands for, or None and the reason's code."""
    if value is not None and len(value) <= 253 and _PLAIN_HOST.fullmatch(value):
        host = value
    else:
        name = canonical_host(value)
        if name.host is None:
            return None, name.reason or ""
        host = name.host
    if node == "host":
        return host, ""
    # A host without a registrable domain is a node of its own in a domain graph.
    domain = rules.split(host)[1] or host
    return (domain, "") if host in (domain, f"www.{domain}") else (None, "not_a_domain")


def _hosts_table(kept: dict[str, Entry]) -> Any:
    ordered = sorted(kept.items())
    columns = [
        [host for host, _ in ordered],
        [entry.slice for _, entry in ordered],
        [entry.weight for _, entry in ordered],
        [entry.row for _, entry in ordered],
    ]
    return pa.table(columns, schema=HOSTS_SCHEMA)
