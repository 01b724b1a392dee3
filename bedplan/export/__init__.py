"""The justification: facts and sentences first, then one writer a format."""

from bedplan.export.case import WardCase, case_for, with_check
from bedplan.export.html import as_html
from bedplan.export.justification import Justification, Source
from bedplan.export.workbook import as_xlsx

__all__ = ["Justification", "Source", "WardCase", "as_html", "as_xlsx", "case_for", "with_check"]
