"""Which hosts are candidates, in which order, and what is said against each."""

import math
import tempfile
from pathlib import Path
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from sparkrank.config import Candidates
from sparkrank.errors import SparkrankError
from sparkrank.evidence.candidates import (
    OVER_THRESHOLDS,
    CandidateRows,
    CountSuffixes,
    ranked,
    ranked_frame,
    rows_of,
)
from sparkrank.evidence.cautions import (
    BARE_SUFFIX,
    NOT_REACHED,
    ONE_SLICE,
    CoreStrength,
    bare_suffixes,
)
from sparkrank.evidence.folder import EvidenceFolder
from sparkrank.places import Place, resolve
from sparkrank.tables import HOST_SCORES, SPAM_CANDIDATES, arrow_schema
from sparkrank.tables.measures import MEASURES

DEFAULTS = Candidates(min_scaled_pagerank=10.0, min_relative_mass=0.5)
STRONG = CoreStrength(start=67.0, hidden_boosters=12.0, slices=3)
COVERED = {"host": "core.good.test", "suffix": "good.test", "is_core": True, "relative_mass": -5.0}


def score(host: str, **values: Any) -> dict[str, Any]:
    """A row of host_scores that passes the default thresholds, reached, by a well covered suffix."""
    row = {
        "host": host,
        "domain": host,
        "suffix": "good.test",
        "in_degree": 20,
        "out_degree": 3,
        "pagerank": 0.01,
        "scaled_pagerank": 100.0,
        "trust": 10.0,
        "known_spam_mass": None,
        "absolute_mass": 90.0,
        "relative_mass": 0.9,
        "relative_mass_low": 0.8,
        "relative_mass_high": 0.95,
        "is_core": False,
        "core_reached": True,
        "core_distance": 2,
        "priority": 1.0,
        "reasons": ["it is there"],
        "look_alikes": [],
    }
    return row | values


def candidates(
    rows: list[dict[str, Any]],
    thresholds: Candidates = DEFAULTS,
    strength: CoreStrength = STRONG,
    covered: bool = True,
    files: int = 3,
) -> list[dict[str, Any]]:
    """The candidates in the order of their ranks; a core member covers the suffix unless told otherwise.

    Scores and measures lie in some files each, as the stages before leave them.
    """
    given = [*rows, score(**COVERED)] if covered else rows
    with tempfile.TemporaryDirectory() as folder:
        found = ranked(candidate_rows(Path(folder), given, thresholds, strength, files))
    return sorted(found.to_pylist(), key=lambda row: row["rank"])


def candidate_rows(
    folder: Path, given: list[dict[str, Any]], wanted: Any, strength: CoreStrength, files: int
) -> pa.Table:
    scores = [write(folder / f"scores-{i}", score_table(given[i::files])) for i in range(files)]
    measured = sorted(given, key=lambda row: row["host"][::-1])
    measures = [write(folder / f"measures-{i}", measure_table(measured[i::2])) for i in range(2)]
    evidence = EvidenceFolder(place=resolve(str(folder / "evidence")))
    suffixes = CountSuffixes(scores)
    task = CandidateRows(
        folder=evidence,
        scores=scores,
        measures=measures,
        wanted=wanted,
        bare=frozenset(bare_suffixes(suffixes(number) for number in range(files))),
        strength=strength,
        min_relative_mass=DEFAULTS.min_relative_mass
        if isinstance(wanted, tuple)
        else wanted.min_relative_mass,
    )
    written = [evidence.candidate_rows(number) for number in range(files) if task(number)]
    return rows_of(written)


def write(path: Path, table: pa.Table) -> Place:
    pq.write_table(table, path)
    return resolve(str(path))


def score_table(rows: list[dict[str, Any]]) -> pa.Table:
    schema = arrow_schema(HOST_SCORES)
    return pa.Table.from_pylist([{name: row[name] for name in schema.names} for row in rows], schema)


