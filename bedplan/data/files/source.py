"""The bytes of a file a planner brings: a path, an upload or bytes, with its name and its fingerprint."""

from __future__ import annotations

import hashlib
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING, BinaryIO, TypeAlias

import pyarrow as pa

from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Iterator

FileLike: TypeAlias = str | Path | bytes | BinaryIO

LARGEST_FILE_BYTES = 4 * 2**30
HEAD_BYTES = 256 * 1024
BLOCK_BYTES = 2**20
# The first bytes of files that are often given a table's name by mistake.
OTHER_KINDS = (
    (b"\x89PNG", "a picture (PNG)"),
    (b"\xff\xd8\xff", "a picture (JPEG)"),
    (b"GIF8", "a picture (GIF)"),
    (b"BM\x00", "a picture (BMP)"),
    (b"%PDF", "a PDF document"),
    (b"\xd0\xcf\x11\xe0", "an old Excel workbook (.xls) or another old Office file"),
    (b"{\\rtf", "a text document (RTF)"),
    (b"\x1f\x8b", "a compressed file (gzip)"),
    (b"7z\xbc\xaf", "a compressed file (7z)"),
    (b"Rar!", "a compressed file (RAR)"),
    (b"SQLite format 3", "a database"),
)


@dataclass(frozen=True, slots=True)
class SourceFile:
    """One file as it came: its name, and its bytes, ``held`` here or still at its ``path``.

    From a path they are read block by block, so that a large file is never in memory as a whole.
    """

    name: str
    held: bytes = b""
    path: Path | None = None
    digest: Future[str] | None = None

    @property
    def size(self) -> int:
        """How many bytes are there?"""
        return self.path.stat().st_size if self.path else len(self.held)

    @property
    def content(self) -> bytes:
        """All bytes."""
        return self.path.read_bytes() if self.path else self.held

    @property
    def head(self) -> bytes:
        """The first bytes, enough to tell what kind of file it is."""
        return bytes(self.block(0, HEAD_BYTES))

    @property
    def fingerprint(self) -> str:
        """The SHA-256 of the bytes, worked out while the file is read."""
        return self.digest.result() if self.digest else ""

    def begins_with(self, *starts: bytes) -> bool:
        """Are these the first bytes?"""
        return bytes(self.block(0, max(map(len, starts)))).startswith(starts)

    def block(self, first: int, size: int = BLOCK_BYTES) -> bytes | memoryview:
        """Return some of the bytes."""
        if self.path is None:
            return memoryview(self.held)[first : first + size]
        with self.path.open("rb") as opened:
            opened.seek(first)
            return opened.read(size)

    def blocks(self) -> Iterator[bytes | memoryview]:
        """Return the bytes, one block after the other."""
        return (self.block(first) for first in range(0, self.size, BLOCK_BYTES))

    def stream(self, first: int) -> pa.NativeFile:
        """Return the bytes from ``first`` on, to read one after the other."""
        stream = pa.BufferReader(self.held) if self.path is None else pa.OSFile(str(self.path))
        stream.seek(first)
        return stream


def open_source(source: FileLike, name: str | None = None) -> SourceFile:
    """What is in this file? Bytes of a path, an upload or a buffer, refused in one sentence if they can't be a table.

    Raises:
        UnreadableRecords: the file is missing, empty, too large, or plainly something else (a picture, a PDF).
    """
    given = name or _name_of(source)
    file = _at_path(Path(source), given) if isinstance(source, str | Path) else SourceFile(given, _bytes_of(source))
    if not file.head.strip() and all(bytes(block).isspace() for block in file.blocks()):
        raise UnreadableRecords([f"{given} is empty: export it again and check that it has rows."])
    if file.size > LARGEST_FILE_BYTES:
        raise UnreadableRecords(
            [f"{given} holds {file.size / 2**30:.1f} GB, more than this program reads at once (4 GB): split it."]
        )
    for start, kind in OTHER_KINDS:
        if file.head.startswith(start):
            raise UnreadableRecords(
                [f"{given} is {kind}, not a table: export the table as CSV, Excel (.xlsx) or Parquet."]
            )
    beside = ThreadPoolExecutor(1)
    digest = beside.submit(_fingerprint, file)
    beside.shutdown(wait=False)
    return replace(file, digest=digest)


def _fingerprint(file: SourceFile) -> str:
    """Return the SHA-256 of a file's bytes."""
    digest = hashlib.sha256()
    for block in file.blocks():
        digest.update(block)
    return digest.hexdigest()


def _name_of(source: FileLike) -> str:
    """Return a name to call the file by in sentences."""
    if isinstance(source, str | Path):
        return Path(source).name
    return Path(str(getattr(source, "name", "") or "The file")).name


def _at_path(path: Path, name: str) -> SourceFile:
    """Return the file at a path, read at once only where it can't be read twice (a pipe); or say why it can't be had."""
    try:
        file = SourceFile(name, path=path) if path.is_file() else SourceFile(name, path.read_bytes())
        file.block(0, 1)
    except OSError as problem:
        reason = problem.strerror or "it can't be read"
        raise UnreadableRecords([f"{name} can't be opened ({reason}): check the path and try again."]) from problem
    return file


def _bytes_of(source: bytes | BinaryIO) -> bytes:
    """Return the bytes of an upload or a buffer."""
    if isinstance(source, bytes | bytearray | memoryview):
        return bytes(source)
    content = source.getvalue() if hasattr(source, "getvalue") else source.read()
    return content.encode("utf-8") if isinstance(content, str) else bytes(content)
