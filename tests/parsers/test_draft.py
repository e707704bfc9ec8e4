"""A drafted layout reads the common shapes at once, and never reads a reading wrong in silence."""

from __future__ import annotations

import csv
import math
from collections import Counter
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapes import FLASKS, RACK, SHAPES, Export, Reading, Vial, signal

from parsers.draft import Draft, DraftRefused, draft
from parsers.examples import written
from parsers.layout import parse_layout
from parsers.read import ExportRefused, claims, read
from parsers.readings import Readings, Role

if TYPE_CHECKING:
    from collections.abc import Callable

EXPORTS = Path(__file__).parents[1] / "exports"
CASES = sorted(path for kind in ("cookbook", "quirks") for path in (EXPORTS / kind).glob("*/expected.csv"))
#: Files that stand beside an export and are none.
BESIDE_AN_EXPORT = (
    "levels.csv",
    "README.md",
    "expected.csv",
    "layout.yaml",
    "bench-sheet.csv",
    "wells.csv",
    "bench.csv",
)
#: What must never be wrong.
JUDGED = ("line", "role", "signal", "nominal", "added", "spike_volume", "predilution")
#: Share of the readings that a draft must read right without a person's hand.
ENOUGH = 0.8


def compared(found: Readings, export: Export) -> Counter[str]:
    """Count readings that are right, open (an error, or a part not said yet), wrong, and missing."""
    wanted = {(one.line, one.analyte, one.channel): one for one in export.readings}
    faulty = {fault.row for fault in found.faults}
    counts: Counter[str] = Counter()
    for row in range(len(found)):
        analyte, channel = found.analyte[row], found.channel[row]
        keys = [key for key in wanted if key[0] == int(found.line[row]) and (analyte in (key[1], "?"))]
        key = next((key for key in keys if key[2] == channel), keys[0] if channel is None and len(keys) == 1 else None)
        if key is None:
            counts["wrong"] += row not in faulty
            continue
        counts[_judged(found, row, wanted.pop(key)) if row not in faulty else "open"] += 1
    counts["missing"] = len(wanted)
    return counts


def _judged(found: Readings, row: int, wanted: Reading) -> str:
    vial = wanted.vial
    signals = found.signals[row]
    same = tuple(signals[np.isfinite(signals)].tolist()) == wanted.signals
    same &= Role(int(found.role[row])).word == vial.role
    if vial.sample:
        same &= found.sample[row] == vial.sample and (found.level[row] or "") == vial.level
    for quantity, meant, unit in (
        (found.nominal, vial.nominal, None),
        (found.spike_volume, vial.dose if vial.unit == "mL" else None, "mL"),
        (found.added, vial.dose if vial.unit == "mg/L" else None, "mg/L"),
    ):
        got = quantity.values[row]
        if math.isfinite(got):
            same &= meant is not None and math.isclose(got, meant, abs_tol=1e-12)
            same &= unit is None or quantity.units[row] == unit
    if not same:
        return "wrong"
    known = vial.nominal is None or math.isfinite(found.nominal.values[row])
    return "right" if known and found.analyte[row] == wanted.analyte else "open"


@pytest.mark.parametrize("shape", SHAPES, ids=lambda shape: shape.__name__)
def test_a_draft_reads_a_common_shape_without_editing(shape: Callable[[], Export]) -> None:
    """At least four readings in five are right with the layout as it was drafted, and none is wrong in silence."""
    export = shape()

    drafted = draft([(export.name, export.data)])

    counts = compared(read(export.data, drafted.layout, export.name), export)
    assert counts["wrong"] == 0, drafted.text
    assert counts["right"] >= ENOUGH * len(export.readings), (counts, drafted.text)


@pytest.mark.parametrize("shape", SHAPES, ids=lambda shape: shape.__name__)
def test_a_draft_is_a_layout_that_claims_its_example(shape: Callable[[], Export]) -> None:
    """The text that is handed out parses as it stands, and claims the export that it was drafted from."""
    export = shape()

    drafted = draft([(export.name, export.data)])

    assert claims(parse_layout(drafted.text, "layouts/new.yaml"), export.name, export.data)
    assert max(map(len, drafted.text.splitlines())) <= 120


