"""The words by which headers, labels and types are recognised, in the languages of the trade.

Words alone decide nothing that the numbers contradict; what is not here is left to a person.
"""

from __future__ import annotations

import re
from typing import Literal

#: Symbols of the elements.
ELEMENTS = frozenset(
    re.findall(
        "[A-Z][a-z]?",
        "HHeLiBeBCNOFNeNaMgAlSiPSClArKCaScTiVCrMnFeCoNiCuZnGaGeAsSeBrKrRbSrYZrNbMoTcRuRhPdAgCdInSnSbTeIXeCsBaLaCePrNdSm"
        "EuGdTbDyHoErTmYbLuHfTaWReOsIrPtAuHgTlPbBiThU",
    )
)

#: Header words by field, compared without case, blanks and marks.
HEADERS: dict[str, str] = {
    "label": "label|sample label|sample|sample id|sample name|sampleid|id|name|vial|vessel|well|solution|"
    "solution label|"
    "identifier|flask|tube|probe|probenname|bezeichnung|probenbezeichnung|echantillon|nom|muestra|monster|sample no",
    "role": "type|sample type|solution type|kind|category|class|role|typ|probentyp|art|tipo",
    "analyte": "element|analyte|compound|ion|parameter|metal|component|elem|analyt|elemento|analyse|species",
    "channel": "wavelength|line|isotope|mass number|m/z|view|wellenlange|nm",
    "signal": "signal|value|absorbance|abs|intensity|counts|cps|area|peak area|height|peak height|current|"
    "emission|reading|"
    "response|flache|hohe|peakflache|peakhohe|extinction|extinktion|absorbanz|absorption|intensitat|peak|"
    "net intensity|net signal|od|"
    "mean|average|mean signal|mean abs|mean absorbance|mean intensity|mean cps|mittelwert|moyenne|media",
    "signal_sd": "sd|std dev|stdev|standard deviation|stddev|st dev|std deviation|standardabweichung|s",
    "signal_rsd": "rsd|%rsd|rsd %|cv|%cv|cv %|rel sd|relative sd|vk",
    "readings": "n|no of readings|number of readings|replicates|reps|n readings",
    "replicate": "replicate|rep|replicate no|injection|inj|repeat|wiederholung|wdh|rep no|reading no",
    "nominal": "nominal|nominal conc|std conc|standard conc|standard concentration|nominal concentration|target|"
    "expected|true value|sollwert|std value|certified",
    "added": "added|addition|spike conc|spike concentration|conc added|added conc|spiked with|zugabe|ajout",
    "spike_volume": "std|spike|spike vol|spike volume|standard added|std added|std vol|standard volume|volume added|"
    "spike added|added volume|added|addition|vol std|standard|zugabe",
    "aliquot": "aliquot|cell volume|sample volume|sample vol|aliquot volume|probenvolumen",
    "made_up_to": "made up to|final|final volume|final vol|made up|total volume|endvolumen",
    "mass": "mass|weight|sample mass|sample weight|portion|einwaage|weighed",
    "digest_volume": "digest volume|digest vol|digested to",
    "predilution": "dilution|dilution factor|df|predilution|dil|dil factor|verdunnung|verd",
    "date": "date|datum|fecha|date measured|measured on|run date|acq date|acquisition date",
    "time": "time|zeit|uhrzeit|hora|heure|time measured|run time|acq time|acquisition time",
    "measured_at": "date time|datetime|measured at|measured|acquired|acquired at|timestamp|date/time|acq date time|"
    "acquisition|date and time",
    "position": "position|pos|run|#|no|nr|seq|sequence|index|rack|rack pos|rack position|vial no|run no|tube no",
    "batch": "batch|batch id|run id|charge|lot",
    "analyst": "analyst|operator|user|bearbeiter",
    "instrument": "instrument|device|gerat",
    "comment": "comment|comments|remark|remarks|note|notes|bemerkung",
    "concentration": "conc|concentration|result|calculated conc|calc conc|reported conc|konzentration|konz|"
    "mean conc|sample conc|corrected conc|amount",
}

#: Headers of the two volumes of a dilution.
DILUTED_FROM = frozenset({"dil from", "diluted from", "dilution from", "verd von"})
DILUTED_TO = frozenset({"dil to", "diluted to", "dilution to", "verd auf"})
#: Headers of columns that hold the units of another.
UNIT_COLUMN = frozenset({"unit", "units", "einheit"})

#: Words of a type column by the role that they mean.
ROLE_WORDS_SEEN: dict[str, str] = {
    "unspiked": "sample|unspiked|unknown|unk|unkn|smp|spl|probe|plain|native|unaltered|s|ohne|ohne zusatz",
    "spiked": "spiked|spike|addition|std add|standard addition|matrix spike|spk|ms|gespikt|aufgestockt|add|"
    "mit|mit zusatz",
    "standard": "standard|std|cal|calibration|calibrant|calibrator|kal|cal std|calibration standard|etalon",
    "blank": "blank|blk|reagent blank|calibration blank|blind|blindwert|blanc|bl|method blank|prep blank|"
    "cal blank|leer",
    "check_standard": "check|qc|control|check standard|ccv|icv|verification|kontrolle|qcs|chk|quality control",
}

