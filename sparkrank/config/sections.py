"""Every setting of the program, with its meaning, range, default and the reason for the default."""

import dataclasses
import re
import textwrap
from typing import Any

from sparkrank.config.settings import Kind, Setting, choice, setting, shown_setting

RUN_ID = re.compile(r"[a-z0-9][a-z0-9._-]{0,63}")
"""Names folders and files, so it holds neither a separator nor a leading dot and cannot climb out."""


@dataclasses.dataclass(frozen=True, kw_only=True)
class Run:
    """Where a run's results go and under which name."""

    id: str = setting(
        Kind.TEXT,
        "Name of the run, in every path and table of it.",
        reason="choose one that a colleague recognises in a year",
        expected="1 to 64 of a-z, 0-9, '.', '_' and '-', the first a letter or digit",
        accepts=lambda v: RUN_ID.fullmatch(v) is not None,
    )
    output: str = setting(
        Kind.PATH,
        "Folder of the published tables and manifests: a local path or a URI that Spark can write.",
        reason="keep it for as long as the results matter",
        expected="a path or URI",
        accepts=bool,
    )
    work: str = setting(
        Kind.PATH,
        "Folder of edge blocks and solver states: every executor must be able to read and write it.",
        reason="may be emptied when no run is in progress; fast local disk is best with a local master",
        expected="a path or URI",
        accepts=bool,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Input:
    """What is read. Nothing here is ever written to."""

    edges: str = setting(
        Kind.PATH,
        "Parquet file or folder, Hive-partitioned or not: src and dst text (host or URL); "
        "links whole number and rel text optional.",
        reason="one crawl, or several that should count as one",
        expected="a path or URI",
        accepts=bool,
    )
    core: str = setting(
        Kind.PATH,
        "Reviewed good hosts, CSV or Parquet: host; slice, weight and any note columns optional.",
        reason="a broad small core beats a large one from one country",
        expected="a path or URI",
        accepts=bool,
    )
    known_spam: str = setting(
        Kind.PATH,
        "Hosts already found to be spam, same form as core; empty for none.",
        default="",
        reason="the list is optional",
    )
    hosts: str = setting(
        Kind.PATH,
        "Parquet with a host column: adds hosts without edges; other columns are evidence. Empty for none.",
        default="",
        reason="the list is optional; hosts without edges change every share of the whole",
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Names:
    """How a host's public suffix and registrable domain are found."""

    suffix_sections: str = choice(
        "Sections of the Public Suffix List that count.",
        "icann+private",
        "icann",
        reason="users of a hosting platform that is listed as private are independent of each other",
    )
    extra_suffixes: tuple[str, ...] = setting(
        Kind.TEXTS,
        "Further rules in the list's own syntax, for platforms that it misses.",
        default=(),
        reason="the list alone is what others can reproduce",
        expected='a list of texts such as ["pages.example", "*.shops.example"], none empty',
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Graph:
    """How rows become a graph."""

    node: str = choice(
        "What a node is: a host, or its registrable domain.",
        "host",
        "domain",
        reason="farms within one domain are visible by host only",
    )
    weighting: str = choice(
        "How a host's rank is split over its out-links: evenly, or by the number of links.",
        "uniform",
        "links",
        reason="the published method; link counts are easily inflated by templates",
    )
    follow_only: bool = setting(
        Kind.BOOLEAN,
        "Leave out edges whose rel says nofollow, ugc or sponsored.",
        default=True,
        reason="such links say themselves that they are no endorsement",
    )
    max_rejected_share: float = setting(
        Kind.NUMBER,
        "Refuse the edges when a larger share of their rows is rejected.",
        default=0.2,
        reason="dirty crawls lose a few percent; a fifth means a wrong column or a broken export",
        expected="a number from 0 to 1",
        accepts=lambda v: 0 <= v <= 1,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Solve:
    """How the linear systems are solved."""

    damping: float = setting(
        Kind.NUMBER,
        "Share of a host's rank that follows its links (c).",
        default=0.85,
        reason="the value of Brin & Page 1998 and of the mass estimation paper (VLDB 2006)",
        expected="a number above 0 and below 1",
        accepts=lambda v: 0 < v < 1,
    )
    tolerance: float = setting(
        Kind.NUMBER,
        "Largest allowed error of any host in any column, divided by the host's own PageRank.",
        default=1e-6,
        reason="relative mass is then right to about one part in a million, finer than any threshold in use",
        expected="a number above 0",
        accepts=lambda v: v > 0,
    )
    max_steps: int = setting(
        Kind.INTEGER,
        "Steps after which the solve gives up.",
        default=200,
        reason="plain iteration at damping 0.85 needs at most 157 steps for an error of 1e-10",
        expected="a whole number of at least 1",
        accepts=lambda v: v >= 1,
    )
    max_columns: int = setting(
        Kind.INTEGER,
        "Columns solved at once: PageRank and one a slice; the lightest slices are merged above it.",
        default=8,
        reason="8 columns of 200 million iterated hosts already make a state of 12.8 GB",
        expected="a whole number of at least 2",
        accepts=lambda v: v >= 2,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Mass:
    """How much of the web is taken to be good."""

    good_share: float = setting(
        Kind.NUMBER,
        "Estimated share of good hosts; the core stands for all of them (gamma).",
        default=0.85,
        reason="the value of the mass estimation paper (VLDB 2006)",
        expected="a number above 0 and at most 1",
        accepts=lambda v: 0 < v <= 1,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Candidates:
    """Which hosts are listed for review. Both thresholds are "at least"."""

    min_scaled_pagerank: float = setting(
        Kind.NUMBER,
        "Least scaled PageRank of a candidate (rho); a host without in-links has 1.",
        default=10.0,
        reason="the value of the mass estimation paper (VLDB 2006): smaller hosts profit too little",
        expected="a number of at least 0",
        accepts=lambda v: v >= 0,
    )
    min_relative_mass: float = setting(
        Kind.NUMBER,
        "Least relative mass of a candidate (tau); may be far below 0.",
        default=0.5,
        reason="half of the rank comes from outside the core's reach",
        expected="a number of at most 1",
        accepts=lambda v: v <= 1,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Evidence:
    """How much is gathered on where a candidate's rank comes from."""

    followed_links: int = setting(
        Kind.INTEGER,
        "Links followed back in a step for one candidate at most, its own in-links aside.",
        default=10_000,
        reason="a ten-thousandth of a score a link is finer than anybody reads",
        expected="a whole number of at least 1",
        accepts=lambda v: v >= 1,
    )
    all_followed_links: int = setting(
        Kind.INTEGER,
        "Links followed back in a step for all candidates together, about; each gets an even part.",
        default=1 << 24,
        reason="keeps the evidence of a long list cheaper than the solve; some seconds of a core a step",
        expected="a whole number of at least 1",
        accepts=lambda v: v >= 1,
    )
    max_steps: int = setting(
        Kind.INTEGER,
        "Links back from a candidate after which paths are followed no further.",
        default=20,
        reason="at damping 0.85 what goes around a farm for longer is 4% of it",
        expected="a whole number from 3 to 200",
        accepts=lambda v: 3 <= v <= 200,
    )
    listed_sources: int = setting(
        Kind.INTEGER,
        "Sources listed for each candidate and kind at most.",
        default=100,
        reason="more than a reviewer reads; the unexplained share says what is left",
        expected="a whole number of at least 1",
        accepts=lambda v: v >= 1,
    )


@dataclasses.dataclass(frozen=True, kw_only=True)
class Config:
    """The whole configuration, one attribute a section."""

    run: Run
    input: Input
    names: Names
    graph: Graph
    solve: Solve
    mass: Mass
    candidates: Candidates
    evidence: Evidence

    def as_dict(self) -> dict[str, dict[str, Any]]:
        """The settings by section and key, of JSON types only."""
        return {
            section: {key: list(v) if isinstance(v, tuple) else v for key, v in values.items()}
            for section, values in dataclasses.asdict(self).items()
        }


SECTIONS: dict[str, type[Any]] = {
    "run": Run,
    "input": Input,
    "names": Names,
    "graph": Graph,
    "solve": Solve,
    "mass": Mass,
    "candidates": Candidates,
    "evidence": Evidence,
}
"""The section classes by name, in the order in which they are read, checked and described."""


def settings_of(section: str) -> dict[str, tuple[Setting, object]]:
    """Each key of a section with its declaration and default (`dataclasses.MISSING` where required)."""
    fields = dataclasses.fields(SECTIONS[section])
    return {field.name: (field.metadata["setting"], field.default) for field in fields}


def describe_config() -> str:
    """The reference of all settings as plain text, for `--help` and the documentation."""
    lines: list[str] = []
    for section, cls in SECTIONS.items():
        lines += ["", f"[{section}]  {cls.__doc__}"] if lines else [f"[{section}]  {cls.__doc__}"]
        for key, (declared, default) in settings_of(section).items():
            given = "required" if default is dataclasses.MISSING else f"default {_shown_default(default)}"
            lines.append(f"  {section}.{key} ({given})")
            note = f"{declared.help} Expected: {declared.expected}. Why: {declared.reason}."
            lines += textwrap.wrap(note, 100, initial_indent="      ", subsequent_indent="      ")
    return "\n".join(lines)


def _shown_default(default: object) -> str:
    return '""' if default == "" else shown_setting(default)
