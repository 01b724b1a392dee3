"""What reasons and outcomes in lists mean, in a few languages: no bed was free, something else, or nobody can tell."""

from __future__ import annotations

import re
import unicodedata
from functools import lru_cache

import pandas as pd

from bedplan.data.files.dates import BLANK_WORDS

# Words as `plain_reason` writes them; whole words only. Common practice, no source.
NO_BED = (
    # English
    r"no (\w+ ){0,3}beds?(?! (required|needed|wanted|necessary))",
    r"no (icu|itu|hdu|critical care|intensive care|high dependency|ward|side room|capacity|space|room|place)s?",
    r"(unavailab\w+|non availab\w+|lack|shortage|absence|insufficient|not enough|too few) (of )?(\w+ ){0,2}(beds?|capacity)",
    r"(short|out) of (\w+ ){0,2}(beds?|capacity)",
    r"beds? (\w+ )?(not (yet )?(available|free|found)|unavailab\w+|shortages?|crisis|pressures?|full|closed|closures?|lacking)",
    r"(ward|unit|bay|hospital|icu|itu|hdu|site) (is |was |were |are )?(full|closed|at capacity|over capacity)",
    # German
    r"kein\w* (\w+ ){0,2}(bett\w*|platz|platze|kapazitat\w*)",
    r"(bett|betten|platz)(mangel|engpass|sperre|sperrung|not)",
    r"(station|klinik|haus) (ist |war )?(voll\w*|gesperrt)",
    # French
    r"(pas de|plus de|manque de|absence de|aucun\w*|faute de) (\w+ )?(lits?|places?)",
    r"lits? (indisponibles?|non disponibles?|fermes?)",
    # Spanish, Portuguese
    r"(sin|sem|no hay|nao ha|falta de|ausencia de) (\w+ )?(camas?|plazas?|vagas?|leitos?)",
    r"camas? no disponibles?",
    # Italian
    r"(nessun|senza|no|mancanza( di)?|carenza( di)?) (post[oi] )?letto",
    r"post[oi] letto (non disponibil\w+|esaurit\w+)",
    # Dutch
    r"geen (\w+ ){0,2}(bed|bedden|plaats|plek)",
    r"bedden ?tekort|tekort aan bedden|opnamestop",
    # Danish, Norwegian, Swedish
    r"(ingen|ikke) (\w+ )?(seng|senge|senger|sang|sangar|plads|plass|plats|platser|vardplats|vardplatser)",
    r"(sengemangel|pladsmangel|plassmangel|platsbrist|vardplatsbrist)",
)
SOMETHING_ELSE = (
    r"too (well|ill|sick|unwell|young|old|frail|stable)|un(fit|well)|not fit|medically fit|no longer \w+|not (required|needed)",
    r"no (bed )?(required|needed)|no beds? (required|needed|wanted|necessary)",
    r"(patient|family|relatives?) (\w+ )?(declin\w+|refus\w+|cancel\w+|choice|request\w*|died|wish\w*|preference)",
    r"(declined|refused|cancelled|canceled) by (the )?(patient|family)|did not (attend|arrive)|dna|no show",
    r"inappropriate|not appropriate|not indicated|criteria|wrong (ward|specialty)|futil\w+|ceiling of care|palliative",
    r"died|deceased|death|self discharged?|duplicates?|(admin\w*|booking|clerical|data) error",
    r"(surgeon|anaesthetist|anesthetist|consultant|doctor) (\w+ )?(unavailab\w+|not available|ill|sick|away|absent|on leave)",
    r"(equipment|instruments?|theatre|theater|operating room) (\w+ )?(unavailab\w+|not available|fail\w+|fault\w*|broken|time)",
    r"(no|lack of) (surgeon|anaesthetist|anesthetist|theatre|theater|equipment)",
    r"overran|overrun|list (full|over\w*)|full (list|stomach|term)|(mental|lacks?) capacity|capacity to consent|consent",
    r"strike|industrial action|weather|not (starved|fasted)|blood results?|test results?",
    r"verstorben|patientenwunsch|zu gesund|keine indikation|nicht (indiziert|nuchtern|erschienen|operationsfahig)",
    r"deced\w+|deces|refus du patient|pas d indication|non indique\w*",
    r"fallecid\w+|exitus|no indicad\w+|rechazo del paciente|rifiuto del paziente|non indicat\w+",
    r"overleden|geen indicatie|niet geindiceerd|wens (van )?patient",
)
FULL = (
    r"full|capacity|over ?crowd\w*|overcapacity|oversubscribed",
    r"voll|vollbelegt|vollbelegung|belegt|uberbeleg\w+|uberfullt|kapazitat\w*",
    r"complets?|service complete|sature\w*|saturation|completo|llen[oa]|lotad[oa]|pien[oa]|vol|overvol",
    r"fullbelag\w*|overbelag\w*|overbeleg\w*|overbelegg\w*",
)
GIVEN = (
    r"admitted|accepted|placed|beds? (was )?(given|found|allocated|assigned)|given (a )?bed",
    r"aufgenommen|angenommen|admise?|acceptee?|ingresad[oa]|aceptad[oa]|ricoverat[oa]|accettat[oa]",
    r"opgenomen|geaccepteerd|inlagd|indlagt|innlagt",
)
NOT_HERE = (
    r"not|never|no|non|nicht|kein\w*|niet|elsewhere|other|another|different|out of area|transfer\w*|private|another \w+",
    r"ander\w*|autre|ailleurs|otr[oa]|altr[oa]|altrove|annan|annat|anden|andet|annen|outlier|outlied|refused|rejected|declined",
)
NO = {"n", "no", "f", "false", "0", "nein", "non", "nee", "nej", "nei", "nao"}
YES = {"y", "yes", "t", "true", "1", "x", "j", "ja", "oui", "si", "sim", "o"}
KEPT = (
    r"not cancel\w*|completed?|done|performed|attended|admitted|operated|kept|went ahead|treated|carried out|arrived",
    r"durchgefuhrt|operiert|realise\w*|effectue\w*|realizad[oa]|eseguit[oa]|uitgevoerd|genomfor\w*|gennemfort",
)
CANCELLED = (
    r"cancel\w*|abgesagt|storn\w*|annul\w*|afgezegd|geannuleerd|installd|aflyst|avlyst",
    r"postponed|moved|rescheduled|verschoben|report\w*",
    r"\d{1,4} \d{1,2} \d{1,4}( .*)?",  # the day of the cancellation
)