@pytest.mark.parametrize("case", CASES, ids=lambda path: path.parent.name)
def test_a_draft_of_a_difficult_export_is_refused_or_right(case: Path) -> None:
    """Of the exports that hold every known quirk, drafts read nothing else without an error than their expected tables.

    What a draft does not read, or reads without a part that only a person knows, is no fault of it.
    """
    (export,) = [path for path in case.parent.iterdir() if path.name not in BESIDE_AN_EXPORT]
    data = export.read_bytes()
    try:
        drafted = draft([(export.name, data)])
        found = read(data, drafted.layout, export.name)
    except (DraftRefused, ExportRefused):
        return
    expected = list(csv.DictReader(case.read_text(encoding="utf-8").splitlines(keepends=True)))
    faulty = {fault.row for fault in found.faults}
    for row, said in enumerate(written(found)):
        if row in faulty:
            continue
        fits = [one for one in expected if all(_agrees(name, one.get(name, ""), said[name]) for name in JUDGED)]
        assert fits, (said, drafted.text)


COOKBOOK = [case for case in CASES if case.parent.parent.name == "cookbook"]


def drafted_beside(case: Path) -> tuple[Path, Draft]:
    """Draft from an export of the cookbook and the side tables beside it."""
    beside = [path for path in case.parent.iterdir() if path.name not in ("README.md", "expected.csv", "layout.yaml")]
    (export,) = [path for path in beside if path.name not in BESIDE_AN_EXPORT]
    tables = sorted(path for path in beside if path != export)
    return export, draft([(path.name, path.read_bytes()) for path in (export, *tables)])


@pytest.mark.parametrize("case", COOKBOOK, ids=lambda path: path.parent.name)
def test_a_draft_reads_the_cookbook_without_editing(case: Path) -> None:
    """Of each family of shapes a draft reads four readings in five right as it stands, and none wrong in silence.

    Right means line, role, all signals, what was added, nominal and dilution, each with its unit; a reading whose
    signal cannot be used must be an error. Samples may have other names, as long as the same vials belong together.
    """
    export, drafted = drafted_beside(case)
    found = read(export.read_bytes(), drafted.layout, export.name)
    expected = list(csv.DictReader(case.read_text(encoding="utf-8").splitlines(keepends=True)))
    faulty = {fault.row for fault in found.faults}
    pool, right = list(expected), 0
    samples: dict[str, set[str]] = {}
    for row, said in enumerate(written(found)):
        fits = [one for one in pool if all(_is(name, one.get(name, ""), said[name]) for name in JUDGED)]
        if row in faulty:
            right += bool(fits) and not fits[0]["signal"]
            continue
        assert fits, (said, drafted.text)
        right += 1
        pool.remove(fits[0])
        samples.setdefault(said["sample"], set()).add(fits[0]["sample"])

    assert right >= ENOUGH * len(expected), (right, len(expected), drafted.text)
    assert all(len(names) == 1 for names in samples.values()), samples
    assert len({name for names in samples.values() for name in names}) == len(samples)


def _is(name: str, wanted: str, got: str) -> bool:
    """Tell whether a field is what it must be; ppm stands for mg/L, and no dilution for 1."""
    if name in ("signal", "line"):
        return [float(one) for one in wanted.split()] == [float(one) for one in got.split()]
    if name == "role":
        return got == wanted
    said, meant = (text.split() or ["1"] * (name == "predilution") for text in (got, wanted))
    units = [one.casefold().replace("ppm", "mg/l") for one in said[1:]], [one.casefold() for one in meant[1:]]
    return [float(one) for one in said[:1]] == [float(one) for one in meant[:1]] and units[0] == units[1]


def _agrees(name: str, wanted: str, got: str) -> bool:
    if got == "?":
        return True
    if name in ("signal", "line"):
        return [float(one) for one in wanted.split()] == [float(one) for one in got.split()]
    if name == "role":
        return got == wanted
    said, meant = got.split(), wanted.split() or (["1"] if name == "predilution" else [])
    same_unit = said[1:] in ([], meant[1:]) or said[1] in ("mg/l", "ppm")  # as the header has it
    return not said or (bool(meant) and float(said[0]) == float(meant[0]) and same_unit)


