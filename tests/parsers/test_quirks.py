"""Every quirk that exports are known to have stands in an invented export, which is read as expected."""

from __future__ import annotations

import re
from fnmatch import fnmatch
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from parsers.errors import ExportRefused
from parsers.examples import differences, written_csv
from parsers.layout import parse_layout
from parsers.read import claims, read

if TYPE_CHECKING:
    from parsers.layout import Layout
    from parsers.readings import Readings

EXPORTS = Path(__file__).parents[1] / "exports"
CASES = sorted(path.parent for kind in ("cookbook", "quirks") for path in (EXPORTS / kind).glob("*/layout.yaml"))
#: (quirk, the case that has it, what of its bytes shows it)
QUIRKS = [
    ("a mark of UTF-8 before the first header", "wide-rsd-rows", rb"^\xef\xbb\xbf"),
    ("single-byte text with a micro sign", "sources-in-order", rb"\xb5L"),
    ("UTF-16 with a mark, tabs in a .csv", "appended-batches", rb"(?s)^\xff\xfe.*\t\x00"),
    ("UTF-16 without a mark", "utf16-without-mark", rb"^L\x00a\x00"),
    ("carriage returns alone", "odd-bytes", rb"\r[^\n]"),
    ("pairs of carriage return and line feed", "wide-rsd-rows", rb"\r\n"),
    ("line ends of several kinds", "odd-bytes", rb"(?s)\r\n.*[^\r]\n"),
    ("no line end behind the last line", "odd-bytes", rb"last\Z"),
    ("commas in a .txt", "odd-bytes", rb"Day,Hour"),
    ("line breaks in quoted header cells", "wide-rsd-rows", rb'"52  Cr\n'),
    ("a quoted value that holds the separator", "odd-bytes", rb'"HRB-2, deep"'),
    ("commas in a tab cell without quotes", "utf16-without-mark", rb",\x00 \x00w"),
    ("separators and empty columns at the end", "wide-header-lines", rb";;;\n"),
    ("blanks around cells, a blank cell of one blank", "odd-bytes", rb", ,"),
    ("double and non-breaking blanks in names", "odd-bytes", rb"Vial  name.*\xc2\xa0"),
    ("a preamble whose values belong to every row", "sections", rb"Batch;NI"),
    ("title and blank lines before a header found by pattern", "wide-header-lines", rb"\n\nSample;Date"),
    ("sections in brackets", "sections", rb"\[Data\]"),
    ("unlike tables and a row count that lies", "sections", rb"Rows;999"),
    ("a block for each sample with mean and SD lines", "blocks-per-sample", rb"Mean  0.1024"),
    ("page heads and form feeds", "blocks-per-sample", rb"\x0cPrinted report"),
    ("appended batches, another order of columns", "appended-batches", rb"C\x00o\x00u\x00n\x00t\x00s\x00\t\x00L\x00"),
    ("footer statistics", "wide-header-lines", rb"Average;"),
    ("log text behind the numbers", "odd-bytes", rb"\rLog: lamp"),
    ("samples as columns", "transposed", rb"Vial,BLK 1,SED-20"),
    ("a plate of wells", "plate", rb"\t1\t2\t3\nA\t"),
    ("a sample that only the file's name says", "name-value", rb"\AVoltammetry(?!.*SED-31)"),
    ("lines of name, value and unit", "name-value", rb"Peak height = -41.2 nA"),
    ("group names over the first of their columns", "wide-header-lines", rb"Zn 206.200;;Cd"),
    ("a column named on one header line only", "wide-header-lines", rb";;Mean;.*;Remark;"),
    ("hundreds of columns of which few matter", "wide-rsd-rows", rb"QC119"),
    ("the replicate as a header line", "replicate-header", rb"\n;1;2;3;1"),
    ("a unit in the header", "sections", rb"Result mg/l"),
    ("a units row", "wide-header-lines", rb";;cps;cps"),
    ("a unit in brackets", "appended-batches", rb"\(\x00m\x00g\x00/\x00L\x00\)"),
    ("a unit on each row", "sources-in-order", rb"250;\xb5L;"),
    ("the label's name on the units row", "replicate-header", rb"Vessel;cps"),
    ("an unnamed column of SD beside a mean", "unnamed-columns", rb"Zn 213,,Cd"),
    ("detection limits as a row of the header", "replicate-header", rb"LOD;0.2"),
    ("the same header nine times", "unnamed-columns", rb"(?:,Conc){9}\n"),
    ("no header over the label", "unnamed-columns", rb"\A,Zn"),
    ("one element on two masses and in two modes", "wide-rsd-rows", rb"(?s)52  Cr.*53  Cr.*66  Zn.*66  Zn"),
    ("internal-standard columns", "wide-header-lines", rb"Sc 361.383 \(IS\)"),
    ("header words of another language", "two-readings-per-row", rb"Probe,Chlorid Fl\xe4che"),
    ("an RSD row with an empty label under each sample", "wide-rsd-rows", rb"\n,,,,1.5,"),
    ("mean, SD and RSD rows among replicates", "replicate-rows", rb"(?s),,Mean.*,,SD.*,,%RSD"),
    ("injections with a flag and the mean on each", "repeated-mean", rb"140;101;no"),
    ("a label on the first of its rows only", "replicate-rows", rb"\n,,2,101.5"),
    ("below a limit that differs, BQL", "sections", rb"(?s)<0\.02.*BQL"),
    ("a word for missing", "transposed", rb"n\.a\."),
    ("above a limit, OVR", "sections", rb"(?s)OVR.*>15"),
    ("#### and a flat number for saturated", "utf16-without-mark", rb"(?s)9\x009\x009\x009\x00.*#\x00#\x00"),
    ("decimal commas, and a point in censored values", "sections", rb"(?s)<0\.02.*0,31"),
    ("thousands marks: point", "sections", rb"1\.000,0"),
    ("thousands marks: comma", "thousands-comma", rb"1,234\.5"),
    ("thousands marks: apostrophe", "thousands-apostrophe", rb"1'234\.5"),
    ("thousands marks: blanks", "thousands-blank", rb"1 234\.5"),
    ("a bare zero that means below", "two-readings-per-row", rb"Wasser,0,"),
    ("a word in a column of statistics", "wide-header-lines", rb"170\.2;high"),
    ("a unit glued to the number", "name-value", rb"10 mL"),
    ("a percent sign glued to the number", "wide-header-lines", rb"0\.9 %"),
    ("nominals in square brackets among results", "sections", rb"\[0,5\]"),
    ("stars behind numbers", "sources-in-order", rb"0,452 \*"),
    ("exponents of three digits, with comma, with D", "sections", rb"(?s)1,2E\+001.*2,4D\+03"),
    ("status rows without reading", "odd-bytes", rb",rinse"),
    ("one label measured several times", "appended-batches", rb"(?s)(?:V\x00-\x002\x00\t.*){2}"),
    ("a standard that holds some of the analytes", "wide-header-lines", rb"4\.1;;;10001"),
    ("several forms of time", "standards", rb"(?s)03\.04\.26 08\.05.*T08:10:00.*3 Apr"),
    ("date and time in two columns, month first, AM and PM", "odd-bytes", rb"04/03/2026,2:05 PM"),
    ("day first with AM and PM", "blocks-per-sample", rb"03/04/2026 2:05 PM"),
    ("rows not in the order of the run", "odd-bytes", rb"(?s) 3 ,.* 1 , HRB"),
    ("negative readings", "odd-bytes", rb"-0\.5"),
    ("dilution as 1:10", "blocks-per-sample", rb"Dilution 1:10"),
    ("dilution as 1+9", "two-readings-per-row", rb",1\+9"),
    ("dilution as an inverse", "standards", rb"BRN-1;2;;0\.1"),
    ("dilution as two volumes", "sources-in-order", rb"7;5;50"),
    ("dilution in the label beside a column that says 1", "names", rb"Q20 x10,1,"),
    ("spiked by suffix", "names", rb"Q17 SPK"),
    ("spiked by prefix, sample by case", "names", rb"(?s)q18,.*LSP-Q18"),
    ("a duplicate, spiked", "names", rb"Q19 dup LSP"),
    ("a level in the label", "names", rb"Q17_add3"),
    ("a concentration in the label", "blocks-per-sample", rb"BRN-4 \+2 ppm"),
    ("the addition as a column", "volumes", rb"Added ppm"),
    ("spike volume and final volume row by row", "volumes", rb"100,10\.1"),
    ("standards as numbers", "standards", rb"\n0\.5;1;"),
    ("standards as codes with a table", "standards", rb"L1;1;L1"),
    ("standards as multiples of a stock", "standards", rb"Std 0\.1x"),
    ("roles in a column of types", "sections", rb"Leerwert;B;"),
    ("roles as numeric codes", "standards", rb"BRN-1;3;"),
    ("a standard whose label begins like an internal standard", "names", rb"IS-STD 2"),
    ("bare numbers as labels, explained in a table", "sources-in-order", rb"\n1;7;"),
    ("slips in a name", "names", rb"Q  17 SPk"),
    ("a date in a name that is no level", "names", rb"SED 2026-04-03 SPK"),
    ("columns of fixed width without header", "fixed-widths", rb"\ABLK            0\.0012"),
    ("TRUE as a label", "odd-bytes", rb" TRUE ,"),
    ("sodium, and zeros before a label", "volumes", rb"(?s),Na,.*007,"),
]  # fmt: skip

