"""Taking ward stays in on the page Records, and the questions that any file can raise."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.data import preview_columns, read_records
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.pages import controls, loaded, saved, typed
from bedplan.plan import NO_COLUMN, Answers

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from bedplan.data import ColumnPreview, DateQuestion
    from bedplan.plan import FileAnswers

NONE = "(none)"
STOPPED = "Reading {} was stopped. What was loaded before is still here, unchanged."


FILE_KINDS = {  # box -> the kind of file whose columns are looked for
    "stays": "ward stays",
    "capacity": "staffed beds",
    "refusals": "refusals",
    "bed_requests": "bed requests",
    "cancellations": "cancellations",
    "census": "census",
    "monthly_return": "monthly return",
    "ready": "ready dates",
}


@dataclass(frozen=True)
class Given:
    """A file as it was given: for which box, its name and content, and what was said of it."""

    kind: str
    name: str
    content: bytes
    answers: Answers | FileAnswers


@dataclass(frozen=True)
class Refused:
    """A file of ward stays that could not be read: why, and the question whose answer would help."""

    given: Given
    problems: tuple[str, ...]
    question: DateQuestion | None


def read(name: str, content: bytes, answers: Answers) -> loaded.Files | Refused:
    """Read a file of ward stays with these answers, and show how far it is; nothing is taken in yet."""
    bar = st.progress(0.0)

    def tell(share: float, doing: str) -> None:
        """Show how far reading is; the server may stop it here."""
        bar.progress(share, f"Reading {wording.plain(name)}: {doing}. To stop, take the file out of its box.")

    try:
        found = read_records(content, name=name, progress=tell, **answers.to_read())
    except BedplanError as error:
        problems = error.problems if isinstance(error, UnreadableRecords) else (str(error),)
        return Refused(Given("stays", name, content, answers), problems, getattr(error, "question", None))
    finally:
        bar.empty()
    return loaded.Files(found, content=content, answers=answers)


def take_in(name: str, content: bytes, answers: Answers) -> None:
    """Plan with a new file from now on; if it can't be read, say why and keep what was loaded before."""
    found = read(name, content, answers)
    start_anew("stays")
    if isinstance(found, Refused):
        st.session_state["refused"] = found
        return
    st.session_state.pop("refused", None)
    st.session_state["times_read"] = times_read() + 1
    for kind in loaded.MARKED:  # what is still in their boxes belongs to the new file too
        st.session_state.pop(f"{kind}_taken", None)
    controls.use_files(found)


def read_again(answers: Answers) -> tuple[str, ...]:
    """Read the loaded file another way, and keep whatever else was set; return what is wrong, and change nothing then."""
    here = loaded.files()
    found = read(here.records.name, here.content, answers)
    if isinstance(found, Refused):
        return found.problems
    controls.use_files_again(replace(here, records=found.records, answers=answers).linked())
    typed.remove_known()
    st.session_state["times_read"] = times_read() + 1
    return ()


def times_read() -> int:
    """Return how often files were read: part of the names of inputs that start from what was read."""
    return st.session_state.get("times_read", 0)


def settle(answers: Answers) -> None:
    """Read the loaded file with these answers and show the page anew, or say what is wrong with them."""
    problems = read_again(answers)
    if not problems:
        st.rerun()
    st.error(as_text(problems))


def as_text(problems: tuple[str, ...]) -> str:
    """Return problems as paragraphs that are shown as they stand."""
    return "\n\n".join(wording.plain(problem) for problem in problems)


def load_stays() -> None:
    """Offer the ward-stay file and take it in."""
    given = st.file_uploader(
        "Ward stays (CSV, Excel or Parquet): one row for each patient on each ward, with ward, start and end",
        key="stays_file",
        help="Headings such as Ward, Ward start, Ward end. A blank end means the patient is still in.",
    )
    st.caption(
        f"Files stay in this computer's memory. Largest upload {st.get_option('server.maxUploadSize')} MB; a larger file is "
        "read where it lies, by the command python -m bedplan folder/stays.csv"
    )
    if given is None:
        st.session_state.pop("refused", None)
        return
    if st.session_state.get("stays_taken") == given.file_id:
        return
    stopped = st.session_state.get("stays_begun") == given.file_id
    if stopped:
        st.warning(STOPPED.format(wording.plain(given.name)))
        if not st.button("Read it now"):
            return
    st.session_state["stays_begun"] = given.file_id
    content = given.getvalue()
    take_in(given.name, content, saved.answers_for(content) or Answers())
    st.session_state["stays_taken"] = given.file_id
    if stopped:
        st.rerun()


def show_refused() -> None:
    """Show why a file could not be read, and ask what would help."""
    refused: Refused | None = st.session_state.get("refused")
    if refused is None:
        return
    given = refused.given
    st.error(as_text(why_refused(given, refused.problems, refused.question)))
    st.caption("The records loaded before are still here, unchanged.")

    def retry(answers: Answers) -> None:
        """Read the same file again with these answers."""
        take_in(given.name, given.content, answers)
        st.rerun()

    if refused.question is not None:
        ask_date_order("stays", refused.question, lambda order: retry(replace(given.answers, date_order=order)))
    is_unsure = is_about_columns(given, refused.question)
    confirm_columns(given, retry, is_fresh=is_fresh("stays"), is_unsure=is_unsure)