@st.composite
def exports(draw: st.DrawFn) -> Export:
    """Write exports with signs, words, digits and label styles that a draft may take for something else."""
    separator = draw(st.sampled_from([";", ",", "\t"]))
    decimal = draw(st.sampled_from([".", ","])) if separator != "," else "."
    digits = draw(st.integers(0, 4))
    scale = draw(st.sampled_from([1.0, 10.0, 1000.0, 20000.0]))
    sign = draw(st.sampled_from([" +", "+", "/", "_", " ", " add ", "-"]))
    level = draw(st.sampled_from(["A1", "1", "0.5", "SPK", "spike", "x", "S1", "dup", "B"]))
    standard = draw(st.sampled_from(["STD ", "Cal", "S", "Standard "]))
    numbers = draw(st.sampled_from([("0", "0.5", "1", "2"), ("1", "2", "3", "4"), ("0", "1", "2", "3")]))
    by_column = draw(st.booleans())
    header = draw(st.sampled_from(["Spike", "Std (mL)", "Added", "x", "Dose (mL)", "Vol", "Added (mg/L)"]))
    typed = draw(st.booleans()) and not by_column
    made = Export("XX-0001.csv")
    if draw(st.booleans()):
        made.write("Bench report", "Batch: 12", "")
    names = ["Label", "Element", *([header] if by_column else []), *(["Type"] if typed else []), "Signal"]
    made.write(separator.join(names))
    vials: list[tuple[Vial, bool]] = []
    for at, text in enumerate(numbers):
        # mere numbers stand for other concentrations: their nominal must not be read from the label
        certain = "." in "".join(numbers)
        nominal = float(text) if certain else 10.0 * (at + 1) ** 2
        vials.append((Vial(f"{standard}{text.replace('.', decimal)}", "standard", nominal=nominal, word="std"), False))
    if by_column:
        unit = header.partition("(")[2].strip(")")
        vials += [(replace(vial, unit=unit), True) for vial in FLASKS]
    else:
        for name in ("SED-12", "BRN-3"):
            mark = "spiked" if "+" in sign or level not in ("dup", "B", "x") else "unknown"  # a plus is an addition
            vials.append((Vial(name, "unspiked", name), True))
            vials.append(
                (Vial(f"{name}{sign}{level}", mark, name, f"{sign.strip()} {level}" if "add" in sign else level), True)
            )
    for at, (vial, is_sample) in enumerate(vials):
        value = round(signal(vial, at) * scale, digits)
        written = f"{value:.{digits}f}".replace(".", decimal)
        volume = vial.dose if is_sample else None
        cells = [vial.label, "Zn"]
        if by_column:
            cells.append("" if volume is None else f"{volume:g}".replace(".", decimal))
        if typed:
            cells.append("std" if not is_sample else "sample")
        line = made.write(separator.join([*cells, written]))
        made.readings.append(Reading(line, "Zn", None, vial, (value,)))
    return made


@settings(max_examples=300, deadline=None)
@given(exports())
def test_a_draft_never_reads_a_reading_wrong_in_silence(export: Export) -> None:
    """Whatever a draft takes an export for, what it reads without an error is what a person reads; else it is open."""
    try:
        drafted = draft([(export.name, export.data)])
        found = read(export.data, drafted.layout, export.name)
    except (DraftRefused, ExportRefused):
        return
    wanted = {one.line: one for one in export.readings}
    faulty = {fault.row for fault in found.faults}
    for row in range(len(found)):
        reading = wanted[int(found.line[row])]
        if row in faulty:
            continue
        if reading.vial.role == "unknown":  # a duplicate by its own name is an honest reading
            assert found.sample[row] == reading.vial.label, drafted.text
            continue
        verdict = _judged(found, row, reading)
        assert verdict != "wrong", (reading, drafted.text)


