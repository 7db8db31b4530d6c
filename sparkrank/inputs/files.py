"""The files of an input, as Spark would list them, and their fingerprints."""

import dataclasses
import hashlib
import os
from collections.abc import Iterable
from typing import Any

import pyarrow.fs as pafs

from sparkrank.errors import InputRefused
from sparkrank.places import Place
from sparkrank.shown import one_line, shown_value

WHOLE_CONTENT_BYTES = 64 << 20
"""Files up to this size are fingerprinted by their whole content: hashing one takes about 0.1 s."""

_PIECE_BYTES = 8 << 20
_MAGIC = b"PAR1"


@dataclasses.dataclass(frozen=True, kw_only=True)
class DataFile:
    """A file that counts: its `name` below the input's folder (or its own name), parts joined by `/`.

    `path` is its name inside the pyarrow file system, `modified_ns` its time of change in nanoseconds.
    """

    name: str
    path: str
    bytes: int
    modified_ns: int

    @property
    def partition_keys(self) -> tuple[str, ...]:
        """The keys of the `key=value` folders that the file lies in, outermost first."""
        return tuple(part.partition("=")[0] for part in self.name.split("/")[:-1])


def data_files(source: str, place: Place) -> tuple[DataFile, ...]:
    """The files of a file or folder, in name order; hidden ones (`_` or `.` in front) are left out.

    `source` is the setting's name, for messages. Raises InputRefused where nothing is there, where the
    folder holds no file, and where its folders are not partition folders (`key=value`, the same keys for
    every file): Spark would leave such files out without a word.
    """
    where = f"{source} at {shown_value(str(place))}"
    try:
        root = place.filesystem.get_file_info(place.path)
        if root.type == pafs.FileType.File:
            return (_data_file(root, root.base_name),)
        if root.type != pafs.FileType.Directory:
            found = "nothing there" if root.type == pafs.FileType.NotFound else "something else"
            raise InputRefused(f"{where}: expected a file or folder, found {found}; check the path")
        below = place.filesystem.get_file_info(pafs.FileSelector(place.path, recursive=True))
    except OSError as error:
        raise InputRefused(
            f"{where}: expected a readable file or folder, found: {one_line(error)}; check the permissions"
        ) from None
    if place.is_local:
        _check_links(where, place.local_path)
    names = [(info, info.path[len(root.path.rstrip("/")) + 1 :]) for info in below]
    found_files = [
        _data_file(info, name)
        for info, name in names
        if info.type != pafs.FileType.Directory and not any(map(_is_hidden, name.split("/")))
    ]
    files = tuple(sorted(found_files, key=lambda file: file.name))
    if not files:
        raise InputRefused(f"{where}: expected at least one file, found an empty folder; check the path")
    _check_partitions(where, files)
    return files


def parquet_footer(filesystem: Any, file: DataFile) -> bytes:
    """The file's footer with its length and closing mark.

    Raises ValueError that says what was found where the file is empty, no Parquet, or cut short.
    """
    with filesystem.open_input_file(file.path) as handle:
        size = int(handle.size())
        head = bytes(handle.read(4))
        if size == 0:
            raise ValueError("an empty file")
        if head != _MAGIC:
            raise ValueError("a file of another format")
        handle.seek(max(0, size - 8))
        tail = bytes(handle.read(8))
        footer_bytes = int.from_bytes(tail[:4], "little")
        if size < 12 or tail[4:] != _MAGIC or footer_bytes + 12 > size:
            raise ValueError("a file that is cut short (its footer is missing)")
        handle.seek(size - 8 - footer_bytes)
        return bytes(handle.read(footer_bytes + 8))


def content_fingerprint(filesystem: Any, file: DataFile) -> str:
    """SHA-256 of the whole file, as hexadecimal digits."""
    digest = hashlib.sha256()
    with filesystem.open_input_stream(file.path, compression=None) as stream:
        while piece := stream.read(_PIECE_BYTES):
            digest.update(piece)
    return digest.hexdigest()


def footer_fingerprint(file: DataFile, footer: bytes) -> str:
    """SHA-256 of size, time of change and footer, for files too large (or too many) to read whole."""
    digest = hashlib.sha256(f"{file.bytes} {file.modified_ns} ".encode())
    digest.update(footer)
    return digest.hexdigest()


def folder_fingerprint(fingerprints: Iterable[tuple[str, str]]) -> str:
    """SHA-256 over (relative name, file fingerprint) pairs in name order."""
    digest = hashlib.sha256()
    for name, fingerprint in sorted(fingerprints):
        # Names may hold any character but these separators cannot stand in a path or a digest.
        digest.update(name.encode("utf-8", "surrogateescape") + b"\x00" + fingerprint.encode() + b"\x00")
    return digest.hexdigest()


def _data_file(info: Any, name: str) -> DataFile:
    return DataFile(name=name, path=info.path, bytes=int(info.size or 0), modified_ns=int(info.mtime_ns or 0))


def _is_hidden(part: str) -> bool:
    # Spark's own rule: `_key=value` is a partition folder, `x._COPYING_` an upload in progress.
    return (part.startswith("_") and "=" not in part) or part.startswith(".") or part.endswith("._COPYING_")


def _check_links(where: str, folder: str) -> None:
    """InputRefused for a link that leads nowhere: listings leave it out as if it had never been there."""
    for below, _, names in os.walk(folder):
        for name in names:
            path = os.path.join(below, name)
            if not os.path.exists(path):
                name_below = os.path.relpath(path, folder)
                raise InputRefused(
                    f"{where}: expected files that are there, found {shown_value(name_below)}, "
                    "a link that leads nowhere; repair or remove it"
                )


def _check_partitions(where: str, files: tuple[DataFile, ...]) -> None:
    first = files[0]
    for file in files:
        folders = file.name.split("/")[:-1]
        plain = [folder for folder in folders if not folder.partition("=")[0] or "=" not in folder]
        if plain:
            raise InputRefused(
                f"{where}: expected folders named key=value below it, found {shown_value(plain[0])}; "
                "move its files up or name the folder itself as the input"
            )
        if file.partition_keys != first.partition_keys:
            raise InputRefused(
                f"{where}: expected the same partition folders for every file, "
                f"found {shown_value(first.name)} beside {shown_value(file.name)}; make them alike"
            )
