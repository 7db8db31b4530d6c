"""How a published table is described in step records and manifests, and how those become JSON."""

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any


@dataclass(frozen=True, kw_only=True)
class FileEntry:
    """One Parquet file: path relative to the output, rows, bytes, SHA-256 of the bytes.

    The digest serves integrity only: Spark writes the same rows as other bytes each time.
    """

    path: str
    rows: int
    bytes: int
    digest: str


@dataclass(frozen=True, kw_only=True)
class TableEntry:
    """One table: its files in the order of its rows, and the digest of the ordered rows."""

    name: str
    files: tuple[FileEntry, ...]
    rows: int
    digest: str

    def as_dict(self) -> dict[str, Any]:
        """The entry as a manifest has it below the table's name."""
        files = [
            {"path": file.path, "rows": file.rows, "bytes": file.bytes, "digest": file.digest}
            for file in self.files
        ]
        return {"files": files, "rows": self.rows, "digest": self.digest}

    @staticmethod
    def from_dict(name: str, data: Mapping[str, Any]) -> "TableEntry":
        """The entry of a manifest or record; KeyError or TypeError where it is not one."""
        files = tuple(FileEntry(**file) for file in data["files"])
        return TableEntry(name=name, files=files, rows=data["rows"], digest=data["digest"])


def tables_as_dict(tables: Mapping[str, TableEntry]) -> dict[str, Any]:
    """Table entries by name, as manifests and records hold them."""
    return {name: entry.as_dict() for name, entry in tables.items()}


def tables_from_dict(data: Mapping[str, Any]) -> dict[str, TableEntry]:
    """The inverse of `tables_as_dict`."""
    return {name: TableEntry.from_dict(name, entry) for name, entry in data.items()}


def to_json(data: Mapping[str, Any]) -> bytes:
    """JSON for people and programs; ValueError for NaN and infinities, which JSON does not have."""
    return (json.dumps(data, indent=2, ensure_ascii=False, allow_nan=False) + "\n").encode()


def fingerprint_of(data: Any) -> str:
    """SHA-256 of any JSON-ready value, whatever the order of its keys: equal values, equal text."""
    text = json.dumps(data, sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()
