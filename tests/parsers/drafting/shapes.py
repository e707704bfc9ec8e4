"""Invented exports in the shapes that instruments write, each with the readings that a person finds in it.

The readings are known because the same solutions are written in every shape; nothing here reads an export.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable


@dataclass(frozen=True)
class Vial:
    """One solution on the rack."""

    label: str
    role: str
    sample: str = ""
    level: str = ""
    nominal: float | None = None
    word: str = "sample"
    dose: float | None = None
    unit: str = ""


@dataclass(frozen=True)
class Reading:
    """What a person reads from one line, for one analyte and channel."""

    line: int
    analyte: str
    channel: str | None
    vial: Vial
    signals: tuple[float, ...]


@dataclass
class Export:
    """An export being written, with the readings that it holds."""

    name: str
    lines: list[str] = field(default_factory=list)
    readings: list[Reading] = field(default_factory=list)
    encoding: str = "utf-8"
    end: str = "\n"

    def write(self, *lines: str) -> int:
        """Add lines; return the number of the last one."""
        self.lines += lines
        return len(self.lines)

    @property
    def data(self) -> bytes:
        """The bytes of the export."""
        return (self.end.join(self.lines) + self.end).encode(self.encoding)


RACK = (
    Vial("STD 0", "standard", nominal=0.0, word="standard"),
    Vial("STD 0.5", "standard", nominal=0.5, word="standard"),
    Vial("STD 1", "standard", nominal=1.0, word="standard"),
    Vial("STD 2", "standard", nominal=2.0, word="standard"),
    Vial("BLK 1", "blank", word="blank"),
    Vial("CHK 1.5", "check_standard", nominal=1.5, word="check"),
    Vial("SED-12", "unspiked", "SED-12"),
    Vial("SED-12 +A1", "spiked", "SED-12", "A1"),
    Vial("SED-12 +A2", "spiked", "SED-12", "A2"),
    Vial("BRN-3", "unspiked", "BRN-3"),
    Vial("BRN-3 +A1", "spiked", "BRN-3", "A1"),
    Vial("ROOF-7", "unspiked", "ROOF-7"),
)
FLASKS = tuple(
    Vial(name, "spiked" if volume else "unspiked", name, dose=volume, unit="mL")
    for name in ("RIV-17", "RIV-18")
    for volume in (0.0, 2.5, 5.0, 7.5)
)


def signal(vial: Vial, at: int, replicate: int = 0, analyte: int = 0) -> float:
    """Return a plausible signal: linear for standards, so that nominals can be proved."""
    of = vial.nominal if vial.nominal is not None else 0.05 if vial.role == "blank" else 0.3 + 0.1 * at
    return round(0.0012 + 0.1831 * of * (1 + analyte) + 0.0003 * replicate, 4)


def long_table() -> Export:
    """One reading a row, a column for the element."""
    made = Export("LT-0101.csv")
    made.write("Label,Element,Wavelength,Intensity")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        line = made.write(f"{vial.label},Zn,213.9,{value}")
        made.readings.append(Reading(line, "Zn", "213.9", vial, (value,)))
    return made


def wide_table() -> Export:
    """Element columns side by side."""
    made = Export("WT-0101.csv")
    made.write("Sample ID,Zn 213.9,Cd 228.8,Pb 220.3")
    for at, vial in enumerate(RACK):
        values = [signal(vial, at, analyte=number) for number in range(3)]
        line = made.write(",".join([vial.label, *map(str, values)]))
        for (element, channel), value in zip((("Zn", "213.9"), ("Cd", "228.8"), ("Pb", "220.3")), values, strict=True):
            made.readings.append(Reading(line, element, channel, vial, (value,)))
    return made


def two_header_lines() -> Export:
    """The elements on one line, over the first of their columns; what the columns hold on the next."""
    made = Export("TH-0101.csv")
    made.write(";Zn 213.9;;Pb 220.3;", "Label;Mean;SD;Mean;SD")
    for at, vial in enumerate(RACK):
        values = [signal(vial, at, analyte=number) for number in range(2)]
        line = made.write(";".join([vial.label, f"{values[0]}", "0.0004", f"{values[1]}", "0.0005"]))
        made.readings += [
            Reading(line, "Zn", "213.9", vial, (values[0],)),
            Reading(line, "Pb", "220.3", vial, (values[1],)),
        ]
    return made


def preamble_and_footer() -> Export:
    """Lines above and below the table; the element above it."""
    made = Export("PT-0101.txt")
    made.write("Absorption run", "Element: Cd", "Batch: 0101", "Analyst: bench 2", "")
    made.write("No;Label;Absorbance;Date;Time")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        line = made.write(f"{at + 1};{vial.label};{value};{at + 1:02}.12.2026;08:{at + 10}:07")
        made.readings.append(Reading(line, "Cd", None, vial, (value,)))
    made.write("Averages;;0.2;;", "End of run")
    return made


def decimal_comma() -> Export:
    """Decimal commas between semicolons, in labels as well."""
    made = Export("DC-0101.csv", encoding="cp1252", end="\r\n")
    made.write("Bezeichnung;Element;Extinktion;Bemerkung")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        label = vial.label.replace(".", ",")
        line = made.write(f"{label};Zn;{str(value).replace('.', ',')};{'20 °C' if at == 3 else ''}")
        made.readings.append(Reading(line, "Zn", None, vial, (value,)))
    return made


def utf16_tabs() -> Export:
    """Tabs in UTF-16 with its mark."""
    made = Export("UT-0101.txt", encoding="utf-16", end="\r\n")
    made.write("Vessel\tElement\tCurrent (nA)")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        line = made.write(f"{vial.label}\tCd\t{value}")
        made.readings.append(Reading(line, "Cd", None, vial, (value,)))
    return made


def replicate_columns() -> Export:
    """Three readings beside each other."""
    made = Export("RC-0101.csv")
    made.write("Run;Label;Element;R1;R2;R3")
    for at, vial in enumerate(RACK):
        values = tuple(signal(vial, at, replicate) for replicate in range(3))
        line = made.write(";".join([str(at + 1), vial.label, "Zn", *map(str, values)]))
        made.readings.append(Reading(line, "Zn", None, vial, values))
    return made


def mean_and_sd() -> Export:
    """Means with their SD, and the instrument's own concentration."""
    made = Export("MS-0101.csv")
    made.write("Sample Name,Compound,Mean,SD,Conc (mg/L)")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        line = made.write(f"{vial.label},Zn,{value},0.0004,{round(value / 0.1831, 3)}")
        made.readings.append(Reading(line, "Zn", None, vial, (value,)))
    return made


