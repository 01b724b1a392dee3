"""Headings as hospitals write them, and the plain names this program uses for them."""

from __future__ import annotations

import re
import unicodedata
from typing import TYPE_CHECKING

from bedplan.errors import UnreadableRecords

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping


def words(text: str) -> tuple[str, ...]:
    """Return the words of a text."""
    return tuple(text.split())


# Headings of hospital stays with the ward they began and ended on.
FIRST_WARD = words("firstward admissionward wardonadmission wardatadmission admittingward admitward wardofadmission")
LAST_WARD = words("lastward dischargeward wardondischarge wardatdischarge dischargingward wardofdischarge finalward")

# Canonical name -> headings met in practice, written as `plain` writes them. The order matters: the first
# canonical name that claims a heading keeps it.
STAY_HEADINGS: dict[str, tuple[str, ...]] = {
    "patient_key": words(
        "patientkey pseudoid patid patientid hospno hospitalno hospitalnumber mrn mrnhash patient patientno "
        "patientnumber pseudonym pseudonymisedid personid personkey subjectid pid localpatientid "
        "patientennummer patientennr patientnr patientnummer npatient nopatient idpatient paciente idpaciente nhc "
        "paziente idpaziente codicepaziente pacjent idpacjenta doente iddoente utente"
    ),
    "spell_key": words(
        "spellkey spell spellno spellid spellnumber admissionid admissionno encounter encounterid providerspellno "
        "hospitalproviderspellno visitid visit csn accountno stayid episodeid "
        "fallnummer fallnr fallid fall sejour nsejour idsejour episodio nosologico opnamenummer opnamenr vardtillfalle"
    ),
    "ward": (
        *words(
            "ward wardcode wardname location unit nursingunit clinicward wardid locationname bedward wardlocation "
            "department wardunit careunit currentward "
            "station pflegestation abteilung unite unitedesoins unidad planta reparto afdeling verpleegafdeling "
            "avdelning vardavdelning afsnit avdeling oddzia servico enfermaria unidade osasto"
        ),
        *FIRST_WARD,
        *LAST_WARD,
    ),
    "last_ward": LAST_WARD,
    "start": words(
        "start wardstart admdttm in from wardstaystart wardstaystartdatetime startdatetime starttime wardin "
        "timein datein wardstartdatetime wardstaystartdttm arrival arrived intime transferin begin startdttm indttm "
        "entered wardadmitted episodestart epistart episodestartdatetime zugang stationszugang zugangsdatum von "
        "datefrom datestart dateentered dateonward datearrived dateofarrival wardindate wardentrydate wardentry entrydate "
        "entry transferindate datumvon"
    ),
    "start_date": words(
        "startdate wardstartdate wardstaystartdate indate fromdate arrivaldate wardstaydate episodestartdate"
    ),
    "start_time": words("wardstarttime wardstaystarttime timestart fromtime arrivaltime episodestarttime"),
    "end": words(
        "end wardend dischdttm out to wardstayend wardstayenddatetime enddatetime endtime wardout timeout "
        "dateout wardenddatetime wardstayenddttm departure departed outtime transferout finish enddttm outdttm left "
        "episodeend epiend episodeenddatetime abgang stationsabgang abgangsdatum bis "
        "dateto dateend dateleft dateoffward datedeparted dateofdeparture wardoutdate wardexitdate wardexit exitdate exit "
        "transferoutdate datumbis"
    ),
    "end_date": words("enddate wardenddate wardstayenddate outdate todate departuredate episodeenddate"),
    "end_time": words("wardendtime wardstayendtime timeend totime departuretime episodeendtime"),
    "admitted": words(
        "admitted admdate admissiondate admission admissiondatetime dateofadmission admissiondttm dateadmitted admitdate "
        "aufnahme aufnahmedatum aufnahmezeitpunkt entree dateentree datedentree ingreso fechaingreso fechadeingreso "
        "ricovero dataricovero datadiricovero dataingresso opname opnamedatum inskriven inskrivningsdatum indlagt "
        "innlagt indlaeggelsesdato dataprzyjecia admissao dataadmissao datadeadmissao"
    ),
    "admitted_time": words(
        "admissiontime admtime admittime timeofadmission aufnahmezeit aufnahmeuhrzeit heureentree heuredentree "
        "horaingreso horadeingreso oraricovero opnametijd"
    ),
    "discharged": words(
        "discharged disdate dischargedate discharge dischargedatetime dateofdischarge dischargedttm datedischarged dischdate "
        "entlassung entlassungsdatum entlassdatum entlassungszeitpunkt sortie datesortie datedesortie alta fechaalta "
        "fechadealta dataalta datadealta dimissione datadimissione datadidimissione ontslag ontslagdatum utskriven "
        "utskrivningsdatum udskrevet utskrevet udskrivningsdato datawypisu"
    ),
    "discharged_time": words(
        "dischargetime distime timeofdischarge entlassungszeit entlassungsuhrzeit heuresortie heuredesortie horaalta "
        "horadealta oradimissione ontslagtijd"
    ),
    "class": words("class patclass patientclass patientclassification classpat intendedclass"),
    "method": words(
        "method admissionmethod admmeth methodofadmission electivenonelective elecnonelec urgency admissiontype admtype"
    ),
    "specialty": words(
        "specialty homespecialty spec tfc service mainspec mainspecialty treatmentfunction treatmentfunctioncode "
        "speciality homespeciality specialtycode"
    ),
    "age_band": words("ageband agegrp agegroup agerange"),
    "age": words("age ageatadmission ageyears"),
    "ready": words(
        "ready readydate drd mffd nctr dischargereadydate readyfordischarge medicallyfit datemedicallyready"
    ),
    "destination": words("destination disdest dischargedestination dischargeto"),
    "bed": words("bed bedno bedid bay room bednumber"),
    "planned_stay": words("plannedlos intendedlos plannedstay"),
    "intended_management": words("intendedmgmt intman intendedmanagement"),
}

