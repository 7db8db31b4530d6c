"""Footers of Parquet inputs held against the columns and types an input must have."""

import dataclasses
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import pyarrow as pa
import pyarrow.parquet as pq

from sparkrank.errors import InputRefused
from sparkrank.inputs.attributes import attribute_kinds
from sparkrank.inputs.files import (
    WHOLE_CONTENT_BYTES,
    DataFile,
    content_fingerprint,
    data_files,
    folder_fingerprint,
    footer_fingerprint,
    parquet_footer,
)
from sparkrank.places import Place, resolve
from sparkrank.shown import one_line, shown_value

MANY_FILES = 1000
"""Above so many files only footers are read, or the check would take longer than the scan it precedes."""

_READERS = 8  # files read at once: enough to hide an object store's latency, few enough for any laptop

_TEXT = "text"
_INTEGERS = (
    "int8",
    "int16",
    "int32",
    "int64",
    "uint8",
    "uint16",
    "uint32",
)  # what a signed 64-bit column holds


@dataclasses.dataclass(frozen=True, kw_only=True)
class InputFile:
    """A checked file: its name below the input, its size, its rows, and its fingerprint (SHA-256)."""

    name: str
    bytes: int
    rows: int
    fingerprint: str


@dataclasses.dataclass(frozen=True, kw_only=True)
class InputFacts:
    """What is known about an input before it is scanned.

    `columns` are those of the program's that it has, `attributes` the others if they are handed on, and
    `partition_keys` those of its `key=value` folders.
    `cautions` are sentences for the log and the manifest, such as that only footers were fingerprinted.
    """

    source: str
    place: Place
    files: tuple[InputFile, ...]
    rows: int
    bytes: int
    columns: tuple[str, ...]
    partition_keys: tuple[str, ...]
    fingerprint: str
    cautions: tuple[str, ...]
    attributes: tuple[str, ...] = ()

    @property
    def has_links(self) -> bool:
        """Whether the edges count links; without, a row is one link."""
        return "links" in self.columns

    @property
    def has_rel(self) -> bool:
        """Whether the edges say what kind of link they are."""
        return "rel" in self.columns


@dataclasses.dataclass(frozen=True, kw_only=True)
class _Column:
    name: str
    expected: str
    types: tuple[str, ...]
    required: bool


_EDGES = (
    _Column(name="src", expected="text", types=(_TEXT,), required=True),
    _Column(name="dst", expected="text", types=(_TEXT,), required=True),
    _Column(name="links", expected="a whole number", types=_INTEGERS, required=False),
    _Column(name="rel", expected="text", types=(_TEXT,), required=False),
)
_HOSTS = (_Column(name="host", expected="text", types=(_TEXT,), required=True),)


def check_edges(path: str) -> InputFacts:
    """The facts about the edges at a path or URI; InputRefused where they cannot be used."""
    return _check("input.edges", resolve(path), _EDGES)


def check_hosts(path: str) -> InputFacts:
    """The facts about the list of further hosts at a path or URI; InputRefused where it cannot be used."""
    return _check("input.hosts", resolve(path), _HOSTS, with_attributes=True)


def read_schema(source: str, place: Place, file: DataFile) -> tuple[Any, int, bytes]:
    """Arrow schema, row count and footer of one Parquet file; InputRefused where it is not readable."""
    where = f"{source} at {shown_value(str(place))}: {shown_value(file.name)}"
    try:
        footer = parquet_footer(place.filesystem, file)
        with place.filesystem.open_input_file(file.path) as handle:
            parquet = pq.ParquetFile(handle)
            return parquet.schema_arrow, int(parquet.metadata.num_rows), footer
    except (OSError, ValueError, pa.ArrowException) as error:
        raise InputRefused(
            f"{where}: expected a readable Parquet file, found: {one_line(error)}; "
            "write it again, or hide it with a name that begins with _"
        ) from None


def column_type(arrow_type: Any) -> str:
    """The type's name in messages and comparisons: every way of storing text is "text"."""
    value_type = arrow_type.value_type if pa.types.is_dictionary(arrow_type) else arrow_type
    if (
        pa.types.is_string(value_type)
        or pa.types.is_large_string(value_type)
        or pa.types.is_string_view(value_type)
    ):
        return _TEXT
    return str(value_type)