@lru_cache(maxsize=4_096)
def plain_reason(reason: str) -> str:
    """Return a reason without capitals, accents and signs, "" where it is blank."""
    if reason.strip().lower() in BLANK_WORDS:
        return ""
    decomposed = unicodedata.normalize("NFKD", reason.casefold()).encode("ascii", "ignore").decode()
    return " ".join(re.findall(r"[a-z0-9]+", decomposed))


def _says(patterns: tuple[str, ...], plain: str) -> bool:
    """Does one of these stand in a text, as whole words?"""
    return re.search(rf"\b(?:{'|'.join(patterns)})\b", plain) is not None


@lru_cache(maxsize=4_096)
def means_no_bed(reason: str) -> bool | None:
    """Does this reason say that no bed was free? None where that can't be told.

    Words about beds count first, then other reasons, then words such as "full" alone.

    Checked by: tests/data/beside/test_logs.py
    """
    plain = plain_reason(reason)
    if _says(NO_BED, plain):
        return True
    if _says(SOMETHING_ELSE, plain):
        return False
    return True if _says(FULL, plain) else None


def was_given_a_bed(outcomes: pd.Series, wards: pd.Series) -> pd.Series:
    """Which of these outcomes say that the ward asked for gave a bed after all? Not those that name another ward."""
    names = {ward: plain_reason(ward) for ward in wards.unique()}

    def given(outcome: str, asked: str) -> bool:
        """Whether this outcome says so."""
        plain = plain_reason(outcome)
        elsewhere = any(name and name != names[asked] and _says((re.escape(name),), plain) for name in names.values())
        return _says(GIVEN, plain) and not _says(NOT_HERE, plain) and not elsewhere

    pairs = list(zip(outcomes, wards, strict=True))
    answers = {pair: given(*pair) for pair in set(pairs)}
    return pd.Series([answers[pair] for pair in pairs], index=outcomes.index, dtype=bool)


def not_cancelled(outcomes: pd.Series, _wards: pd.Series) -> pd.Series:
    """Which of these outcomes say that a booking was kept? Blanks and other words do where any cell says cancelled."""
    plain = outcomes.map(plain_reason).astype(str)
    kept = plain.isin(NO) | plain.map(lambda text: _says(KEPT, text)).astype(bool)
    cancelled = ~kept & (plain.isin(YES) | plain.map(lambda text: _says(CANCELLED, text)).astype(bool))
    return kept | ~cancelled & cancelled.any()
