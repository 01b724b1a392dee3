"""Taking ward stays in on the page Records, and the questions such a file can raise."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import pandas as pd
import streamlit as st

from bedplan import wording
from bedplan.data import preview_columns, read_records
from bedplan.data.files.preview import MATCHED
from bedplan.errors import BedplanError, UnreadableRecords
from bedplan.pages import controls, loaded, saved, typed
from bedplan.plan import Answers

if TYPE_CHECKING:
    from collections.abc import Callable

    from bedplan.data import DateQuestion

NONE = "(none)"
STOPPED = "Reading {} was stopped. What was loaded before is still here, unchanged."


@dataclass(frozen=True)
class Refused:
    """A file of ward stays that could not be read: why, and the question whose answer would help."""

    name: str
    content: bytes
    answers: Answers
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
        return Refused(name, content, answers, problems, getattr(error, "question", None))
    finally:
        bar.empty()
    return loaded.Files(found, content=content, answers=answers)


def take_in(name: str, content: bytes, answers: Answers) -> None:
    """Plan with a new file from now on; if it can't be read, say why and keep what was loaded before."""
    found = read(name, content, answers)
    st.session_state["columns_fresh"] = True
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
    st.error(as_text(refused.problems))
    st.caption("The records loaded before are still here, unchanged.")

    def retry(answers: Answers) -> None:
        """Read the same file again with these answers."""
        take_in(refused.name, refused.content, answers)
        st.rerun()

    if refused.question is not None:
        ask_date_order("stays", refused.question, lambda order: retry(replace(refused.answers, date_order=order)))
    confirm_columns(refused.name, refused.content, refused.answers, retry)


def ask_date_order(kind: str, question: DateQuestion, use: Callable[[str], None]) -> None:
    """Ask whether 03/04 is in April or in March, with both readings of three rows."""
    heading = ["As written", "Read day first", "Read month first"]
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


def confirm_columns(name: str, content: bytes, answers: Answers, use: Callable[[Answers], None]) -> None:
    """Show which heading was taken for what, with three rows, and let the planner correct it."""
    refused: Refused | None = st.session_state.get("refused")
    unsure = refused is not None and refused.question is None
    try:
        seen = preview_columns(content, name=name, columns=answers.columns)
    except BedplanError:
        return
    with (
        st.expander("How the columns were read", expanded=unsure),
        st.form("columns", border=False),
    ):
        chosen = {}
        fresh = st.session_state.pop("columns_fresh", False)
        for key in MATCHED:
            options = [NONE, *seen.headings]
            now = seen.matched.get(key, NONE)
            if fresh:  # what was chosen for another file is not carried over
                st.session_state[f"column_{key}"] = now
            left, right = st.columns([1, 2])
            chosen[key] = left.selectbox(
                key.replace("_", " ").capitalize(), options, options.index(now), key=f"column_{key}"
            )
            right.caption(wording.plain(" · ".join(seen.samples.get(key, ())) or "–"))
        if st.form_submit_button("Read it again with these columns"):
            columns = {key: heading for key, heading in chosen.items() if heading != NONE}
            use(replace(answers, columns=columns))


def confirm_links() -> None:
    """Offer to count names that may be one ward together."""
    answers = loaded.files().answers
    for place, link in enumerate(loaded.links()):
        left, right = st.columns([4, 1])
        left.markdown(wording.plain(link.sentence))
        if len(link.new) == 1 and right.button("Count together", key=f"link_{place}"):
            names = {**answers.choices.ward_names, **dict.fromkeys(link.old, link.new[0])}
            settle(replace(answers, choices=replace(answers.choices, ward_names=names)))
