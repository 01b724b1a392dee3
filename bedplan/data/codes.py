"""Keys, ward names and text columns as codes: identities go, spellings are brought together."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.columns import without_formula

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

# At the start of a key, or as a word of its own: a random key may hold such letters by chance.
TEST_KEY = r"^(test|dummy|zzz|training)|[^a-z](test|dummy|training)([^a-z]|$)"
OLDEST_YEARS = 120
MOST_CATEGORIES = 1_000
IDENTITY_SHARE = 0.1  # of a column's distinct values that look like identities: the column is not kept
IDENTITY_PATTERNS = (
    re.compile(r"[^@\s]+@[^@\s]+\.[a-z]{2,}", re.IGNORECASE),  # an e-mail address
    re.compile(r"[A-Z]{1,2}\d[A-Z\d]? ?\d[A-Z]{2}", re.IGNORECASE),  # a British postcode
    re.compile(r"\d{3}[- ]\d{2}[- ]\d{4}"),  # a United States social security number
    re.compile(r"\d{1,4}[-/.]\d{1,2}[-/.]\d{2,4}"),  # a date, such as a birthday
    re.compile(r"\+?\d[\d ()-]{8,}\d"),  # a telephone number, or a long personal number
)


@dataclass(frozen=True, slots=True)
class Coded:
    """One column as whole-number codes (n,), −1 = blank, and what each code stands for."""

    codes: NDArray[np.int64]
    meanings: tuple[str, ...]


def coded(column: pa.ChunkedArray) -> Coded:
    """Return a column as codes in order of first appearance."""
    codes, values = _encoded(column)
    return Coded(codes, tuple(values.to_pylist()))


def _encoded(column: pa.ChunkedArray) -> tuple[NDArray[np.int64], pa.Array]:
    """Return a column as codes, −1 = blank, and the values behind them."""
    if pa.types.is_dictionary(column.type):
        whole = column.unify_dictionaries().combine_chunks()
    else:
        whole = pc.dictionary_encode(column).combine_chunks()
    whole = whole.combine_chunks() if isinstance(whole, pa.ChunkedArray) else whole
    return pc.fill_null(pc.cast(whole.indices, pa.int64()), -1).to_numpy(zero_copy_only=False), whole.dictionary


def translated(column: Coded, meaning: list[str]) -> Coded:
    """Return the column with each value replaced by its meaning ("" = blank), values sorted."""
    names = sorted({name for name in meaning if name})
    place = {name: number for number, name in enumerate(names)}
    table = np.array([*(place.get(name, -1) for name in meaning), -1], dtype=np.int64)
    return Coded(table[column.codes], tuple(names))


@dataclass(frozen=True, slots=True)
class Wards:
    """Ward of each row, the wards' names, and the rows whose spelling or name was changed."""

    codes: NDArray[np.int64]
    names: tuple[str, ...]
    respelled: NDArray[np.bool_]
    renamed: NDArray[np.bool_]


def read_wards(column: pa.ChunkedArray, chosen: Mapping[str, str]) -> Wards:
    """Which ward is each row's? Spellings that differ in spaces and capitals only become the commonest of them."""
    raw = coded(column)
    tidy = [without_formula(name) for name in raw.meanings]
    rows = np.bincount(raw.codes[raw.codes >= 0], minlength=len(tidy))
    commonest: dict[str, Counter[str]] = {}
    for name, count in zip(tidy, rows, strict=True):
        commonest.setdefault(name.casefold(), Counter())[name] += int(count)
    spelled = [commonest[name.casefold()].most_common(1)[0][0] for name in tidy]
    wanted = {old.casefold(): without_formula(new) for old, new in chosen.items()}
    final = [wanted.get(name.casefold(), name) for name in spelled]
    changed = np.array([*(a != b for a, b in zip(raw.meanings, spelled, strict=True)), False])
    renamed = np.array([*(a != b for a, b in zip(spelled, final, strict=True)), False])
    wards = translated(raw, final)
    return Wards(wards.codes, wards.meanings, changed[raw.codes], renamed[raw.codes])


@dataclass(frozen=True, slots=True)
class Keys:
    """Random codes in place of a column's keys, what was noticed about them, and which rows are test patients."""

    codes: NDArray[np.int64]
    is_test: NDArray[np.bool_]
    looks_real: bool


def read_keys(column: pa.ChunkedArray) -> Keys:
    """Replace keys by random codes; the way back is forgotten here. Each blank key gets a code of its own."""
    raw, values = _encoded(pc.utf8_trim_whitespace(column))
    blank = raw < 0
    known = len(values)
    shuffled = np.random.default_rng().permutation(known + int(blank.sum()))
    codes = shuffled[raw]
    codes[blank] = shuffled[known:]
    test = pc.match_substring_regex(values, TEST_KEY, ignore_case=True).to_numpy(zero_copy_only=False)
    real = [is_national_number(value) for value in values[:1_000].to_pylist()]
    return Keys(codes, np.append(test, False)[raw], sum(real) > len(real) / 2)


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


def read_category(column: pa.ChunkedArray) -> pd.Categorical | None:
    """Return a text column as categories; None where its content looks like identities or free text."""
    raw = coded(column)
    tidy = [without_formula(value) for value in raw.meanings]
    if len(tidy) > MOST_CATEGORIES or looks_like_identity(tidy):
        return None
    values = translated(raw, tidy)
    return pd.Categorical.from_codes(values.codes, categories=list(values.meanings))


def looks_like_identity(values: list[str]) -> bool:
    """Do these distinct values look like e-mail addresses, postcodes, birthdays or numbers of persons?"""
    alike = sum(any(pattern.fullmatch(value) for pattern in IDENTITY_PATTERNS) for value in values)
    return alike > max(IDENTITY_SHARE * len(values), 2)


def age_bands(column: pa.ChunkedArray) -> tuple[pd.Categorical | None, NDArray[np.bool_]]:
    """Return ages as ten-year bands (never exact ages), and which rows hold an age no person reaches."""
    raw = coded(column)
    meaning, impossible = [], []
    for value in raw.meanings:
        age, is_band = _age(value)
        wrong = age is not None and not 0 <= age <= OLDEST_YEARS
        impossible.append(wrong)
        meaning.append("" if wrong else without_formula(value) if age is None or is_band else _band(age))
    rows = np.array([*impossible, False])[raw.codes]
    if len(set(meaning)) > MOST_CATEGORIES or looks_like_identity(sorted(set(meaning))):
        return None, rows
    values = translated(raw, meaning)
    return pd.Categorical.from_codes(values.codes, categories=list(values.meanings)), rows


def _age(text: str) -> tuple[int | None, bool]:
    """Return the age a text names, the lowest of a band, and whether it is a band; None where it names none."""
    fits = re.fullmatch(r"\s*(-?\d{1,4})(?:\.\d+)?(\s*(?:[-–]|to)\s*\d{1,4}|\s*\+)?\s*", text)
    return (int(fits[1]), fits[2] is not None) if fits else (None, False)


def _band(age: int) -> str:
    """Return the ten-year band of an age."""
    return "90+" if age >= 90 else f"{age // 10 * 10}-{age // 10 * 10 + 9}"