def _check(
    source: str, place: Place, columns: tuple[_Column, ...], *, with_attributes: bool = False
) -> InputFacts:
    where = f"{source} at {shown_value(str(place))}"
    listed = data_files(source, place)
    footers_only = len(listed) > MANY_FILES
    own = tuple(column.name for column in columns)

    def check_file(file: DataFile) -> tuple[InputFile, dict[str, str]]:
        schema, rows, footer = read_schema(source, place, file)
        here = f"{where}: {shown_value(file.name)}"
        types = _column_types(here, schema, columns)
        if with_attributes:
            types |= attribute_kinds(here, schema, own)
        if footers_only or file.bytes > WHOLE_CONTENT_BYTES:
            fingerprint = footer_fingerprint(file, footer)
        else:
            fingerprint = content_fingerprint(place.filesystem, file)
        return InputFile(name=file.name, bytes=file.bytes, rows=rows, fingerprint=fingerprint), types

    keys = listed[0].partition_keys
    _check_keys(where, keys, columns)
    with ThreadPoolExecutor(max_workers=_READERS) as readers:
        # In name order, so that of several bad files the same one is named each time.
        checked = list(readers.map(check_file, listed))
    files = tuple(file for file, _ in checked)
    types = checked[0][1]
    for file, other in checked:
        if other != types:
            _refuse_drift(where, (files[0].name, types), (file.name, other))
    rows = sum(file.rows for file in files)
    if rows == 0:
        raise InputRefused(f"{where}: expected at least one row, found none; check the path")
    return InputFacts(
        source=source,
        place=place,
        files=files,
        rows=rows,
        bytes=sum(file.bytes for file in files),
        columns=tuple(name for name in types if name in own),
        attributes=tuple(name for name in types if name not in own),
        partition_keys=keys,
        fingerprint=folder_fingerprint((file.name, file.fingerprint) for file in files),
        cautions=_cautions(source, files, footers_only),
    )


def _column_types(where: str, schema: Any, columns: tuple[_Column, ...]) -> dict[str, str]:
    """The types of the program's columns that the file has; InputRefused for any that cannot be used."""
    types = {}
    for column in columns:
        alike = [name for name in schema.names if name.lower() == column.name]
        if alike not in ([], [column.name]):
            # Spark does not tell names apart by case and would read one or fail.
            raise InputRefused(
                f"{where}: expected one column {column.name}, found {', '.join(map(shown_value, alike))}; "
                "rename or remove columns"
            )
        if not alike:
            if column.required:
                found = ", ".join(map(shown_value, schema.names[:20])) or "no columns"
                raise InputRefused(
                    f"{where}: expected a column {column.name} ({column.expected}), found {found}; "
                    f"name the column {column.name}"
                )
            continue
        found_type = column_type(schema.field(column.name).type)
        if found_type not in column.types:
            raise InputRefused(
                f"{where}: expected column {column.name} to be {column.expected}, "
                f"found {shown_value(found_type)}; convert the column"
            )
        types[column.name] = found_type
    return types


def _check_keys(where: str, keys: tuple[str, ...], columns: tuple[_Column, ...]) -> None:
    # Spark lets the folder's value win over the file's column of the same name.
    clash = [key for key in keys if key.lower() in [column.name for column in columns]]
    if clash:
        raise InputRefused(
            f"{where}: expected partition folders that name no column of the input, found {clash[0]}=…; "
            "rename the folders"
        )


def _refuse_drift(where: str, first: tuple[str, dict[str, str]], other: tuple[str, dict[str, str]]) -> None:
    name = next(name for name in (*first[1], *other[1]) if first[1].get(name) != other[1].get(name))
    described = [f"{types.get(name, 'none')} in {shown_value(file)}" for file, types in (first, other)]
    raise InputRefused(
        f"{where}: expected column {name} alike in every file, found {described[0]} and {described[1]}; "
        "write the files with one schema"
    )


def _cautions(source: str, files: tuple[InputFile, ...], footers_only: bool) -> tuple[str, ...]:
    if footers_only:
        return (
            f"{source}: {len(files):,} files, more than {MANY_FILES:,}: "
            "fingerprinted by size, time of change and footer, not by content",
        )
    large = sum(file.bytes > WHOLE_CONTENT_BYTES for file in files)
    if large:
        return (
            f"{source}: {large:,} of {len(files):,} files are larger than {WHOLE_CONTENT_BYTES >> 20} MB: "
            "fingerprinted by size, time of change and footer, not by content",
        )
    return ()