def why_refused(given: Given, problems: tuple[str, ...], question: DateQuestion | None) -> tuple[str, ...]:
    """Return what is wrong with a file; where it is clearly of another kind, that alone."""
    seen = columns_of(given) if given.kind in FILE_KINDS and question is None else None
    return (seen.mistaken,) if seen is not None and seen.mistaken else problems


def ask_date_order(kind: str, question: DateQuestion, use: Callable[[str], None]) -> None:
    """Ask whether 03/04 is in April or in March, with both readings of three rows."""
    heading = ["As written", *(f"Read {one}" for one in question.readings)]
    st.table(pd.DataFrame(list(question.examples), columns=heading).set_index(heading[0]))
    with st.form(f"{kind}_date_order", border=False):
        counts = question.ends_before_start
        answer = st.radio(
            "How are dates written in this file?",
            question.answers if question.ends_before_start else question.answers[:2],
            index=None,
            format_func=lambda one: (
                one + (f" ({counts[one]:,} stays would end before they start)" if one in counts else "")
            ),
        )
        if st.form_submit_button("Read it this way") and answer is not None:
            use(answer)


def start_anew(kind: str) -> None:
    """Put the inputs about a file where they start: what was chosen for another one is not carried over."""
    st.session_state[f"{kind}_fresh"] = True


def is_fresh(kind: str) -> bool:
    """Whether the inputs about a file start anew in this run."""
    return st.session_state.pop(f"{kind}_fresh", False)


def columns_of(given: Given) -> ColumnPreview | None:
    """Return which heading was taken for what; None where the file is no table. Looked for once, a workbook takes long."""
    asked = (given.name, hash(given.content), tuple(given.answers.columns.items()))
    kept = st.session_state.get(f"{given.kind}_seen")
    if kept is None or kept[0] != asked:
        kept = (asked, _look(given))
        st.session_state[f"{given.kind}_seen"] = kept
    return kept[1]


def is_about_columns(given: Given, question: DateQuestion | None) -> bool:
    """Whether a refused file may be read once it is said which column is which: one is lacking, or some were said before."""
    seen = columns_of(given)
    return question is None and seen is not None and bool(seen.lacking or given.answers.columns)


def _look(given: Given) -> ColumnPreview | None:
    """Look at the columns of a file; None where that can't be done."""
    columns = given.answers.columns
    try:
        return preview_columns(given.content, name=given.name, columns=columns, kind=FILE_KINDS[given.kind])
    except BedplanError:
        return None


def confirm_columns(given: Given, use: Callable[[Any], None], *, is_fresh: bool, is_unsure: bool = False) -> None:
    """Show which heading was taken for what, with three rows, and let the planner correct it; open where that would help."""
    seen = columns_of(given)
    if seen is None or not seen.headings:
        return
    is_open = is_unsure and not seen.mistaken
    with (
        st.expander("How the columns were read", expanded=is_open),
        st.form(f"{given.kind}_columns", border=False),
    ):
        if is_open:
            st.caption("Say which column is which, and it is read again.")
        if seen.hint:
            st.caption(wording.plain(seen.hint))
        if seen.others:
            told = [f"- {wording.plain(heading)}: {_cells(cells)}" for heading, cells in seen.others.items()]
            st.caption("\n".join(["Columns not used, and what their first rows hold:", *told]))
        chosen = {key: ask_column(f"{given.kind}_column_{key}", key, seen, is_fresh=is_fresh) for key in seen.asked}
        if st.form_submit_button("Read it again with these columns"):
            use(replace(given.answers, columns=_said(chosen, seen, given.answers.columns)))


def _said(chosen: Mapping[str, str], seen: ColumnPreview, before: Mapping[str, str]) -> dict[str, str]:
    """Return which column is which as the planner says; a heading that is named for something else leaves its old place."""
    moved = {heading for key, heading in chosen.items() if heading and heading != seen.matched.get(key)}
    stays = {
        key: NO_COLUMN if seen.matched.get(key) == heading in moved else heading for key, heading in chosen.items()
    }
    others = {key: heading for key, heading in before.items() if key not in seen.asked}
    said = {key: heading for key, heading in stays.items() if heading or key in seen.matched or key in before}
    return {**others, **said}


def ask_column(place: str, key: str, seen: ColumnPreview, *, is_fresh: bool) -> str:
    """Ask which heading stands for one of our names, three of its rows beside it."""
    if is_fresh or place not in st.session_state:
        st.session_state[place] = seen.matched.get(key, NO_COLUMN)
    left, right = st.columns(2, vertical_alignment="bottom")
    chosen = left.selectbox(
        wording.column(key),
        [NO_COLUMN, *seen.headings],
        format_func=lambda heading: NONE if heading == NO_COLUMN else heading,
        key=place,
    )
    right.caption(_cells(seen.samples.get(key, ())))
    return chosen


def _cells(cells: tuple[str, ...]) -> str:
    """Return the first cells of a column as they are shown."""
    return wording.plain(" · ".join(cell or "–" for cell in cells) or "–")


def confirm_links() -> None:
    """Offer to count names that may be one ward together."""
    answers = loaded.files().answers
    for place, link in enumerate(loaded.links()):
        left, right = st.columns([4, 1])
        left.markdown(wording.plain(link.sentence))
        if len(link.new) == 1 and right.button("Count together", key=f"link_{place}"):
            names = {**answers.choices.ward_names, **dict.fromkeys(link.old, link.new[0])}
            settle(replace(answers, choices=replace(answers.choices, ward_names=names)))
