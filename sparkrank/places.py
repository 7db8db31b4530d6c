"""Places: files and folders under the one name that both Spark and pyarrow understand.

Spark reads and writes tables by URI, pyarrow everything else (locks, records, manifests, blocks)
by a path inside one of its file systems. `resolve` is the only code that knows how the two relate;
what one of them cannot reach is refused here, by name, before work starts.
"""

import functools
import hashlib
import os
import secrets
import shutil
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any
from urllib.parse import unquote, urlsplit

import pyarrow.fs as pafs

from sparkrank.errors import ConfigError

# Schemes as Spark spells them. pyarrow knows S3 as s3, Spark's own client as s3a.
_STORES = ("s3a", "gs", "abfss", "hdfs")
_SPELLINGS = {"s3": "s3a", **{scheme: scheme for scheme in _STORES}}
# Stores without folders: a folder is there as soon as a file below it is.
_FLAT = ("s3a", "gs", "abfss")
# Spark reads these in a path as a pattern, and would write beside what it later reads.
_PATTERN_CHARACTERS = "*?[]{}\\"
_PIECE_BYTES = 8 << 20  # read size of streamed checksums; large enough for one object-store range


@dataclass(frozen=True, kw_only=True)
class FileStamp:
    """What a file was when it was written: size in bytes and SHA-256 as hexadecimal digits."""

    size: int
    checksum: str


@dataclass(frozen=True, kw_only=True)
class FoundFile:
    """A file below a folder: its name relative to the folder, parts joined by `/`, and its size."""

    name: str
    size: int


@dataclass(frozen=True, kw_only=True)
class Place:
    """A file or folder. It pickles as two strings; each process opens its own file system.

    `uri` is what Spark is given. `path` is the same place inside `filesystem`, for pyarrow.
    """

    uri: str
    path: str

    def __str__(self) -> str:
        return self.path if self.is_local else self.uri

    @property
    def is_local(self) -> bool:
        """Whether this is on a mounted file system, where rename and flock hold."""
        return self.uri.startswith("file:")

    @property
    def filesystem(self) -> Any:
        """The pyarrow file system; ConfigError where it cannot be opened."""
        return _open_filesystem(_root(self.uri))

    @property
    def local_path(self) -> str:
        """The path for `open` and `mmap`; ConfigError for a place that is not mounted."""
        if not self.is_local:
            raise ConfigError(f"{self.uri}: expected a local path here, found a remote place")
        return self.path

    def child(self, *parts: str) -> "Place":
        """The place below this one; each part is one name, never a path of its own."""
        for part in parts:
            _check_part(part)
        below = "/".join(parts)
        if self.is_local:
            return _local(_join(self.path, below))
        return Place(uri=_join(self.uri, below), path=_join(self.path, below))

    def below(self, name: str) -> "Place":
        """The place of a relative `name` whose parts are joined by `/`, as records keep it."""
        return self.child(*name.split("/"))

    def exists(self) -> bool:
        if self.is_local:
            return os.path.lexists(self.path)
        return bool(self.filesystem.get_file_info(self.path).type != pafs.FileType.NotFound)

    def size(self) -> int | None:
        """Bytes of the file; None where there is none."""
        info = self.filesystem.get_file_info(self.path)
        return int(info.size) if info.type == pafs.FileType.File else None

    def read_bytes(self) -> bytes:
        """The whole file; FileNotFoundError where there is none."""
        with self.filesystem.open_input_file(self.path) as file:
            return bytes(file.read())

    def write_bytes(self, data: bytes | bytearray | memoryview) -> FileStamp:
        """Replace the file as a whole; no reader ever sees a part of it.

        On a mounted file system the bytes go to a temporary name, to the disk, then to the final
        name; an object store's put is whole by itself.
        """
        view = memoryview(data).cast("B")
        if self.is_local:
            _replace_local(self.path, view)
        else:
            if not self.uri.startswith(_FLAT):
                self.filesystem.create_dir(_parent(self.path), recursive=True)
            with self.filesystem.open_output_stream(self.path, compression=None) as stream:
                stream.write(view)
        return FileStamp(size=view.nbytes, checksum=hashlib.sha256(view).hexdigest())

    def stamp(self) -> FileStamp:
        """Size and checksum of the file as it is now, read in pieces."""
        digest, size = hashlib.sha256(), 0
        with self.filesystem.open_input_stream(self.path, compression=None) as stream:
            while piece := stream.read(_PIECE_BYTES):
                digest.update(piece)
                size += len(piece)
        return FileStamp(size=size, checksum=digest.hexdigest())

    def delete(self) -> None:
        """Remove the file; that it is gone already is no error."""
        try:
            self.filesystem.delete_file(self.path)
        except FileNotFoundError:
            return

    def delete_tree(self) -> None:
        """Remove the folder and everything below it; that it is gone already is no error."""
        if self.is_local:
            if os.path.isdir(self.path):
                shutil.rmtree(self.path)
        elif self.exists():
            self.filesystem.delete_dir(self.path)

    def make_dir(self) -> None:
        """Create the folder and its parents; nothing to do on stores without folders."""
        if not self.uri.startswith(_FLAT):
            self.filesystem.create_dir(self.path, recursive=True)

    def list_files(self) -> list[FoundFile]:
        """All files below the folder in name order; none where there is no folder."""
        return sorted(
            (
                FoundFile(name=info.path[len(self.path.rstrip("/")) + 1 :], size=int(info.size))
                for info in self._select(recursive=True)
                if info.type == pafs.FileType.File
            ),
            key=lambda file: file.name,
        )

    def list_folders(self) -> list[str]:
        """Names of the folders directly below, in order; none where there is no folder."""
        found = self._select(recursive=False)
        return sorted(info.base_name for info in found if info.type == pafs.FileType.Directory)

    def _select(self, *, recursive: bool) -> Iterable[Any]:
        selector = pafs.FileSelector(self.path, recursive=recursive, allow_not_found=True)
        found: Iterable[Any] = self.filesystem.get_file_info(selector)
        return found


