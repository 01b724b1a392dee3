"""Ward names and text columns as codes: spellings are brought together, columns that hold identities go."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from bedplan.data.files.blocks import counted, taken
from bedplan.data.files.columns import without_formula

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

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

    codes: NDArray[np.int32]
    meanings: tuple[str, ...]


def coded(column: pa.ChunkedArray) -> Coded:
    """Return a column as codes in order of first appearance."""
    if pa.types.is_dictionary(column.type):
        whole = column.unify_dictionaries().combine_chunks()
    else:
        whole = pc.dictionary_encode(column).combine_chunks()
    whole = whole.combine_chunks() if isinstance(whole, pa.ChunkedArray) else whole
    codes = pc.fill_null(whole.indices, -1).to_numpy(zero_copy_only=False)
    return Coded(codes, tuple(whole.dictionary.to_pylist()))


def translated(column: Coded, meaning: list[str], width: np.dtype | type[np.int32] = np.int32) -> Coded:
    """Return the column with each value replaced by its meaning ("" = blank), values sorted."""
    names = sorted({name for name in meaning if name})
    place = {name: number for number, name in enumerate(names)}
    table = np.array([*(place.get(name, -1) for name in meaning), -1], dtype=width)
    return Coded(taken(table, column.codes), tuple(names))


def categorical(codes: NDArray[np.int32], names: tuple[str, ...]) -> pd.Categorical:
    """Return codes as categories, those left out that no row has."""
    is_used = np.zeros(len(names) + 1, dtype=bool)
    is_used[codes] = True
    used = np.flatnonzero(is_used[:-1])
    if used.size < len(names):
        table = np.full(len(names) + 1, -1, dtype=np.int32)
        table[used] = np.arange(used.size)
        codes = taken(table, codes)
    return pd.Categorical.from_codes(codes, categories=pd.Index(names)[used])


def rows_of(column: Coded, which: list[bool]) -> NDArray[np.int64]:
    """Return the rows whose value is one of those told by ``which`` (one truth for each meaning)."""
    if not any(which):
        return np.zeros(0, dtype=np.int64)
    return np.flatnonzero(taken(np.array([*which, False]), column.codes))


@dataclass(frozen=True, slots=True)
class Wards:
    """Ward of each row, the wards' names, and the rows whose spelling or name was changed."""

    codes: NDArray[np.int32]
    names: tuple[str, ...]
    respelled: NDArray[np.int64]
    renamed: NDArray[np.int64]


def read_wards(column: pa.ChunkedArray, chosen: Mapping[str, str]) -> Wards:
    """Which ward is each row's? Spellings that differ in spaces and capitals only become the commonest of them."""
    raw = coded(column)
    rows = counted(raw.codes, len(raw.meanings))
    spelled = one_spelling(raw.meanings, rows.tolist())
    final = chosen_names(spelled, chosen)
    respelled = rows_of(raw, [a != b for a, b in zip(raw.meanings, spelled, strict=True)])
    renamed = rows_of(raw, [a != b for a, b in zip(spelled, final, strict=True)])
    wards = translated(raw, final)
    return Wards(wards.codes, wards.meanings, respelled, renamed)


def one_spelling(names: Sequence[str], rows: Sequence[int]) -> list[str]:
    """Return each name in the spelling most rows have, of those that differ in spaces and capitals only."""
    tidy = [without_formula(name) for name in names]
    commonest: dict[str, Counter[str]] = {}
    for name, count in zip(tidy, rows, strict=True):
        commonest.setdefault(name.casefold(), Counter())[name] += count
    return [commonest[name.casefold()].most_common(1)[0][0] for name in tidy]


def chosen_names(names: Sequence[str], chosen: Mapping[str, str]) -> list[str]:
    """Return the names a person wants instead, whatever the capitals; the others stay."""
    wanted = {old.casefold(): without_formula(new) for old, new in chosen.items()}
    return [wanted.get(name.casefold(), name) for name in names]


def read_category(column: pa.ChunkedArray) -> pd.Categorical | None:
    """Return a text column as categories; None where its content looks like identities or free text."""
    raw = coded(column)
    tidy = [without_formula(value) for value in raw.meanings]
    if len(tidy) > MOST_CATEGORIES or looks_like_identity(tidy):
        return None
    return _categories(raw, tidy)


def looks_like_identity(values: list[str]) -> bool:
    """Do these distinct values look like e-mail addresses, postcodes, birthdays or numbers of persons?"""
    alike = sum(any(pattern.fullmatch(value) for pattern in IDENTITY_PATTERNS) for value in values)
    return alike > max(IDENTITY_SHARE * len(values), 2)


def age_bands(column: pa.ChunkedArray) -> tuple[pd.Categorical | None, NDArray[np.int64]]:
    """Return ages as ten-year bands (never exact ages), and which rows hold an age no person reaches."""
    raw = coded(column)
    meaning, impossible = [], []
    for value in raw.meanings:
        age, is_band = _age(value)
        wrong = age is not None and not 0 <= age <= OLDEST_YEARS
        impossible.append(wrong)
        meaning.append("" if wrong else without_formula(value) if age is None or is_band else _band(age))
    rows = rows_of(raw, impossible)
    if len(set(meaning)) > MOST_CATEGORIES or looks_like_identity(sorted(set(meaning))):
        return None, rows
    return _categories(raw, meaning), rows


def _categories(column: Coded, meaning: list[str]) -> pd.Categorical:
    """Return a column as categories, sorted, each value replaced by its meaning ("" = blank)."""
    values = translated(column, meaning, np.min_scalar_type(-len(meaning) - 1))
    return pd.Categorical.from_codes(values.codes, categories=list(values.meanings))


def _age(text: str) -> tuple[int | None, bool]:
    """Return the age a text names, the lowest of a band, and whether it is a band; None where it names none."""
    fits = re.fullmatch(r"\s*(-?\d{1,4})(?:\.\d+)?(\s*(?:[-–]|to)\s*\d{1,4}|\s*\+)?\s*", text)
    return (int(fits[1]), fits[2] is not None) if fits else (None, False)


def _band(age: int) -> str:
    """Return the ten-year band of an age."""
    return "90+" if age >= 90 else f"{age // 10 * 10}-{age // 10 * 10 + 9}"