def measure_table(rows: list[dict[str, Any]]) -> pa.Table:
    """Measures of every host, told apart by nothing."""
    schema = arrow_schema(SPAM_CANDIDATES)
    kinds = {pa.float64(): 0.25, pa.int64(): 4}
    fields = [schema.field(name) for name in ("host", "priority", *MEASURES, "reasons")]
    given = [
        {
            **{field.name: kinds.get(field.type) for field in fields},
            **row,
            "largest_core_member_trust_share": 0.25,
        }
        for row in rows
    ]
    fields.append(pa.field("look_alikes", pa.list_(pa.string())))
    laid = pa.schema(fields)
    return pa.Table.from_pylist([{name: row[name] for name in laid.names} for row in given], laid)


# Cautions by host at the default thresholds; the hosts' scores differ from a plain one's as given.
CAUTIONS: dict[str, tuple[dict[str, Any], list[str]]] = {
    "plain.test": ({"known_spam_mass": 3.5, "in_degree": 2**40}, []),
    "unreached.test": ({"core_reached": False}, [NOT_REACHED]),
    # The threshold is "at least": a low mass at it stays a candidate.
    "low-at-tau.test": ({"relative_mass_low": 0.5}, []),
    "low-below-tau.test": ({"relative_mass_low": math.nextafter(0.5, 0)}, [ONE_SLICE]),
    "no-range.test": ({"relative_mass_low": None, "relative_mass_high": None}, []),
    "bare.test": ({"suffix": "bare.test"}, [BARE_SUFFIX]),
    "192.0.2.7": ({"suffix": None, "domain": None}, [BARE_SUFFIX]),
    # Unreached, no slice matters; what is said is said in one order.
    "all.test": (
        {"core_reached": False, "suffix": "bare.test", "relative_mass_low": 0.1},
        [NOT_REACHED, BARE_SUFFIX],
    ),
    "two.test": ({"relative_mass_low": 0.1, "suffix": "bare.test"}, [ONE_SLICE, BARE_SUFFIX]),
    "may-be-honest.test": (
        {"suffix": "bare.test", "look_alikes": ["may be a club", "may be a portal"]},
        [BARE_SUFFIX, "may be a club", "may be a portal"],
    ),
    "at-both.test": ({"scaled_pagerank": 10.0, "relative_mass": 0.5, "relative_mass_low": 0.5}, []),
}
NO_CANDIDATES = [
    score("below-rho.test", scaled_pagerank=math.nextafter(10.0, 0), relative_mass=1.0),
    score("below-tau.test", scaled_pagerank=1e6, relative_mass=math.nextafter(0.5, 0)),
    score("member.test", is_core=True),
]


@pytest.fixture(scope="module")
def at_defaults() -> dict[str, dict[str, Any]]:
    """Candidates by host at the default thresholds."""
    rows = [score(host, **values) for host, (values, _) in CAUTIONS.items()]
    return {row["host"]: row for row in candidates([*rows, *NO_CANDIDATES])}


def test_both_thresholds_are_at_least_and_members_are_left_out(at_defaults) -> None:
    assert set(at_defaults) == set(CAUTIONS)


@pytest.mark.parametrize("host", CAUTIONS)
def test_each_caution_at_its_boundary(at_defaults, host) -> None:
    assert at_defaults[host]["cautions"] == CAUTIONS[host][1]


@pytest.mark.parametrize("host", CAUTIONS)
def test_scores_are_taken_over_unchanged(at_defaults, host) -> None:
    given = score(host, **CAUTIONS[host][0])
    given.pop("look_alikes")
    assert {name: at_defaults[host][name] for name in given} == given


def test_a_threshold_far_below_zero_lists_every_host_of_enough_pagerank_by_priority() -> None:
    rows = [
        score("small.test", priority=0.9),
        score("large.test", priority=2.7),
        score("unknown.test", relative_mass=1.0, priority=1.5, core_reached=False),
        score("negative.test", relative_mass=-2.0, absolute_mass=-200.0, priority=1e-9),
        score("far-below.test", relative_mass=-999_999.0, scaled_pagerank=10.0, priority=0.0),
        score("below-rho.test", scaled_pagerank=9.9, priority=9.0),
        score("member.test", is_core=True, priority=9.0),
    ]
    found = candidates(rows, Candidates(min_scaled_pagerank=10.0, min_relative_mass=-1e6))
    order = ["large.test", "unknown.test", "small.test", "negative.test", "far-below.test"]
    assert [row["host"] for row in found] == order
    assert [row["priority"] for row in found] == [2.7, 1.5, 0.9, 1e-9, 0.0]
    assert [row["rank"] for row in found] == [1, 2, 3, 4, 5]