# How headings name the day and the time of day of one moment: "Date in" and "Time in", "Datum von" and "Zeit von".
DAY_AND_CLOCK = (
    *(("date", "time"), ("day", "time"), ("date", "heure"), ("date", "clock"), ("datum", "uhrzeit"), ("datum", "zeit")),
    *(("datum", "tijd"), ("datum", "tid"), ("dato", "tid"), ("fecha", "hora"), ("data", "hora"), ("data", "ora")),
)

# What a file is -> headings that no other kind of file has.
TELLTALES: dict[str, tuple[str, ...]] = {
    "staffed beds": words("fundedbeds staffedbeds closedbeds bedsclosed establishment"),
    "a census": words("bedsoccupied occupiedbeds bedsinuse inpatients"),
    "a monthly return": words("occupiedbeddays beddaysoccupied obd availablebeddays availablebedays beddaysavailable"),
    "bed requests": words("requestedat placedat bedrequested requestedtime placedtime waithours"),
    "patients not given a bed": words("refusedat refusalreason refusaltime refusaldate"),
    "cancelled bookings": words("planneddate cancelledfor tcidate cancellationreason"),
}

# Headings that carry a person's identity: never kept, whatever is in them.
IDENTITY_WORDS = words(
    "surname forename firstname lastname middlename patientname fullname familyname givenname maidenname dob "
    "dateofbirth birthdate birthday birth postcode postalcode zip zipcode address addressline street town phone "
    "telephone mobile tel email mail nhsnumber nhsno nhs ssn socialsecurity socialsecuritynumber nationalid "
    "nationalinsurance nationalnumber idnumber passport chi chinumber hcn healthcard medicare medicareno insuranceno "
    "nextofkin kin gp gpname gppractice consultantname consultant religion photo name title initials ninumber "
    "nachname familienname vorname geburtsdatum geburtstag anschrift strasse plz nom nomdefamille prenom datedenaissance "
    "datenaissance adresse codepostal apellido apellidos nombre fechadenacimiento fechanacimiento direccion cognome nome "
    "datadinascita datanascita codicefiscale indirizzo achternaam voornaam geboortedatum bsn personnummer fodelsedatum "
    "cpr cprnummer fodselsnummer pesel nazwisko imie dni apelido datadenascimento"
)


