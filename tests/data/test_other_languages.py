"""Files in other languages and other systems' forms: the same stays, or a question, never other stays."""

from __future__ import annotations

import pandas as pd
import pytest

from bedplan.data import read_records
from bedplan.errors import UnreadableRecords

STAYS = [("K1", "Heron", "2023-03-04 14:05", "2023-03-27 08:30"), ("K2", "Teal", "2023-03-29 00:15", "")]


def written(headings: str, form: str, encoding: str = "utf-8", trail: str = "") -> bytes:
    """Return these stays under such headings, with times in this form."""
    lines = [headings.replace(",", ";") + trail]
    for key, ward, *times in STAYS:
        lines.append(";".join((key, ward, *(time and f"{pd.Timestamp(time):{form}}" for time in times))) + trail)
    return "\r\n".join(lines).encode(encoding)


@pytest.mark.parametrize(
    ("headings", "form", "encoding"),
    [
        ("Fallnummer,Station,Aufnahmedatum,Entlassungsdatum", "%d.%m.%Y %H:%M", "utf-8-sig"),
        ("Patientennummer,Station,Zugang,Abgang", "%d.%m.%y %H:%M", "cp1252"),
        ("Patient,Station,Von,Bis", "%d.%m.%Y, %H:%M Uhr", "utf-8"),
        ("N° patient,Unité,Date d'entrée,Date de sortie", "%d/%m/%Y %Hh%M", "cp1252"),
        ("Paciente,Unidad,Fecha de ingreso,Fecha de alta", "%d-%m-%Y %H:%M", "utf-8"),
        ("Paziente,Reparto,Data ricovero,Data dimissione", "%d/%m/%Y %H.%M", "utf-16"),
        ("Patientnr,Afdeling,Opname,Ontslag", "%d-%m-%Y %H:%M uur", "utf-8"),
        ("Patient,Avdelning,Inskriven,Utskriven", "%Y-%m-%d kl %H:%M", "utf-8"),
        ("Patient,Afdeling,Indlagt,Udskrevet", "%d.%m.%Y %H.%M", "cp1252"),
        ("Pacjent,Oddział,Data przyjęcia,Data wypisu", "%d.%m.%Y %H:%M", "utf-8-sig"),
        ("Doente,Serviço,Data de admissão,Data de alta", "%d/%m/%Y %H:%M", "cp1252"),
        ("PatientID,Ward,Start,End", "%d%b%Y:%H:%M:%S", "utf-8"),
        ("PatientID,Ward,Start,End", "%m/%d/%Y %I:%M:%S %p", "utf-8"),
    ],
)
def test_headings_and_times_of_other_places(headings: str, form: str, encoding: str) -> None:
    """Usual headings of a dozen languages are known, and their ways to write a time are read to the minute."""
    for trail in ("", ";"):
        found = read_records(written(headings, form, encoding, trail), name="stays.csv").stays

        assert found["ward"].tolist() == ["Heron", "Teal"]
        assert found["start"].tolist() == [pd.Timestamp(stay[2]) for stay in STAYS]
        assert found["end"].tolist() == [pd.Timestamp(STAYS[0][3]), pd.NaT]


@pytest.mark.parametrize("clock", ["%H:%M", "%H%M", "%H:%M:%S", "%-H%M"])
@pytest.mark.parametrize(
    "headings",
    [
        "Patient,Ward,Admission Date,Admission Time,Discharge Date,Discharge Time",
        "Fall,Station,Aufnahmedatum,Aufnahmezeit,Entlassungsdatum,Entlassungszeit",
    ],
)
def test_the_hospitals_dates_with_times_beside_them(headings: str, clock: str) -> None:
    """A time of day in a column of its own is not lost, whichever way it is written."""
    lines = [headings]
    for key, ward, *times in STAYS:
        cells = [pd.Timestamp(time).strftime(part) if time else "" for time in times for part in ("%Y-%m-%d", clock)]
        lines.append(",".join((key, ward, *cells)))
    found = read_records("\n".join(lines).encode()).stays

    assert found["start"].tolist() == [pd.Timestamp(stay[2]) for stay in STAYS]
    assert found["end"].tolist() == [pd.Timestamp(STAYS[0][3]), pd.NaT]


@pytest.mark.parametrize(
    "word", ["still inpatient", "noch stationär", "en cours", "In corso", "opgenomen", "31.12.9999"]
)
def test_words_for_still_in(word: str) -> None:
    """What stands where no end is yet is an unfinished stay."""
    content = written("Patient,Station,Von,Bis", "%d.%m.%Y %H:%M").decode() + word
    found = read_records(content.encode()).stays

    assert found["end"].isna().tolist() == [False, True]


def test_headings_nobody_knows_are_asked_about() -> None:
    """A language that is not known is no obstacle once a person says which column is which."""
    content = written("Potilas,Paikka,Alku,Loppu", "%d.%m.%Y %H:%M")

    with pytest.raises(UnreadableRecords, match="headings"):
        read_records(content)
    said = {"patient_key": "Potilas", "ward": "Paikka", "start": "Alku", "end": "Loppu"}
    assert len(read_records(content, columns=said).stays) == 2
