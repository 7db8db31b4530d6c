"""Work files: named arrays in one file, mapped into memory where the disk is local.

Layout: 8 bytes of magic, 8 bytes of header length, a JSON header (name, dtype, shape, offset of each
array), then the arrays, each at a multiple of 64 bytes.  Nothing in a file is executable, and a file
is either whole under its name or not there.
"""

from __future__ import annotations

import functools
import json
import mmap
import os
import secrets
import zlib
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.errors import SparkrankError
from sparkrank.places import Place

_MAGIC = b"hostgrid"
_ALIGNMENT_BYTES = 64  # a cache line: no array shares one with its neighbour


@dataclass(frozen=True, kw_only=True)
class ArrayStamp:
    """Size in bytes and CRC-32 of a work file as it was written."""

    size: int
    crc32: int

    def as_dict(self) -> dict[str, int]:
        return asdict(self)


def write_arrays(place: Place, arrays: Mapping[str, NDArray[Any]]) -> ArrayStamp:
    """Writes the arrays as one file, under a temporary name first where the disk is local."""
    pieces = _file_pieces(arrays)
    size = sum(len(piece) for piece in pieces)
    checksum = 0
    for piece in pieces:
        checksum = zlib.crc32(piece, checksum)
    if place.is_local:
        _write_local(place.local_path, pieces)
    else:
        place.write_bytes(b"".join(pieces))
    return ArrayStamp(size=size, crc32=checksum)


def read_arrays(place: Place) -> dict[str, NDArray[Any]]:
    """The arrays of one file, read-only; views of the mapped file where the disk is local."""
    buffer: mmap.mmap | bytes
    if place.is_local:
        with open(place.local_path, "rb") as file:
            # An empty file, as a machine's crash can leave it, cannot be mapped: `_parse` refuses it.
            empty = os.fstat(file.fileno()).st_size == 0
            buffer = b"" if empty else mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ)
    else:
        buffer = place.read_bytes()
    return _parse(buffer, str(place))


@functools.lru_cache(maxsize=256)
def read_static_arrays(place: Place) -> dict[str, NDArray[Any]]:
    """As ``read_arrays`` for files that never change: parsed once a worker process."""
    return read_arrays(place)


def narrow(counts: NDArray[Any]) -> NDArray[Any]:
    """The same counts (>= 0) in the fewest bytes; most hosts have small ones."""
    return counts.astype(np.min_scalar_type(int(counts.max(initial=0))))


def has_arrays(place: Place, stamp: Mapping[str, int]) -> bool:
    """Whether the file is there with the size and the checksum it was written with."""
    if place.size() != stamp["size"]:
        return False
    checksum = 0
    with place.filesystem.open_input_stream(place.path, compression=None) as stream:
        while piece := stream.read(8 << 20):
            checksum = zlib.crc32(piece, checksum)
    return checksum == stamp["crc32"]


def _file_pieces(arrays: Mapping[str, NDArray[Any]]) -> list[memoryview]:
    header: dict[str, dict[str, object]] = {}
    offset = 0
    body: list[memoryview] = []
    for name, array in arrays.items():
        data = np.ascontiguousarray(array)
        header[name] = {"dtype": data.dtype.str, "shape": list(data.shape), "offset": offset}
        padding = -data.nbytes % _ALIGNMENT_BYTES
        if data.nbytes:
            body.append(data.data.cast("B"))
        body.append(memoryview(bytes(padding)))
        offset += data.nbytes + padding
    text = json.dumps(header).encode()
    text += b" " * (-(len(text) + 16) % _ALIGNMENT_BYTES)
    return [memoryview(_MAGIC + len(text).to_bytes(8, "little") + text), *body]


def _write_local(path: str, pieces: list[memoryview]) -> None:
    os.makedirs(os.path.dirname(path), exist_ok=True)
    temporary = os.path.join(os.path.dirname(path), f".{os.path.basename(path)}.{secrets.token_hex(6)}.tmp")
    try:
        with open(temporary, "wb") as file:
            for piece in pieces:
                file.write(piece)
        os.replace(temporary, path)
    except BaseException:
        if os.path.lexists(temporary):
            os.unlink(temporary)
        raise


def _parse(buffer: mmap.mmap | bytes, shown: str) -> dict[str, NDArray[Any]]:
    if bytes(buffer[:8]) != _MAGIC:
        raise SparkrankError(f"{shown}: expected a work file, found other content; remove the work folder")
    header_bytes = int.from_bytes(buffer[8:16], "little")
    start = 16 + header_bytes
    try:
        return {
            name: np.frombuffer(
                buffer, entry["dtype"], int(np.prod(entry["shape"], dtype=np.int64)), start + entry["offset"]
            ).reshape(entry["shape"])
            if 0 not in entry["shape"]
            else np.empty(entry["shape"], entry["dtype"])
            for name, entry in json.loads(buffer[16:start]).items()
        }
    except ValueError as error:
        raise SparkrankError(
            f"{shown}: expected a whole work file, found {len(buffer)} bytes ({error}); "
            "remove the work folder"
        ) from error
