"""Work files: what goes in comes out, and a file is either whole or refused or not there."""

import os
import resource
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as of_numpy
from numpy.typing import NDArray

from sparkrank.arrays import has_arrays, read_arrays, read_static_arrays, write_arrays
from sparkrank.errors import SparkrankError
from sparkrank.places import Place, resolve

DTYPES = ["?", "i1", "u1", "i2", "u2", "i4", "u4", "i8", "u8", "f4", "f8"]
NAMED_ARRAYS = st.dictionaries(
    st.text(max_size=12),
    st.sampled_from(DTYPES).flatmap(
        lambda dtype: of_numpy.arrays(dtype, of_numpy.array_shapes(max_dims=3, min_side=0, max_side=9))
    ),
    max_size=5,
)
SAMPLE = {
    "ids": np.arange(100, dtype=np.int64),
    "empty": np.zeros((3, 0), dtype=np.float64),
    "marks": np.array([7, 8, 9], dtype=np.uint8),
    "state": np.linspace(0.0, 1.0, 24).reshape(2, 12),
}


def same(found: dict[str, NDArray], expected: dict[str, NDArray]) -> None:
    assert list(found) == list(expected)
    for name, array in expected.items():
        assert (found[name].dtype, found[name].shape) == (array.dtype, array.shape), name
        # Bytes, because NaN equals nothing and -0.0 equals 0.0.
        assert found[name].tobytes() == array.tobytes(), name


@given(arrays=NAMED_ARRAYS)
# The file is replaced by each example.
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_arrays_come_back(tmp_path: Path, arrays: dict[str, NDArray]) -> None:
    place = resolve(str(tmp_path / "file"))
    stamp = write_arrays(place, arrays)
    assert stamp.size == (tmp_path / "file").stat().st_size
    assert has_arrays(place, stamp.as_dict())
    same(read_arrays(place), arrays)


def test_views_are_written_as_they_read(tmp_path: Path) -> None:
    place = resolve(str(tmp_path / "file"))
    table = np.arange(60).reshape(6, 10)
    views = {"columns": table[:, 3:5], "transposed": table.T, "backwards": table[::-1, 0]}
    write_arrays(place, views)
    same(read_arrays(place), views)


def test_arrays_begin_at_cache_lines_and_cannot_be_written_to(tmp_path: Path) -> None:
    place = resolve(str(tmp_path / "file"))
    write_arrays(place, SAMPLE)
    for name in ("ids", "marks", "state"):
        array = read_arrays(place)[name]
        assert array.ctypes.data % 64 == 0
        with pytest.raises(ValueError, match="read-only"):
            array[...] = 0


def test_the_same_arrays_are_the_same_bytes(tmp_path: Path) -> None:
    stamps = [write_arrays(resolve(str(tmp_path / name)), SAMPLE) for name in ("a", "b")]
    assert stamps[0] == stamps[1]
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()


@pytest.mark.parametrize("content", [b"", b"PAR1", b"PAR1" + bytes(100), b"\x80\x04" * 50])
def test_foreign_files_are_refused(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "file"
    path.write_bytes(content)
    with pytest.raises(SparkrankError) as refused:
        read_arrays(resolve(str(path)))
    assert str(refused.value).startswith(f"{path}: expected a ")
    assert str(refused.value).endswith("; remove the work folder")


def test_truncated_files_are_refused(tmp_path: Path) -> None:
    """Wherever the cut is; only the padding behind the last array may be missing unnoticed."""
    path = tmp_path / "file"
    whole = resolve(str(path))
    stamp = write_arrays(whole, SAMPLE)
    data = path.read_bytes()
    needed = stamp.size - (-SAMPLE["state"].nbytes % 64)
    for length in [*range(1, 40), stamp.size // 2, needed - 1]:
        path.write_bytes(data[:length])
        with pytest.raises(SparkrankError, match=r"expected a .*; remove the work folder"):
            read_arrays(whole)
    path.write_bytes(data[:-1])
    assert not has_arrays(whole, stamp.as_dict())


def test_a_flipped_bit_is_noticed(tmp_path: Path) -> None:
    path = tmp_path / "file"
    place = resolve(str(path))
    stamp = write_arrays(place, SAMPLE).as_dict()
    data = path.read_bytes()
    for at in (0, 9, 20, len(data) // 2, len(data) - 1):
        for bit in (0, 7):
            flipped = bytearray(data)
            flipped[at] ^= 1 << bit
            path.write_bytes(flipped)
            assert not has_arrays(place, stamp)
    path.write_bytes(data)
    assert has_arrays(place, stamp)
    path.unlink()
    assert not has_arrays(place, stamp)


@contextmanager
def disk_of(n_bytes: int) -> Iterator[None]:
    """Writing a file beyond this size fails, as on a full disk: the kernel's limit, no stand-in."""
    before = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (n_bytes, before[1]))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, before)


@pytest.mark.parametrize("before", [None, SAMPLE])
def test_a_write_that_fails_leaves_what_was_there(tmp_path: Path, before: dict[str, NDArray] | None) -> None:
    folder = tmp_path / "below"
    place = resolve(str(folder / "file"))
    if before is not None:
        write_arrays(place, before)
    large = {"ids": np.arange(200_000)}
    with disk_of(100_000), pytest.raises(OSError, match="File too large"):
        write_arrays(place, large)
    if before is None:
        assert os.listdir(folder) == []
    else:
        assert os.listdir(folder) == ["file"]
        same(read_arrays(place), before)
    write_arrays(place, large)
    same(read_arrays(place), large)


def test_a_reader_keeps_the_file_it_opened(tmp_path: Path) -> None:
    """A second writer of the same name replaces the file; it does not change it under a reader."""
    place = resolve(str(tmp_path / "file"))
    write_arrays(place, {"x": np.zeros(50_000)})
    open_before = read_arrays(place)["x"]
    write_arrays(place, {"x": np.ones(50_000)})
    assert (open_before == 0.0).all()
    assert (read_arrays(place)["x"] == 1.0).all()


def test_static_files_are_parsed_once(tmp_path: Path) -> None:
    place = resolve(str(tmp_path / "file"))
    write_arrays(place, SAMPLE)
    first = read_static_arrays(place)
    same(first, SAMPLE)
    assert read_static_arrays(resolve(str(tmp_path / "file"))) is first


def test_a_store_holds_the_same_bytes(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from pyarrow.fs import _MockFileSystem

    store = _MockFileSystem()
    monkeypatch.setattr("sparkrank.places._open_filesystem", lambda root: store)
    remote = Place(uri="s3a://bucket/file", path="bucket/file")
    store.create_dir("bucket")
    stamp = write_arrays(remote, SAMPLE)
    same(read_arrays(remote), SAMPLE)
    assert has_arrays(remote, stamp.as_dict())
    monkeypatch.undo()
    assert write_arrays(resolve(str(tmp_path / "file")), SAMPLE) == stamp