#: (ability, the case that needs it, what of its layout says so)
ABILITIES = [
    ("decode", "utf16-without-mark", "encodings: [utf-16-le]"),
    ("segment", "nested-blocks", "  blocks:\n    begin:"),
    ("find the table", "transposed", "table: transposed"),
    ("columns", "unnamed-columns", "occurrence: 3"),
    ("spread", "wide-header-lines", "unfold:"),
    ("rows", "replicate-rows", "are: excluded"),
    ("numbers", "sections", "marks: [{where: '^<', decimal: '.'}]"),
    ("special values", "sections", "below: "),
    ("labels", "names", "{sample} x{predilution} SPK"),
    ("sources with precedence", "names", "predilution: [{group: predilution}, {from: Dil"),
    ("units", "appended-batches", "unit: {header: "),
    ("times", "standards", "format: ['%d.%m.%Y %H:%M', "),
]


def _export(folder: Path, layout: Layout) -> Path:
    return next(path for path in sorted(folder.iterdir()) if fnmatch(path.name, layout.claims.file))


def _layout(folder: Path) -> Layout:
    document = (folder / "layout.yaml").read_text("utf-8")
    named = re.findall(r"file: ([\w-]+\.csv)", document)
    return parse_layout(document, "layout.yaml", {name: (folder / name).read_text("utf-8") for name in named})