def resolve(uri_or_path: str) -> Place:
    """The place of a local path, a `file:` URI or a URI of a known store.

    A relative path counts from the working folder. ConfigError names what cannot be a place:
    an unknown scheme, a missing bucket, characters that Spark reads as a pattern, `..` in a URI.
    """
    _check_characters(uri_or_path)
    scheme, found, rest = uri_or_path.partition(":")
    if not found or "/" in scheme:
        return _local(os.path.abspath(uri_or_path))
    if scheme.lower() == "file":
        return _local_from_uri(uri_or_path)
    spelled = _SPELLINGS.get(scheme.lower())
    if spelled is None:
        raise ConfigError(
            f"{uri_or_path}: expected a local path or one of file:, s3:, s3a:, gs:, abfss:, hdfs:; "
            f"found the scheme {scheme!r}; use a place that Spark and pyarrow both reach"
        )
    authority, _, below = rest.removeprefix("//").partition("/")
    if not rest.startswith("//") or not authority:
        raise ConfigError(
            f"{uri_or_path}: expected {scheme}://<bucket, container or name node>/<path>; found no such name"
        )
    if spelled == "abfss" and "@" not in authority:
        raise ConfigError(
            f"{uri_or_path}: expected abfss://<container>@<account>.dfs.core.windows.net/<path>; "
            "found no container"
        )
    if spelled != "abfss" and "@" in authority:
        # What stands before the @ may be a secret: not repeated.
        raise ConfigError(f"{scheme}://…: expected a name without `@`; keep credentials out of paths")
    parts = [part for part in below.split("/") if part]
    if "." in parts or ".." in parts:
        raise ConfigError(f"{uri_or_path}: expected a plain path; found `.` or `..`; write it out")
    top = "/" if spelled == "hdfs" else authority.partition("@")[0]
    place = Place(uri=f"{spelled}://{authority}", path=top)
    return place.child(*parts) if parts else place


def _local(path: str) -> Place:
    # Spark takes the text after the scheme literally: quoting a blank would name another file.
    return Place(uri="file://" + path, path=path)


def _local_from_uri(uri: str) -> Place:
    split = urlsplit(uri)
    if split.netloc not in ("", "localhost") or split.query or split.fragment:
        raise ConfigError(f"{uri}: expected file:///<absolute path>; found a host, a query or a fragment")
    path = unquote(split.path)
    _check_characters(path)
    if not path.startswith("/"):
        raise ConfigError(f"{uri}: expected file:///<absolute path>; found a relative path")
    return _local(os.path.normpath("/" + path.lstrip("/")))


def _check_characters(text: str) -> None:
    if not text:
        raise ConfigError("a path is empty: expected a local path or a URI")
    shown = text.encode("unicode_escape").decode("ascii")
    if any(ord(char) < 32 or ord(char) == 127 for char in text):
        raise ConfigError(f"{shown}: expected a path without control characters; rename it")
    for char in _PATTERN_CHARACTERS:
        if char in text:
            raise ConfigError(
                f"{shown}: expected a plain path; found {char!r}, a pattern to Spark; rename it"
            )


def _check_part(part: str) -> None:
    if part in ("", ".", "..") or "/" in part:
        raise ConfigError(f"{part!r}: expected the name of one file or folder; found a path")
    _check_characters(part)


def _join(folder: str, below: str) -> str:
    return folder.rstrip("/") + "/" + below


def _parent(path: str) -> str:
    return path.rpartition("/")[0] or "/"


def _root(uri: str) -> str:
    """Scheme and authority, which is all that a file system depends on."""
    scheme, _, rest = uri.partition("://")
    return f"{scheme}://{rest.partition('/')[0]}"


@functools.lru_cache(maxsize=64)
def _open_filesystem(root: str) -> Any:
    """One file system a process and root; opening S3 asks the network for the bucket's region."""
    if root.startswith("file:"):
        return pafs.LocalFileSystem()
    try:
        filesystem, _ = pafs.FileSystem.from_uri(root.replace("s3a://", "s3://", 1) + "/")
    except (OSError, ValueError, NotImplementedError, ImportError) as error:
        raise ConfigError(
            f"{root}: expected a store that pyarrow reaches; found {str(error).splitlines()[0][:200]}; "
            "check its credentials, endpoint and client libraries"
        ) from error
    return filesystem


def _replace_local(path: str, view: memoryview) -> None:
    folder = os.path.dirname(path)
    os.makedirs(folder, exist_ok=True)
    temporary = os.path.join(folder, f".{os.path.basename(path)}.{secrets.token_hex(6)}.tmp")
    try:
        with open(temporary, "wb") as file:
            file.write(view)
            file.flush()
            os.fsync(file.fileno())
        os.replace(temporary, path)
    except BaseException:
        if os.path.lexists(temporary):
            os.unlink(temporary)
        raise
    # The new name is on the disk only when its folder is.
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
