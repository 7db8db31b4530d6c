"""Cutting rows into parts: against bisection on Python's own text, and what a scratch file gives back."""

import bisect
import random
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.errors import SparkrankError
from sparkrank.places import Place, resolve
from sparkrank.publish import parts
from sparkrank.publish.parts import choose_cuts, count_parts, part_numbers, read_part, write_parts
from sparkrank.tables import ColumnSpec, ColumnType, TableSpec

TABLE = TableSpec(
    name="hosts_seen",
    meaning="A table of the tests.",
    key=("host",),
    order=("host",),
    columns=(
        ColumnSpec(name="host", type=ColumnType.STRING, unit="text", meaning="A host."),
        ColumnSpec(name="rows", type=ColumnType.LONG, unit="rows", meaning="Its rows.", nullable=True),
    ),
)

# Few letters, so that keys share beginnings; the last two are two and four bytes long in UTF-8.
keys = st.lists(st.text("ab.-\u00e4\U0001f310", max_size=6), max_size=40)


@pytest.fixture
def small_parts(monkeypatch) -> None:
    monkeypatch.setattr(parts, "_LEAST_ROWS", 10)


@given(given=keys, cuts=keys)
def test_a_key_s_part_is_how_many_cuts_are_not_above_it(given: list[str], cuts: list[str]) -> None:
    ascending = sorted({cut.encode() for cut in cuts})
    numbers = part_numbers(
        pa.array(given, pa.string()), pa.array([cut.decode() for cut in ascending], pa.string())
    )
    assert numbers.tolist() == [bisect.bisect_right(ascending, key.encode()) for key in given]


@given(sample=keys, n_rows=st.integers(0, 1 << 23))
def test_cuts_ascend_and_leave_no_part_without_a_key(sample: list[str], n_rows: int) -> None:
    cuts = choose_cuts(sample, n_rows)
    given = [cut.encode() for cut in cuts.to_pylist()]
    assert given == sorted(set(given))
    assert len(given) < count_parts(n_rows)
    if sample:
        numbers = part_numbers(pa.array(sample, pa.string()), cuts)
        assert set(numbers.tolist()) == set(range(len(given) + 1))
    # The order in which tasks report, and what they report twice, change nothing.
    again = random.Random(0).sample(sample, len(sample)) + sample[:3]
    assert choose_cuts(again, n_rows).equals(cuts)


def test_parts_are_about_equal(small_parts) -> None:
    """160 parts' worth of names in all, cut by a sample of 256 a part."""
    random_names = random.Random(7)
    names = [f"{random_names.getrandbits(48):012x}.example" for _ in range(40_000)]
    cuts = choose_cuts(names[: parts.sample_size(len(names))], len(names))
    assert len(cuts) + 1 == count_parts(len(names)) == 16
    counts = np.bincount(part_numbers(pa.array(names), cuts))
    # Six standard deviations of a part's share.
    assert abs(counts / (len(names) / 16) - 1).max() < 6 / 16


@pytest.mark.parametrize(
    ("n_rows", "expected"),
    [(0, 1), (1, 1), (1 << 18, 1), (1 << 20, 4), (1 << 22, 16), (1 << 24, 16), (1 << 26, 64)],
)
def test_parts_are_neither_tiny_nor_huge(n_rows: int, expected: int) -> None:
    assert count_parts(n_rows) == expected


def test_a_part_comes_back_from_all_files(tmp_path) -> None:
    places = [resolve(str(tmp_path / f"{number}.arrow")) for number in range(2)]
    first = [{"host": ["b", "a"], "rows": [1, None]}, {"host": [], "rows": []}, {"host": ["x"], "rows": [3]}]
    second = [{"host": [], "rows": []}, {"host": ["m"], "rows": [4]}, {"host": ["z"], "rows": [5]}]
    counts = [
        write_parts(place, TABLE, [columns_of(part) for part in given])
        for place, given in zip(places, (first, second), strict=True)
    ]
    assert counts == [(2, 0, 1), (0, 1, 1)]
    assert [read_part(places, part).to_pydict() for part in range(3)] == [
        {"host": ["b", "a"], "rows": [1, None]},
        {"host": ["m"], "rows": [4]},
        {"host": ["x", "z"], "rows": [3, 5]},
    ]
    scratch = parts.TableParts(files=tuple(places), rows=tuple(counts))
    assert scratch.rows_by_part == [2, 1, 2]


def test_a_store_has_the_same_bytes_and_only_whole_files(tmp_path, monkeypatch) -> None:
    from pyarrow.fs import FileType, _MockFileSystem

    store = _MockFileSystem()
    store.create_dir("bucket")
    monkeypatch.setattr("sparkrank.places._open_filesystem", lambda root: store)
    local = resolve(str(tmp_path / "0.arrow"))
    remote, broken = (Place(uri=f"s3a://bucket/{n}", path=f"bucket/{n}") for n in ("whole", "broken"))
    given = [{"host": ["b", "a"], "rows": [1, None]}, {"host": ["x"], "rows": [3]}]
    for place in (local, remote):
        assert write_parts(place, TABLE, map(columns_of, given)) == (2, 1)
    assert remote.read_bytes() == Path(local.local_path).read_bytes()
    assert read_part([remote], 1).to_pydict() == given[1]
    with pytest.raises(SparkrankError, match="expected column rows of type int64"):
        write_parts(broken, TABLE, map(columns_of, [given[0], {"host": ["a"]}]))
    assert store.get_file_info(broken.path).type == FileType.NotFound


@pytest.mark.parametrize(
    ("columns", "message"),
    [
        ({"host": ["a"]}, "expected column rows of type int64; found no such column"),
        (
            {"host": ["a"], "rows": [1], "more": [1]},
            "expected column more of type no such column; found int64",
        ),
        ({"host": ["a"], "rows": ["1"]}, "expected column rows of type int64; found string"),
    ],
)
def test_other_columns_are_refused_and_leave_nothing(tmp_path, columns, message) -> None:
    place = resolve(str(tmp_path / "scratch" / "0.arrow"))
    with pytest.raises(SparkrankError) as refusal:
        write_parts(place, TABLE, [columns_of({"host": ["a"], "rows": [1]}), columns_of(columns)])
    assert str(refusal.value) == (f"table hosts_seen: {message}; this is a fault of the program, report it")
    assert place.exists() is False
    assert list((tmp_path / "scratch").iterdir()) == []


def columns_of(part: dict[str, list[Any]]) -> dict[str, pa.Array]:
    """Arrow's own types of the values; those of the table where there are none."""
    types = {"host": pa.string(), "rows": pa.int64()}
    return {name: pa.array(values, None if values else types[name]) for name, values in part.items()}