@settings(max_examples=400, deadline=None)
@given(st.sampled_from(SHAPES), st.data())
def test_a_damaged_example_ends_in_a_layout_or_a_reason(shape: Callable[[], Export], data: st.DataObject) -> None:
    """Whatever bytes are lost, doubled or put in, drafting ends in a layout that parses or says why there is none."""
    damaged = bytearray(shape().data)
    for _ in range(data.draw(st.integers(1, 6))):
        at = data.draw(st.integers(0, len(damaged) - 1))
        size = data.draw(st.integers(1, 60))
        match data.draw(st.sampled_from(["lose", "double", "put in"])):
            case "lose":
                del damaged[at : at + size]
            case "double":
                damaged[at:at] = damaged[at : at + size]
            case _:
                damaged[at:at] = data.draw(
                    st.sampled_from([b'"', b";", b",", b"\n", b"\0", b"[x]", b"{", b"\xe9", b"'", b": #"])
                )
        if not damaged:
            break
    text = reason = ""
    try:
        text = draft([("DM-0001.csv", bytes(damaged))]).text
    except DraftRefused as refused:
        reason = str(refused)
    assert reason.startswith("DM-0001.csv") or parse_layout(text, "layouts/new.yaml")


def test_a_number_that_may_be_two_is_an_error() -> None:
    """Where no cell decides between decimal mark and thousands, the draft reads none of them and says so."""
    data = b"Label;Element;Signal\nSED-1;Zn;1.234\nSED-2;Zn;12.345\nBLK;Zn;3.001\n"

    drafted = draft([("AM-1.csv", data)])

    assert len(read(data, drafted.layout, "AM-1.csv").faults) == 3
    assert any("may mean two numbers" in doubt for doubt in drafted.unsure)


@pytest.mark.parametrize("sign", [".", ","])
def test_one_cell_decides_the_decimal_mark(sign: str) -> None:
    """A single number that can be read one way only decides for the whole column."""
    rows = [f"SED-1;Zn;1{sign}234", f"SED-2;Zn;0{sign}34"]
    data = "\n".join(["Label;Element;Signal", *rows, ""]).encode()

    found = read(data, draft([("AM-1.csv", data)]).layout, "AM-1.csv")

    assert found.signals[:, 0].tolist() == [1.234, 0.34]


def test_day_and_month_that_may_be_changed_over_give_no_time() -> None:
    """A date such as 03/04/2026 is left out with a comment; one day above 12 decides it."""
    rows = ["Label,Element,Signal,Date,Time", "SED-1,Zn,0.1,03/04/2026,08:00:00", "SED-2,Zn,0.2,{},09:00:00", ""]
    doubtful, sure = ("\n".join(rows).format(day).encode() for day in ("05/04/2026", "15/04/2026"))

    first, second = (draft([("TM-1.csv", data)]) for data in (doubtful, sure))

    assert first.layout.columns.measured_at is None
    assert any("day and month" in doubt for doubt in first.unsure)
    assert second.layout.columns.measured_at is not None
    assert second.layout.columns.measured_at.format == ("%d/%m/%Y %H:%M:%S",)


def test_several_examples_are_drafted_together() -> None:
    """Labels and odd cells of all examples are explained, and the claim holds what their names have in common."""
    first = b"Label,Element,Signal\nSED-1,Zn,0.1\nBLK 1,Zn,0.2\n"
    second = b"Label,Element,Signal\nROOF_7,Zn,<0.02\nSED-3 +A1,Zn,0.2\nSED-3,Zn,0.1\n"

    drafted = draft([("MU-01.csv", first), ("MU-02.csv", second)])

    assert drafted.layout.claims.file == "MU-*.csv"
    assert {rule.role for rule in drafted.layout.labels} == {"blank", "spiked", "unspiked"}
    for data in (first, second):
        assert len(read(data, drafted.layout, "MU")) == len(data.splitlines()) - 1


def test_examples_of_two_kinds_are_refused() -> None:
    """Exports with unlike columns are named, and nothing is drafted."""
    with pytest.raises(DraftRefused, match=r"B-2\.csv, line 1: its columns are not those of A-1\.csv"):
        draft(
            [("A-1.csv", b"Label,Element,Signal\nS-1,Zn,1\nS-2,Zn,2\n"), ("B-2.csv", b"Label;Signal\nS-1;1\nS-2;2\n")]
        )


