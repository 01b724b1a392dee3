"""What the planner said of files beside the ward stays, by their fingerprints: it holds for exactly those files."""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING

import streamlit as st

from bedplan.plan import FileAnswers

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

KEPT = "said_of_files"


def mark_of(content: bytes) -> str:
    """Return the fingerprint of a file."""
    return hashlib.sha256(content).hexdigest()


def everything() -> Mapping[str, FileAnswers]:
    """Return what was said, by the fingerprint of the file it was said of."""
    return st.session_state.get(KEPT, {})


def of(mark: str) -> FileAnswers:
    """Return what was said of the file with this fingerprint."""
    return everything().get(mark, FileAnswers())


def keep(mark: str, answers: FileAnswers) -> None:
    """Keep what was said of a file, for when it is brought again, and for the plan."""
    kept = {**everything(), mark: answers}
    st.session_state[KEPT] = {one: said for one, said in kept.items() if said != FileAnswers()}


def forget() -> None:
    """Forget what was said."""
    st.session_state.pop(KEPT, None)


def rows(marks: Iterable[tuple[str, str]]) -> list[tuple[str, str]]:
    """Return (what, value) for every answer about files in use, for the document; ``marks`` as ``Files`` has them."""
    return [row for what, named in marks for row in of(named[-64:]).rows(what)]