#: Headers of columns that say which readings do not count, and their words that mean so.
EXCLUDED = re.compile(r"(?:excluded?|excl|rejected|reject|rjct|discarded|omit(?:ted)?|outlier)", re.IGNORECASE)
USED = re.compile(r"(?:used?|included?|valid|accepted|counts)", re.IGNORECASE)
NO = frozenset({"no", "n", "0", "false", "nein", "non"})

BLANK_LABEL = re.compile(
    r"(?:\b|_)(?:blank|blk|blind|blindwert|leerwert|blanc|blanco|ve-?wasser|reinstwasser|(?:di|deionised|"
    r"ultrapure) water)(?:\b|_|(?=\d))",
    re.IGNORECASE,
)
CHECK_LABEL = re.compile(r"^(?:chk|check|qc|ccv|icv|qcs|control|kontrolle|verification)(?:\b|_|(?=\d))", re.IGNORECASE)
STANDARD_LABEL = re.compile(r"^(?:std|standard|cal|calibration|calib|kal|etalon|calstd)(?:\b|_|(?=\d))", re.IGNORECASE)
#: Vials that are neither samples nor anything that is calculated with.
SERVICE_LABEL = re.compile(
    r"\b(?:rinse|wash|drift|tune|tuning|dummy|test|conditioning|flush|prime|spul\w*)\b", re.IGNORECASE
)
#: Words of another role in the midst of a label, and dilutions: a person must say what they mean.
DOUBTFUL_LABEL = re.compile(
    r"[\s_-](?:std|standard|cal|qc|check|blank|blk)\b|\b(?:x\s?\d+|\d+\s?x|(?<![\w-])\d+\s?[:+]\s?\d+|dil\w*|"
    r"df\s?\d+)\b",
    re.IGNORECASE,
)
SPIKE_WORD = re.compile(r"^(?:spk|spike|spiked|ms|lsp|fsp|add|addition|gespikt|aufgestockt)$", re.IGNORECASE)
DUPLICATE_WORD = re.compile(r"^(?:dup|duplicate|doppel)$", re.IGNORECASE)

_STATISTICS = re.compile(
    r"(?:averages?|means?|summe|sum|total|mittel|mittelwert|sd|std ?dev|stdev|rsd|%rsd|rsd ?%|cv|%cv|min|max|minimum|"
    r"maximum|median|standard deviation)\W*",
    re.IGNORECASE,
)
#: Unit of a concentration or content.
CONCENTRATION_UNIT = re.compile(r"(?:[munpµμ]?g/(?:[mdµμ]?[lL]|kg|g)|pp[mbt]|[munpµμ]?mol/[lL]|%)", re.IGNORECASE)
VOLUME_UNIT = re.compile(r"(?:[mµμucd]?[lL])")
MASS_UNIT = re.compile(r"(?:[mkµμu]?g)")
_OTHER_UNIT = re.compile(
    r"(?:cps|counts?|abs|au|nm|s|min|°c|mv|v|[nµμu]?a|%|m/z|a\.u\.|[nµμu]s/cm|counts/s|mau)", re.IGNORECASE
)

#: Words in a header that speak of an addition, whatever else stands beside them.
ADDITION = re.compile(
    r"\b(?:std|standard|spike|spiked|spikes|added|add|addition|additions|zugabe|aufstockung|ajout)\b", re.IGNORECASE
)
_STATISTIC_LINE = re.compile(
    r"(?:averages?|means?|summe|sum|total|sd|std ?dev|stdev|%?rsd|%?cv|median|mittel|mittelwert)\b", re.IGNORECASE
)

Measure = Literal["concentration", "volume", "mass", "other", ""]


def measure(unit: str) -> Measure:
    """Tell what a unit measures; nothing where it is none that is known."""
    if VOLUME_UNIT.fullmatch(unit):
        return "volume"
    if CONCENTRATION_UNIT.fullmatch(unit) and unit != "%":
        return "concentration"
    if MASS_UNIT.fullmatch(unit):
        return "mass"
    return "other" if _OTHER_UNIT.fullmatch(unit) else ""


def is_unit(cell: str) -> bool:
    """Tell whether a cell is a unit, in brackets or not."""
    return measure(cell.strip("()[] ")) != ""


def is_statistic(cell: str) -> bool:
    """Tell whether a cell names a statistic of rows above."""
    return _STATISTICS.fullmatch(cell.strip()) is not None


def begins_with_statistic(cell: str) -> bool:
    """Tell whether a cell begins like a line of statistics: ``Mean of all``."""
    return _STATISTIC_LINE.match(cell.strip()) is not None


def is_mean(cell: str) -> bool:
    """Tell whether a statistic is the mean.

    >>> is_mean("Average"), is_mean("RSD")
    (True, False)
    """
    return plain(cell) in ("mean", "average", "averages", "means", "mittelwert")


def plain(text: str) -> str:
    """Return a text as the lists of words compare it.

    >>> plain("Std. Dev"), plain("Probe-Nr")
    ('std dev', 'probe nr')
    """
    folded = text.casefold().translate(str.maketrans("äöüéèçñ", "aoueecn"))
    return " ".join(re.sub(r"[\s._\-:]+", " ", folded).split())


def field_of(header: str) -> list[str]:
    """Return the fields that a header's words may name, the likeliest first."""
    name = plain(header)
    return [field for field, words in HEADERS.items() if name in words.split("|")]


def role_of(word: str) -> str:
    """Return the role that a word of a type column means, or nothing."""
    name = plain(word)
    return next((role for role, words in ROLE_WORDS_SEEN.items() if name in words.split("|")), "")