def type_column() -> Export:
    """A column says what each vial is; the labels say nothing but their names, and the spiked ones a level."""
    made = Export("TY-0101.csv")
    made.write("Solution,Type,Nominal (mg/L),Zn 213.9 Mean,Zn 213.9 SD")
    names = {"STD": "C", "BLK": "Water ", "CHK": "Q"}
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        label = vial.label.replace(" +", "/")
        start = label[:3]
        label = f"{names[start]}{at + 1}" if start in names else label
        nominal = "" if vial.nominal is None else f"{vial.nominal:g}"
        line = made.write(f"{label},{vial.word},{nominal},{value},0.0003")
        made.readings.append(Reading(line, "Zn", "213.9", replace(vial, label=label), (value,)))
    return made


def sections() -> Export:
    """Sections in brackets, the table in one of them."""
    made = Export("SE-0101.csv")
    made.write("[Header]", "Batch,0101", "", "[Data]", "Label,Element,Peak Area")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        line = made.write(f"{vial.label},Zn,{value}")
        made.readings.append(Reading(line, "Zn", None, vial, (value,)))
    made.write("", "[Log]", "Pump started", "Pump stopped")
    return made


def nominal_in_brackets() -> Export:
    """Nominals in brackets in the column of the results."""
    made = Export("NB-0101.csv")
    made.write("Label;Element;Intensity;Result (mg/L)")
    for at, vial in enumerate(RACK):
        value = signal(vial, at)
        label = f"Cal {'ABCDEF'[at]}" if vial.role == "standard" else vial.label.split(" 1.5")[0]
        result = f"[{vial.nominal:g}]" if vial.nominal is not None else f"{round(value / 0.1831, 3)}"
        line = made.write(f"{label};Zn;{value};{result}")
        made.readings.append(Reading(line, "Zn", None, replace(vial, label=label), (value,)))
    return made