def test_a_candidate_without_a_reason_of_its_own_says_so() -> None:
    rows = [score("with.test", reasons=["one", "two"]), score("without.test", reasons=[])]
    found = {row["host"]: row["reasons"] for row in candidates(rows)}
    assert found == {"with.test": ["one", "two"], "without.test": [OVER_THRESHOLDS]}


def test_equal_priorities_order_by_host_over_all_partitions() -> None:
    rows = [
        score(f"{name}{i:02d}.test", priority=priority)
        for i in range(30)
        for name, priority in (("b", 1.0), ("a", 2.0))
    ]
    found = candidates(rows[::-1])
    assert [row["host"] for row in found] == [
        *(f"a{i:02d}.test" for i in range(30)),
        *(f"b{i:02d}.test" for i in range(30)),
    ]
    assert [row["rank"] for row in found] == list(range(1, 61))


@pytest.mark.parametrize(("hosts", "cautions"), [(100, []), (101, [BARE_SUFFIX])])
def test_a_suffix_with_less_than_a_tenth_of_its_even_share_is_bare(hosts, cautions) -> None:
    """20 members over 200 hosts: a suffix of 100 hosts would have 10, and has 1."""
    thin = {"suffix": "thin.test", "scaled_pagerank": 1.0}
    rows = [score("candidate.thin.test", suffix="thin.test")]
    rows += [score(f"h{i}.thin.test", **thin, is_core=i == 0) for i in range(hosts - 1)]
    rows += [score(f"h{i}.good.test", scaled_pagerank=1.0, is_core=i < 19) for i in range(100)]
    (row,) = candidates(rows, covered=False)
    assert (row["host"], row["cautions"]) == ("candidate.thin.test", cautions)


def test_no_candidates_are_an_empty_table(tmp_path) -> None:
    rows = [*NO_CANDIDATES, score(**COVERED)]
    found = candidate_rows(tmp_path, rows, DEFAULTS, STRONG, files=2)
    assert found.num_rows == 0
    assert set(ranked(found).schema.names) == set(SPAM_CANDIDATES.column_names) - {"attributes", "farm_group"}


def test_ranks_of_many_are_those_of_few(spark) -> None:
    """The way through Spark, for lists too long for the driver."""
    given = [{"host": f"h{i % 17:02d}-{i}.test", "priority": float(i % 5)} for i in range(200)]
    few = ranked(pa.Table.from_pylist(given)).sort_by("rank").to_pylist()
    frame = spark.createDataFrame(
        [(row["host"], row["priority"]) for row in given], "host string, priority double"
    )
    many = ranked_frame(frame.repartition(5)).orderBy("rank").collect()
    assert [row.asDict() for row in many] == few


def test_named_hosts_are_taken_whatever_their_scores(tmp_path) -> None:
    rows = [score("low.test", scaled_pagerank=1.0, relative_mass=-3.0), score("other.test"), score(**COVERED)]
    found = candidate_rows(tmp_path, rows, ("low.test", COVERED["host"]), STRONG, files=2)
    assert sorted(found["host"].to_pylist()) == [COVERED["host"], "low.test"]


def test_a_candidate_without_measures_is_an_error(tmp_path) -> None:
    scores = [write(tmp_path / "scores", score_table([score("a.test"), score("b.test")]))]
    measures = [write(tmp_path / "measures", measure_table([score("a.test")]))]
    task = CandidateRows(
        folder=EvidenceFolder(place=resolve(str(tmp_path / "evidence"))),
        scores=scores,
        measures=measures,
        wanted=DEFAULTS,
        bare=frozenset(),
        strength=STRONG,
        min_relative_mass=0.5,
    )
    with pytest.raises(SparkrankError, match="expected the measures of 2 hosts, found 1"):
        task(0)
