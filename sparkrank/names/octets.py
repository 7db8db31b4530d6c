"""Arrow strings as numpy bytes and back, without copies."""

import numpy as np
import pyarrow as pa
from numpy.typing import NDArray


def octets_of(values: pa.Array) -> tuple[NDArray[np.uint8], NDArray[np.int64]]:
    """The bytes of a string or binary array, shape (n_bytes,), and its n + 1 offsets.

    Value i is `data[offsets[i]:offsets[i + 1]]`; the bytes of a null mean nothing. Raises TypeError for an
    array of another type.
    """
    kinds = pa.types
    if kinds.is_string(values.type) or kinds.is_binary(values.type):
        width = "i4"
    elif kinds.is_large_string(values.type) or kinds.is_large_binary(values.type):
        width = "i8"
    else:
        raise TypeError(f"names: expected an array of strings or bytes, found {values.type}")
    if len(values) == 0:
        return np.empty(0, dtype=np.uint8), np.zeros(1, dtype=np.int64)
    _, offsets_buffer, data_buffer = values.buffers()
    offsets = np.frombuffer(offsets_buffer, dtype=width, count=values.offset + len(values) + 1)
    data = np.empty(0, np.uint8) if data_buffer is None else np.frombuffer(data_buffer, dtype=np.uint8)
    return data, offsets[values.offset :].astype(np.int64)


def string_array(
    data: NDArray[np.uint8], lengths: NDArray[np.int64], valid: NDArray[np.bool_] | None = None
) -> pa.StringArray:
    """The strings of `lengths` bytes, shape (n,), that lie one after the other in `data` (UTF-8).

    They are null where `valid`, shape (n,), is false. Raises ValueError for more than 2 GiB.
    """
    offsets = np.zeros(len(lengths) + 1, dtype=np.int64)
    np.cumsum(lengths, out=offsets[1:])
    if offsets[-1] > np.iinfo(np.int32).max:
        raise ValueError(f"names: expected at most 2 GiB of names in one call, found {offsets[-1]:,} bytes")
    mask = None if valid is None or valid.all() else pa.array(valid).buffers()[1]
    buffers = [mask, pa.py_buffer(offsets.astype(np.int32)), pa.py_buffer(data)]
    return pa.Array.from_buffers(pa.string(), len(lengths), buffers)
