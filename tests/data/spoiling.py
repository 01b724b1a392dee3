"""Spoiling a file's bytes as broken exports and copies do, for the tests of damaged files."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import random

ENCODINGS = ("utf-8", "utf-8", "utf-8-sig", "utf-16", "cp1252")
BYTES = (
    b"\x00",
    b"\xff\xfe",
    b"\xef\xbb\xbf",
    b"\r",
    b"\n\n",
    b",,,,,,,,,,,",
    b'"',
    b"PK\x03\x04",
    b"\x80\x81",
    b";",
    b"\t",
)


def spoiled_bytes(text: str, chance: random.Random) -> bytes:
    """Return the text in some encoding, now and then with foreign bytes inside or cut short."""
    content = text.encode(chance.choice(ENCODINGS), errors="replace")
    if chance.random() < 0.3:
        place = chance.randrange(len(content))
        content = content[:place] + chance.choice(BYTES) + content[place:]
    if chance.random() < 0.2:
        content = flipped(content, chance)
    if chance.random() < 0.1:
        content = content[: chance.randrange(len(content))]
    return content


def flipped(content: bytes, chance: random.Random) -> bytes:
    """Return the content with a few bits the other way round, as a bad disk or line leaves them."""
    spoiled = bytearray(content)
    for _ in range(chance.randrange(1, 6)):
        spoiled[chance.randrange(len(spoiled))] ^= 1 << chance.randrange(8)
    return bytes(spoiled)