def _read(folder: Path) -> Readings:
    layout = _layout(folder)
    export = _export(folder, layout)
    return read(export.read_bytes(), layout, export.name)


@pytest.mark.parametrize("folder", CASES, ids=lambda folder: folder.name)
def test_the_export_is_read_as_expected(folder: Path) -> None:
    """Each invented export gives exactly the readings that stand beside it, in every field."""
    readings = _read(folder)
    expected = (folder / "expected.csv").read_text("utf-8")

    assert list(differences(readings, expected, "expected.csv")) == []
    assert written_csv(readings) == expected


@pytest.mark.parametrize("folder", CASES, ids=lambda folder: folder.name)
def test_the_layout_claims_its_export(folder: Path) -> None:
    """The claims of each layout hold for the export beside it."""
    layout = _layout(folder)
    export = _export(folder, layout)

    assert claims(layout, export.name, export.read_bytes())


@pytest.mark.parametrize("folder", CASES, ids=lambda folder: folder.name)
def test_every_line_is_accounted_for(folder: Path) -> None:
    """Each line is the line of a reading or stands among those set aside."""
    readings = _read(folder)

    known = {*readings.line.tolist(), *(one.line for one in readings.set_aside)}
    assert known == set(range(1, readings.lines + 1))


@pytest.mark.parametrize(("quirk", "case", "evidence"), QUIRKS, ids=[quirk for quirk, _, _ in QUIRKS])
def test_the_quirk_has_a_case(quirk: str, case: str, evidence: bytes) -> None:
    """The export of the case shows the quirk in its bytes."""
    folder = next(path for path in CASES if path.name == case)

    assert re.search(evidence, _export(folder, _layout(folder)).read_bytes())


@pytest.mark.parametrize(("ability", "case", "evidence"), ABILITIES, ids=[ability for ability, _, _ in ABILITIES])
def test_the_ability_has_a_case(ability: str, case: str, evidence: str) -> None:
    """The layout of the case, which is read as expected, needs the ability."""
    folder = next(path for path in CASES if path.name == case)

    assert evidence in (folder / "layout.yaml").read_text("utf-8")


@pytest.mark.parametrize("folder", CASES, ids=lambda folder: folder.name)
def test_the_reading_explains_itself(folder: Path) -> None:
    """Every column is listed with its use, every distinct label with its rows, and every fault with its cell."""
    readings = _read(folder)

    assert any(use.fields for use in readings.columns)
    assert {use.label for use in readings.labels} >= {readings.label.names[code] for code in readings.label.codes}
    text = _export(folder, _layout(folder)).read_bytes().decode(_layout(folder).encodings[0])
    assert all(fault.cell in text and fault.sentence for fault in readings.faults)


@pytest.mark.parametrize("case", ["thousands-comma", "wide-header-lines", "sections", "transposed", "appended-batches"])
def test_guards_refuse_a_longer_row(case: str) -> None:
    """A row with a field too many refuses the export, whatever its shape, with its line."""
    folder = next(path for path in CASES if path.name == case)
    layout = _layout(folder)
    path = _export(folder, layout)
    encoding = "utf-16" if case == "appended-batches" else layout.encodings[0]
    lines = path.read_bytes().decode(encoding).split("\n")
    at = max(number for number, line in enumerate(lines) if re.match(r"SED|RIV|BRN|Cu |900", line))
    lines[at] += f"{layout.separator}9{layout.separator}9{layout.separator}9"

    with pytest.raises(ExportRefused, match=rf"line {at + 1}: expected \d+ fields as in the header, got \d+"):
        read("\n".join(lines).encode(encoding), layout, path.name)


@pytest.mark.parametrize("folder", [path for path in CASES if path.parent.name == "cookbook"], ids=lambda p: p.name)
def test_the_readme_links_every_recipe(folder: Path) -> None:
    """The README has a line for each export of the cookbook."""
    readme = (EXPORTS.parents[1] / "README.md").read_text("utf-8")

    assert f"(tests/exports/cookbook/{folder.name}/)" in readme
