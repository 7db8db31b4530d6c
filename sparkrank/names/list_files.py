"""Reads a list of hosts from CSV or Parquet into entries, before anything is known about its names."""

import dataclasses
import hashlib
import math
import re
from collections.abc import Iterator
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.errors import InputRefused
from sparkrank.inputs.files import DataFile, content_fingerprint, data_files, folder_fingerprint
from sparkrank.inputs.parquet import column_type, read_schema
from sparkrank.names.rfc4180 import read_records
from sparkrank.names.slices import OTHER_SLICES
from sparkrank.places import Place
from sparkrank.shown import one_line, shown_value

_DECIMAL = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_COLUMNS = ("host", "slice", "weight")


@dataclasses.dataclass(frozen=True, kw_only=True, slots=True)
class Entry:
    """One row of a list. `row` counts from 1 as a spreadsheet shows it (a CSV header is row 1)."""

    row: int
    host: str | None
    slice: str | None
    weight: float


@dataclasses.dataclass(frozen=True, kw_only=True)
class ListFile:
    """The entries of a list in file order and the fingerprint of its content (SHA-256)."""

    entries: tuple[Entry, ...]
    fingerprint: str


def read_list_file(source: str, place: Place) -> ListFile:
    """The entries of a CSV file (RFC 4180, UTF-8), a Parquet file, or a folder of Parquet files.

    A missing, null or empty weight is 1; a missing, null or empty slice is None. Columns other than host,
    slice and weight are notes and ignored. Raises InputRefused, with the row, for what is not such a list.
    """
    where = f"{source} at {shown_value(str(place))}"
    files = data_files(source, place)
    if len(files) == 1 and files[0].path == place.path and not _is_parquet(source, place, files[0]):
        try:
            content = place.read_bytes()
        except OSError as error:
            raise InputRefused(
                f"{where}: expected a readable file, found: {one_line(error)}; check the permissions"
            ) from None
        entries = tuple(_csv_entries(where, content))
        return ListFile(entries=entries, fingerprint=hashlib.sha256(content).hexdigest())
    entries = tuple(_parquet_entries(source, where, place, files))
    fingerprint = folder_fingerprint(
        (file.name, content_fingerprint(place.filesystem, file)) for file in files
    )
    return ListFile(entries=entries, fingerprint=fingerprint)


def _is_parquet(source: str, place: Place, file: DataFile) -> bool:
    if file.name.lower().endswith(".parquet"):
        return True
    try:
        with place.filesystem.open_input_file(file.path) as handle:
            return bytes(handle.read(4)) == b"PAR1"
    except OSError as error:
        raise InputRefused(
            f"{source} at {shown_value(str(place))}: expected a readable file, found: {one_line(error)}; "
            "check the permissions"
        ) from None


def _csv_entries(where: str, content: bytes) -> Iterator[Entry]:
    try:
        # A byte order mark is what spreadsheets write; it is no part of the first name.
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputRefused(
            f"{where}: expected UTF-8, found byte {error.start + 1} to be none; save the list as UTF-8"
        ) from None
    records = read_records(text)
    try:
        header = next(records, (1, []))[1]
        places = _header_places(where, header)
        for row, record in records:
            if len(record) != len(header):
                raise InputRefused(
                    f"{where}: expected {len(header)} fields in row {row} as in the header, "
                    f"found {len(record)}; correct the row"
                )
            host, slice_name, weight = (record[places[name]] if name in places else "" for name in _COLUMNS)
            yield Entry(
                row=row,
                host=host,
                slice=_checked_slice(where, row, slice_name),
                weight=_text_weight(where, row, weight),
            )
    except ValueError as error:
        raise InputRefused(f"{where}: expected CSV as in RFC 4180, found {error}; correct the row") from None


def _header_places(where: str, header: list[str]) -> dict[str, int]:
    for name in _COLUMNS:
        if header.count(name) > 1:
            raise InputRefused(
                f"{where}: expected one column {name}, found {header.count(name)}; rename the others"
            )
    if "host" not in header:
        found = shown_value(", ".join(header)) or "an empty file"
        raise InputRefused(
            f"{where}: expected a header row with a column host, found {found}; "
            "begin the list with: host or host,slice,weight"
        )
    return {name: header.index(name) for name in _COLUMNS if name in header}


def _parquet_entries(source: str, where: str, place: Place, files: tuple[DataFile, ...]) -> Iterator[Entry]:
    row = 0
    for file in files:
        schema, _, _ = read_schema(source, place, file)
        present = _parquet_columns(f"{where}: {shown_value(file.name)}", schema)
        try:
            with place.filesystem.open_input_file(file.path) as handle:
                table = pq.ParquetFile(handle).read(columns=present)
        except (OSError, ValueError, pa.ArrowException) as error:
            raise InputRefused(
                f"{where}: {shown_value(file.name)}: expected a readable Parquet file, "
                f"found: {one_line(error)}; write it again"
            ) from None
        nothing = [None] * table.num_rows
        values = [table.column(name).to_pylist() if name in present else nothing for name in _COLUMNS]
        for host, slice_name, weight in zip(*values, strict=True):
            row += 1
            yield Entry(
                row=row,
                host=host,
                slice=_checked_slice(where, row, slice_name or ""),
                weight=1.0 if weight is None else _checked_weight(where, row, float(weight), str(weight)),
            )


def _parquet_columns(where: str, schema: Any) -> list[str]:
    """The list's columns that the file has; InputRefused where host is missing or a type is wrong."""
    present = []
    for name in _COLUMNS:
        if schema.names.count(name) > 1:
            raise InputRefused(
                f"{where}: expected one column {name}, found {schema.names.count(name)}; rename the others"
            )
        if name not in schema.names:
            continue
        found = column_type(schema.field(name).type)
        if name == "weight":
            arrow_type = schema.field(name).type
            fits = pa.types.is_integer(arrow_type) or pa.types.is_floating(arrow_type)
        else:
            fits = found == "text"
        # A column without any value is written as "null" by some writers.
        if not fits and not (found == "null" and name != "host"):
            expected = "a number" if name == "weight" else "text"
            raise InputRefused(
                f"{where}: expected column {name} to be {expected}, found {shown_value(found)}; "
                "convert the column"
            )
        present.append(name)
    if "host" not in present:
        found = ", ".join(map(shown_value, schema.names[:20])) or "no columns"
        raise InputRefused(f"{where}: expected a column host (text), found {found}; name the column host")
    return present


def _checked_slice(where: str, row: int, name: str) -> str | None:
    if name != shown_value(name) or name == OTHER_SLICES:
        raise InputRefused(
            f"{where}: expected a slice name of at most 200 characters without control characters, "
            f'other than "{OTHER_SLICES}", found "{shown_value(name)}" in row {row}; rename the slice'
        )
    return name or None


def _text_weight(where: str, row: int, text: str) -> float:
    if text == "":
        return 1.0
    number = float(text) if _DECIMAL.fullmatch(text) else math.nan
    return _checked_weight(where, row, number, text)


def _checked_weight(where: str, row: int, weight: float, text: str) -> float:
    if not (math.isfinite(weight) and weight > 0):
        raise InputRefused(
            f'{where}: expected a weight above 0, found "{shown_value(text)}" in row {row}; '
            "correct it or leave it empty for 1"
        )
    return weight
