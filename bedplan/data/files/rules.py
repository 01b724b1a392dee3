"""Every rule about the rows of a stay file: what happens to a row that meets it, and the sentence that is printed."""

from __future__ import annotations

import numpy as np

from bedplan.data.files.report import REPAIRED, SET_ASIDE, Rule

# Every rule in one place, in the order in which the report prints them.
RULES: dict[str, Rule] = {
    "misfit": Rule(SET_ASIDE, "Not a ward stay: a title, total, footer or a line with another number of cells"),
    "no ward": Rule(SET_ASIDE, "No ward is named"),
    "no start": Rule(SET_ASIDE, "The start is missing"),
    "start unreadable": Rule(SET_ASIDE, "The start can't be read as a date"),
    "end unreadable": Rule(SET_ASIDE, "The end can't be read as a date"),
    "unlikely date": Rule(SET_ASIDE, "The start lies in the future or before 1990, or the end before 1990"),
    "mistyped year": Rule(SET_ASIDE, "Dated far from every other stay: a mistyped year"),
    "whole years": Rule(SET_ASIDE, "Usual on its ward but for whole years too long: a mistyped year"),
    "test patient": Rule(SET_ASIDE, "A test patient, or an age no person reaches"),
    "negative": Rule(SET_ASIDE, "The stay ends before it starts"),
    "duplicate": Rule(SET_ASIDE, "The same stay is in the file twice"),
    "resubmitted": Rule(SET_ASIDE, "An earlier version of a stay that was sent again with another end"),
    "two ends": Rule(
        SET_ASIDE, "In the file twice with another end, and which was sent last can't be told: the longer counts"
    ),
    "zero stay": Rule(SET_ASIDE, "The stay ends in the minute it starts"),
    "forgotten, aside": Rule(
        SET_ASIDE, "No end, and far longer ago than stays on this ward last: a forgotten discharge"
    ),
    "too short": Rule(SET_ASIDE, "Less than 30 minutes on the ward, with no stay before or after to count it in"),
    "nested": Rule(SET_ASIDE, "Inside another stay of the same patient, who can't use two beds"),
    "virtual": Rule(SET_ASIDE, "A virtual ward or care at home: no hospital bed is used"),
    "cot": Rule(SET_ASIDE, "A cot for a well baby: counted apart from beds"),
    "delivery": Rule(SET_ASIDE, "A delivery suite: counted apart from ward beds"),
    "regular": Rule(SET_ASIDE, "A regular day or night attender: counted apart"),
    "procedure place": Rule(SET_ASIDE, "A place without ward beds, such as a theatre, a lounge or X-ray"),
    "waiting place": Rule(SET_ASIDE, "A waiting place, such as an emergency department: not a ward"),
    "leave": Rule(SET_ASIDE, "Home leave: the patient was not in a bed"),
    "leave, ward unknown": Rule(
        SET_ASIDE, "Home leave without a stay just before: which ward held the bed isn't known"
    ),
    "end to come": Rule(REPAIRED, "The end lies in the future: the patient is taken to be still in"),
    "clock change": Rule(REPAIRED, "Ended in the hour that the clock shows twice in autumn: an hour was added"),
    "empty end": Rule(
        REPAIRED,
        "The end is a date that systems write for none, such as 1 January 1900: the patient is taken to be still in",
    ),
    "ward above": Rule(REPAIRED, "The ward's cell is blank, as in merged cells: the ward named above it counts"),
    "ward spelling": Rule(REPAIRED, "The ward's name was written with other spaces or capitals"),
    "ward renamed": Rule(REPAIRED, "The ward's name was changed to the one you chose"),
    "serial date": Rule(REPAIRED, "A date stood as a spreadsheet's day number"),
    "swapped": Rule(REPAIRED, "Day and month were the wrong way round"),
    "forgotten, closed": Rule(REPAIRED, "No end, but the patient went on: ended when the next stay starts"),
    "leave, held": Rule(REPAIRED, "Home leave with the bed held: counted on the ward that was left"),
    "joined": Rule(REPAIRED, "Went on in the same ward: joined to one stay"),
    "bridged": Rule(REPAIRED, "Up to an hour before the next stay of the same patient: ended when that one starts"),
    "passed through": Rule(REPAIRED, "Less than 30 minutes on the way: counted in the stay before or after"),
    "parted": Rule(
        REPAIRED, "Another stay of the patient lay inside it: parted round that one, and counted on both sides"
    ),
    "overlap": Rule(REPAIRED, "Overlapped the patient's next stay: ended when that one starts"),
}
CODES = {key: np.uint8(place + 1) for place, key in enumerate(RULES)}
