"""The bytes of a file a planner brings: a path, an upload or bytes, with its name and its fingerprint."""

from __future__ import annotations

import hashlib
import mmap
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO, TypeAlias

from bedplan.errors import UnreadableRecords

FileLike: TypeAlias = str | Path | bytes | BinaryIO

LARGEST_FILE_BYTES = 4 * 2**30
BLANK_BYTES = 4_096
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
    """One file as it came: its name and its bytes (of a path, as the system maps them: nothing is copied)."""

    name: str
    content: bytes | mmap.mmap
    digest: Future[str] | None = None

    @property
    def fingerprint(self) -> str:
        """The SHA-256 of the bytes, worked out while the file is read."""
        return self.digest.result() if self.digest else ""

    def begins_with(self, *starts: bytes) -> bool:
        """Are these the first bytes?"""
        return any(self.content[: len(start)] == start for start in starts)


def open_source(source: FileLike, name: str | None = None) -> SourceFile:
    """What is in this file? Bytes of a path, an upload or a buffer, refused in one sentence if they can't be a table.

    Raises:
        UnreadableRecords: the file is missing, empty, too large, or plainly something else (a picture, a PDF).
    """
    given = name or _name_of(source)
    content = _bytes_of(source, given)
    if not content[:BLANK_BYTES].strip() and not content[BLANK_BYTES:].strip():
        raise UnreadableRecords([f"{given} is empty: export it again and check that it has rows."])
    if len(content) > LARGEST_FILE_BYTES:
        raise UnreadableRecords(
            [f"{given} holds {len(content) / 2**30:.1f} GB, more than this program reads at once (4 GB): split it."]
        )
    for start, kind in OTHER_KINDS:
        if content[: len(start)] == start:
            raise UnreadableRecords(
                [f"{given} is {kind}, not a table: export the table as CSV, Excel (.xlsx) or Parquet."]
            )
    beside = ThreadPoolExecutor(1)
    digest = beside.submit(lambda: hashlib.sha256(content).hexdigest())
    beside.shutdown(wait=False)
    return SourceFile(given, content, digest)


def _name_of(source: FileLike) -> str:
    """Return a name to call the file by in sentences."""
    if isinstance(source, str | Path):
        return Path(source).name
    return Path(str(getattr(source, "name", "") or "The file")).name


def _bytes_of(source: FileLike, name: str) -> bytes | mmap.mmap:
    """Return the bytes, or say why they can't be had."""
    if isinstance(source, bytes | bytearray | memoryview):
        return bytes(source)
    if isinstance(source, str | Path):
        try:
            with Path(source).open("rb") as opened:
                return _mapped(opened)
        except OSError as problem:
            reason = problem.strerror or "it can't be read"
            raise UnreadableRecords([f"{name} can't be opened ({reason}): check the path and try again."]) from problem
    content = source.getvalue() if hasattr(source, "getvalue") else source.read()
    return content.encode("utf-8") if isinstance(content, str) else bytes(content)


def _mapped(opened: BinaryIO) -> bytes | mmap.mmap:
    """Return a file's bytes where the system keeps them; copied only where they can't be mapped (an empty file, a pipe)."""
    try:
        return mmap.mmap(opened.fileno(), 0, access=mmap.ACCESS_READ)
    except (OSError, ValueError):
        return opened.read()