def blocks() -> Export:
    """A small table under each vial's name, with its mean."""
    made = Export("BL-0101.txt")
    made.write("Emission report", "")
    for at, vial in enumerate(RACK):
        made.write(f"Sample: {vial.label}", "Rep\tElement\tSignal")
        for replicate in range(3):
            value = signal(vial, at, replicate)
            line = made.write(f"{replicate + 1}\tZn\t{value}")
            made.readings.append(Reading(line, "Zn", None, vial, (value,)))
        made.write(f"Mean {signal(vial, at, 1)}", "")
    return made


def replicate_rows() -> Export:
    """Replicates below each other, with rows of mean and SD, the label only on the first."""
    made = Export("RR-0101.csv")
    made.write("Label,Element,Rep,Signal")
    for at, vial in enumerate(RACK):
        for replicate in range(3):
            value = signal(vial, at, replicate)
            line = made.write(f"{'' if replicate else vial.label},Zn,{replicate + 1},{value}")
            made.readings.append(Reading(line, "Zn", None, vial, (value,)))
        made.write(f",Zn,Mean,{signal(vial, at, 1)}", ",Zn,SD,0.0003")
    return made


def volume_column() -> Export:
    """Flasks of one name, the volume of standard in a column."""
    made = Export("VC-0101.csv")
    made.write("Label,Element,Std (mL),Absorbance")
    for at, vial in enumerate(FLASKS):
        value = signal(vial, at)
        line = made.write(f"{vial.label},Fe,{vial.dose},{value}")
        made.readings.append(Reading(line, "Fe", None, vial, (value,)))
    return made


def units_row() -> Export:
    """Units on a line of their own below the names."""
    made = Export("UR-0101.csv")
    made.write("Label,Element,Added,Signal", ",,mg/L,cps")
    for at, vial in enumerate(FLASKS):
        value = signal(vial, at)
        line = made.write(f"{vial.label},Fe,{vial.dose},{value}")
        made.readings.append(Reading(line, "Fe", None, replace(vial, unit="mg/L"), (value,)))
    return made


def wide_replicates() -> Export:
    """Numbered readings of each element side by side."""
    made = Export("WR-0101.csv")
    made.write("Name,Zn 213.9 R1,Zn 213.9 R2,Pb 220.3 R1,Pb 220.3 R2")
    for at, vial in enumerate(RACK):
        values = [[signal(vial, at, replicate, number) for replicate in range(2)] for number in range(2)]
        line = made.write(",".join([vial.label, *(str(value) for pair in values for value in pair)]))
        made.readings += [
            Reading(line, "Zn", "213.9", vial, tuple(values[0])),
            Reading(line, "Pb", "220.3", vial, tuple(values[1])),
        ]
    return made


SHAPES: tuple[Callable[[], Export], ...] = (
    long_table, wide_table, two_header_lines, preamble_and_footer, decimal_comma, utf16_tabs, replicate_columns,
    mean_and_sd, type_column, sections, nominal_in_brackets, blocks, replicate_rows, volume_column, units_row,
    wide_replicates,
)  # fmt: skip
