"""What tests of files beside the stays share: files given on the page Records, and their columns named."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from streamlit.testing.v1 import AppTest

EXPANDER = "How the columns were read"


def go(app: AppTest, page: str) -> AppTest:
    """Turn to a page."""
    return app.switch_page(f"bedplan/pages/{page}.py").run()


def give(app: AppTest, kind: str, name: str, content: bytes) -> AppTest:
    """Put a file into the box of this kind on the page Records."""
    return app.file_uploader(key=f"{kind}_file").upload(name, content, "text/csv").run()


def press(app: AppTest, label: str, form: str) -> AppTest:
    """Press a button of a form."""
    return next(one for one in app.button if one.label == label and one.form_id == form).click().run()


def name(app: AppTest, kind: str, columns: dict[str, str]) -> AppTest:
    """Say which column is which, and read the file again."""
    for key, heading in columns.items():
        app.selectbox(key=f"{kind}_column_{key}").set_value(heading)
    return press(app, "Read it again with these columns", f"{kind}_columns")


def text(elements: object) -> str:
    """Return what elements say, without the marks that keep names from being read as formatting."""
    return "\n".join(one.value for one in elements).replace("\\", "")


def are_open(app: AppTest) -> list[bool]:
    """Return which questions about columns are open, in the order of the page."""
    return [one.proto.expanded for one in app.expander if one.label == EXPANDER]