@pytest.mark.parametrize(
    ("data", "reason"),
    [
        (b"Dear colleague,\nthe run is done.\n", "expected a table with a separator, a header and rows of numbers"),
        (b"", "empty file"),
        (b"Label,Element,A,B\nS-1,Zn,1,2\nS-2,Zn,2,3\n", "expected one column that can be the signal, found 'A', 'B'"),
        (b",Element,Signal\nS-1,Zn,1\nS-2,Zn,2\n", "the column that names the vials has no header"),
        (b"SED-1,Zn,0,12\nSED-2,Zn,0,34\n", "expected a header of 4 names above the rows"),
    ],
)
def test_a_shape_beyond_drafting_is_refused_with_its_reason(data: bytes, reason: str) -> None:
    """Where a shape cannot be made out, no layout comes, but what was looked for and found."""
    with pytest.raises(DraftRefused) as refused:
        draft([("ODD-1.csv", data)])

    assert reason in str(refused.value)
    assert str(refused.value).endswith("No layout was drafted.")


def test_what_only_a_person_knows_is_left_to_fill_in() -> None:
    """The amounts of levels, the stock and an analyte that nothing names are marked, and the layout still parses."""
    data = b"Label,Signal\nSED-1,0.1\nSED-1 +A1,0.2\nSED-1 +A2,0.3\n"

    drafted = draft([("FI-1.csv", data)])

    assert drafted.text.count("# FILL IN:") == len(drafted.fill_in) == 3
    assert "levels: {A1: … mL, A2: … mL}" in drafted.text


def test_symbols_of_elements_are_the_analyte_under_any_header() -> None:
    """Elements in a column of an unknown name are never merged to one analyte."""
    data = b"Label,Metall,Signal\nSED-1,Zn,0.1\nSED-1,Cd,0.2\n"

    found = read(data, draft([("SY-1.csv", data)]).layout, "SY-1.csv")

    assert [found.analyte[row] for row in range(len(found))] == ["Zn", "Cd"]


def test_rows_of_one_label_that_a_word_tells_apart_have_no_role() -> None:
    """Where an unknown column may say which of the equal labels is spiked, none of them is called unspiked."""
    data = b"Label,Element,Kode,Signal\nSED-1,Zn,u,0.1\nSED-1,Zn,a,0.2\nSED-2,Zn,u,0.1\nSED-2,Zn,a,0.2\n"

    drafted = draft([("KO-1.csv", data)])

    assert len(read(data, drafted.layout, "KO-1.csv").faults) == 4
    assert any("Kode may say" in ask for ask in drafted.fill_in)


def test_readings_that_do_not_count_are_left_out() -> None:
    """A column that says which readings are used is honoured, with a comment."""
    data = b"Label,Element,Signal,Used\nSED-1,Zn,0.1,yes\nSED-1,Zn,0.9,no\nSED-2,Zn,0.1,yes\n"

    drafted = draft([("US-1.csv", data)])

    assert read(data, drafted.layout, "US-1.csv").line.tolist() == [2, 4]
    assert any("does not count" in doubt for doubt in drafted.unsure)


def test_a_spike_that_is_not_understood_is_no_sample() -> None:
    """A label that may be a spiked sample or a name of its own gives no reading until a person decides."""
    data = b"Label,Element,Signal\nSED-1,Zn,0.1\nSED-1 x,Zn,0.2\n"

    drafted = draft([("SP-1.csv", data)])

    assert [aside.line for aside in read(data, drafted.layout, "SP-1.csv").set_aside] == [1, 3]
    assert any("'SED-1 x'" in doubt for doubt in drafted.unsure)


def test_the_rack_has_every_kind_of_vial() -> None:
    """The shapes hold every role that a draft must find, so that none is right by never being there."""
    assert {vial.role for vial in RACK} == {"standard", "blank", "check_standard", "unspiked", "spiked"}
