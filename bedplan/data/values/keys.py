"""Keys of patients and hospital stays as numbers: the keys themselves are forgotten here."""

from __future__ import annotations

import itertools
import math
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.blocks import each, ranked
from bedplan.data.values.codes import coded

if TYPE_CHECKING:
    from numpy.typing import NDArray

# At the start of a key, or as a word of its own: a random key may hold such letters by chance.
TEST_KEY = r"^(test|dummy|zzz|training)|[^a-z](test|dummy|training)([^a-z]|$)"
TEST_LETTERS = (b"test", b"dummy", b"zzz", b"training")
LAST_ASCII, BLANK = 127, 32
SMALL = 32  # the bit that makes a letter small
LONGEST_PACKED = 20  # signs; longer keys are told apart by a dictionary
LOOKED_AT = 1_000  # keys looked at to tell whether they are real persons' numbers


@dataclass(frozen=True, slots=True)
class Keys:
    """Numbers in place of a column's keys (equal keys, equal numbers), and what was noticed about them.

    ``random``: number → random code, which is all that is shown to anybody. ``tests``: rows of test patients.
    """

    codes: NDArray[np.int32]
    random: NDArray[np.int64]
    tests: NDArray[np.int64]
    looks_real: bool


def read_keys(column: pa.ChunkedArray) -> Keys:
    """Which rows have the same key? Each blank key counts as one of its own."""
    parts = each(_trimmed, [part for part in column.chunks if len(part)])
    codes = _packed_codes(parts)
    if codes is None:
        codes = coded(pa.chunked_array(parts, pa.string())).codes.copy()
    known = int(codes.max(initial=-1)) + 1
    blank = np.flatnonzero(np.concatenate([np.zeros(0, dtype=bool), *each(_is_blank, parts)]))
    codes[blank] = np.arange(known, known + blank.size)
    sample = pc.unique(column.slice(0, 100 * LOOKED_AT)).drop_null()[:LOOKED_AT].to_pylist()
    real = sum(is_national_number(key) for key in sample) > len(sample) / 2
    return Keys(codes, np.random.default_rng().permutation(known + blank.size), _test_rows(parts), real)


def _trimmed(part: pa.Array) -> pa.Array:
    """Return keys without blanks around them; a column of plain signs throughout is not copied."""
    letters = np.frombuffer(_letters(part), dtype=np.uint8)
    plain = letters.size and letters.min() > BLANK and letters.max() < LAST_ASCII
    return part if plain else pc.utf8_trim_whitespace(part)


def _packed_codes(parts: list[pa.Array]) -> NDArray[np.int32] | None:
    """Number keys by sorting them, each packed into one whole number; None where they are too long for that.

    A sign counts in the number as its place among the signs met there, so two keys never share a number.
    """
    width = max(each(lambda part: int(np.diff(_offsets(part)).max()), parts), default=0)
    if not 0 < width <= LONGEST_PACKED:
        return None
    ends = each(lambda part: _lowest_and_highest(_signs(part, width)), parts)
    low = np.min([lowest for lowest, _ in ends], axis=0)
    spread = [int(most) + 1 for most in np.max([highest for _, highest in ends], axis=0) - low]
    if math.prod(spread) >= 2**62:
        return None

    lasts = list(itertools.accumulate(map(len, parts)))
    numbers = np.zeros(lasts[-1], dtype=np.int64)

    def pack(part: pa.Array, last: int) -> None:
        """Write the keys of one part as numbers."""
        number = numbers[last - len(part) : last]
        for sign, lowest, many in zip(_signs(part, width), low, spread, strict=True):
            if many > 1:
                number *= many
                number += sign - lowest

    each(lambda one: pack(*one), zip(parts, lasts, strict=True))
    return _dense(numbers)


def _lowest_and_highest(signs: NDArray[np.uint8]) -> tuple[NDArray[np.uint8], NDArray[np.uint8]]:
    """Return the lowest and the highest sign met at each place of a key."""
    return signs.min(axis=1), signs.max(axis=1)


def _offsets(part: pa.Array) -> NDArray[np.int32]:
    """Return where each string of an array starts, and where the last one ends."""
    return np.frombuffer(part.buffers()[1], dtype=np.int32)[part.offset : part.offset + len(part) + 1]


def _is_blank(part: pa.Array) -> NDArray[np.bool_]:
    """Return which strings of an array are empty or missing."""
    empty = np.diff(_offsets(part)) == 0
    return empty | part.is_null().to_numpy(zero_copy_only=False) if part.null_count else empty


def _letters(part: pa.Array) -> memoryview:
    """Return the bytes of all strings of an array."""
    offsets, held = _offsets(part), part.buffers()[2]
    return memoryview(held or b"")[offsets[0] : offsets[-1]]


def _signs(part: pa.Array, width: int) -> NDArray[np.uint8]:
    """Return the bytes of each string, (width, n), zeros after its end: no text holds a zero."""
    lengths, letters = np.diff(_offsets(part)), np.frombuffer(_letters(part), dtype=np.uint8)
    if (lengths == width).all():
        return np.ascontiguousarray(letters.reshape(-1, width).T)
    signs = np.zeros((len(part), width), dtype=np.uint8)
    signs[np.arange(width) < lengths[:, None]] = letters
    return np.ascontiguousarray(signs.T)


def _dense(numbers: NDArray[np.int64]) -> NDArray[np.int32]:
    """Return numbers counted from 0 without gaps, equal where ``numbers`` are equal."""
    order, values = ranked(numbers)
    new = np.zeros(order.size, dtype=bool)
    np.not_equal(values[1:], values[:-1], out=new[1:])
    if values is numbers:  # in order already, as most exports are by patient
        return np.cumsum(new, dtype=np.int32)
    codes = np.empty(order.size, dtype=np.int32)
    codes[order] = np.cumsum(new, dtype=np.int32)
    return codes


def _test_rows(parts: list[pa.Array]) -> NDArray[np.int64]:
    """Return the rows whose key says that it is a test; most files show at a glance that they hold none."""

    def look(part: pa.Array) -> NDArray[np.int64]:
        """Return the places within one part."""
        letters = np.frombuffer(_letters(part), dtype=np.uint8)
        small = letters | SMALL
        if letters.max(initial=0) <= LAST_ASCII and not any((small == sign).any() for sign in b"tdz"):
            return np.zeros(0, dtype=np.int64)
        if bytes(letters).isascii() and not any(word in bytes(letters).lower() for word in TEST_LETTERS):
            return np.zeros(0, dtype=np.int64)
        return np.flatnonzero(
            pc.fill_null(pc.match_substring_regex(part, TEST_KEY, ignore_case=True), False).to_numpy(
                zero_copy_only=False
            )
        )

    firsts = itertools.accumulate((len(part) for part in parts), initial=0)
    return np.concatenate([np.zeros(0, dtype=np.int64), *map(np.add, each(look, parts), firsts)])


def is_national_number(key: str) -> bool:
    """Does this key look like a real person's number? Ten digits whose last one checks modulo 11, or ddd-dd-dddd.

    Source: the modulus 11 check of the English NHS number (from memory).
    """
    digits = re.sub(r"[ -]", "", key)
    if re.fullmatch(r"\d{3}-\d{2}-\d{4}", key):
        return True
    if not re.fullmatch(r"\d{10}", digits):
        return False
    check = 11 - sum(int(digit) * weight for digit, weight in zip(digits[:9], range(10, 1, -1), strict=True)) % 11
    return check % 11 == int(digits[9])