def plain(heading: str) -> str:
    """Return a heading without case, spaces, accents or signs, so that spellings can be compared."""
    decomposed = unicodedata.normalize("NFKD", heading)
    return re.sub(r"[^a-z0-9]+", "", decomposed.encode("ascii", "ignore").decode().lower())


def is_identity(heading: str) -> bool:
    """Does this heading announce a name, a birth date, an address or a national number?"""
    word = plain(heading)
    return word in IDENTITY_WORDS or any(
        part in word for part in ("surname", "forename", "dateofbirth", "postcode", "email", "nhsn", "telephone")
    )


def other_kind(headings: Iterable[str], *kinds: str) -> tuple[str, str] | None:
    """Which of these kinds of file do the headings betray, and by which heading?"""
    written = {plain(heading): heading for heading in headings}
    return next(
        ((kind, written[word]) for kind in kinds or TELLTALES for word in TELLTALES[kind] if word in written), None
    )


def match_headings(
    headings: Iterable[str],
    known: Mapping[str, Iterable[str]],
    chosen: Mapping[str, str] | None = None,
) -> dict[str, str]:
    """Which of these headings means what? Canonical name -> heading as written; the user's own choice comes first.

    A heading answers one name and a name takes the first heading that fits; identity headings are never matched. A name
    for which "" is chosen has no column.

    Raises:
        UnreadableRecords: one heading was chosen for two names.
    """
    written, chosen = list(headings), chosen or {}
    found: dict[str, str] = {name: heading for name, heading in chosen.items() if heading and heading in written}
    _refuse_twice(found)
    free = {place: plain(heading) for place, heading in enumerate(written) if heading not in found.values()}
    for name, words in known.items():
        wanted = (plain(name), *words)
        ranked = (
            []
            if name in found or chosen.get(name) == ""
            else [(wanted.index(word), place) for place, word in free.items() if word in wanted]
        )
        if ranked:
            place = min(ranked)[1]
            found[name] = written[place]
            del free[place]
    for name in ("start", "end", "admitted", "discharged"):
        if name in found and f"{name}_time" in known and not {name, f"{name}_date", f"{name}_time"} & set(chosen):
            _part(name, found, [written[place] for place in free], known)
    return found


def _part(name: str, found: dict[str, str], free: list[str], known: Mapping[str, Iterable[str]]) -> None:
    """Take "Date in" and "Time in" for the day and the time of day of one moment, where both are there."""
    whole, day_key, clock_key = found[name], f"{name}_date" if f"{name}_date" in known else name, f"{name}_time"
    headings = {plain(one): one for one in (*free, found.get(day_key, ""), found.get(clock_key, ""))}
    for day, clock in DAY_AND_CLOCK:
        twins = [headings.get(plain(whole).replace(*both), "") for both in ((clock, day), (day, clock))]
        pair = (twins[0], whole) if twins[0] != whole and twins[0] else (whole, twins[1])
        if all(pair) and pair[0] != pair[1]:
            del found[name]
            found |= {day_key: pair[0], clock_key: pair[1]}
            return


def _refuse_twice(chosen: Mapping[str, str]) -> None:
    """Refuse one heading for two names."""
    names: dict[str, str] = {}
    for name, heading in chosen.items():
        if heading in names:
            both = f"{names[heading]} and for {name}".replace("_", " ")
            raise UnreadableRecords([f"“{heading}” was chosen for {both}: a column can stand for one of them only."])
        names[heading] = name


def without_formula(text: str) -> str:
    """Return text that no spreadsheet will take for a formula, without control characters or doubled spaces."""
    printable = "".join(sign if unicodedata.category(sign)[0] != "C" else " " for sign in text.replace(" ", " "))
    tidy = " ".join(printable.split())
    return "'" + tidy if tidy[:1] in ("=", "+", "-", "@") else tidy
