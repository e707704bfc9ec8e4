"""Settings and layouts as they are read: every key, every fault with its place, and what a layout decides again."""

from __future__ import annotations

import json
import types
from pathlib import Path
from typing import Annotated, Any, Union, get_args, get_origin

import pytest
from pydantic import BaseModel

from parsers.document import load
from rules.limits import DEFAULTS
from rules.method import Measure
from watcher.schema import SettingsFile
from watcher.settings import File, Settings, SettingsInvalid, Snapshot, compile_snapshot, read_files

ROOT = Path(__file__).parents[2]
CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {exports: ./exports, results: ./results}
layouts: [flame.yaml]
stocks:
  - name: ZN-5
    contains: {Zn: 5 mg/L}
bench: {aliquot: 10 mL, made_up_to: 50 mL, levels: {A1: 5 mL}}
report: additions
units: {export: mg/L, result: mg/L}
mail: none
"""
LAYOUT = """\
layout: flame bench
claims: {file: 'FL-*.csv'}
separator: ';'
columns:
  label: Label
  analyte: Element
  signal: R1
  added: Added
"""
MAIL = "mail: {server: mail.example, from: bench@example, to: lead@example"


def settings(config: str = CONFIG, *layouts: str) -> Settings:
    """Compile texts as if they stood in files."""
    names = ["flame.yaml", *(f"layout-{number}.yaml" for number in range(2, 9))]
    files = tuple(File(name, text) for name, text in zip(names, layouts or (LAYOUT,), strict=False))
    return compile_snapshot(Snapshot("/laboratory", File("config.yaml", config), files))


def faults(config: str = CONFIG, *layouts: str) -> list[str]:
    """Return the faults of texts that cannot be used."""
    with pytest.raises(SettingsInvalid) as invalid:
        settings(config, *layouts)
    return [str(fault) for fault in invalid.value.faults]


def _changed(old: str, new: str, text: str = CONFIG) -> str:
    assert text.count(old) == 1
    return text.replace(old, new)


# -- what is there -------------------------------------------------------------------------------------------------


def test_the_smallest_settings_have_safe_defaults() -> None:
    """What is not written is watched every 10 s, settles in 5 s, mails nobody and decides nothing about blanks."""
    found = settings()
    ((_, method),) = found.layouts
    service = found.service()

    assert (service["settle_seconds"], service["scan_seconds"], service["complete_after_seconds"]) == (5, 10, 7200)
    assert (service["subfolders"], service["events"], service["mail"]) == (False, True, None)
    assert service["exports"] == ["/laboratory/exports"]
    assert (service["results"], service["records"]) == ("/laboratory/results", "/laboratory/records")
    assert (method.blank, method.added_refers_to, method.confidence) == (None, None, 0.95)
    assert method.limits == {}


@pytest.mark.parametrize(
    ("security", "port"), [("starttls", 587), ("tls", 465), ("none", 25)], ids=["starttls", "tls", "none"]
)
def test_the_port_follows_the_security(security: str, port: int) -> None:
    """Without a port, mail goes to the one that is usual for its protection; a stated one holds."""
    usual = settings(_changed("mail: none", f"{MAIL}, security: {security}}}"))
    stated = settings(_changed("mail: none", f"{MAIL}, security: {security}, port: 2525}}"))

    assert (usual.service()["mail"]["port"], stated.service()["mail"]["port"]) == (port, 2525)


def test_every_key_of_the_schema_stands_in_the_example() -> None:
    """The example configuration loads with the demonstration's layouts, and shows every key that there is."""
    text = (ROOT / "config.example.yaml").read_text("utf-8")
    layouts = ROOT / "watcher" / "laboratory" / "layouts"
    shown = {tuple(part for part in loc if isinstance(part, str)) for loc in load(text, "config.example.yaml").lines}
    hidden = {("mail", "password"), ("mail", "ca_file"), ("stocks", "uncertainty")}  # refused; in a comment, twice
    hidden |= {("variance", "model"), ("variance", "evidence")}  # in a comment
    hidden |= {("units", word) for word in ("ppm", "ppb", "ppt")}  # in a comment

    found = compile_snapshot(
        Snapshot(
            "/laboratory",
            File("config.example.yaml", text),
            tuple(File(path, (layouts.parent / path).read_text("utf-8")) for path in load(text, "").values["layouts"]),
        )
    )

    assert [layout.layout for layout, _ in found.layouts] == ["flame bench", "brine bench", "panel"]
    assert {loc for loc in _keys(SettingsFile) if loc not in hidden and not _shown(loc, shown)} == set()
    for loc in hidden - {("mail", "password")}:
        assert f"{loc[-1]}:" in text


def _keys(model: type[BaseModel], at: tuple[str, ...] = ()) -> set[tuple[str, ...]]:
    """Every key path of a schema; names that people choose are written as *, and each check may stand for all."""
    found: set[tuple[str, ...]] = set()
    for name, field in model.model_fields.items():
        loc = (*at, field.alias or name)
        if at[-1:] == ("limits",) or (at[-1:] == ("exceptions",) and name in DEFAULTS):
            continue  # one for each check; they are tested one by one below
        found.add(loc)
        for inner, chosen in _models(field.annotation):
            found |= _keys(inner, (*loc, *chosen))
    return found


def _models(annotation: Any, chosen: tuple[str, ...] = ()) -> list[tuple[type[BaseModel], tuple[str, ...]]]:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [(annotation, chosen)]
    origin, arguments = get_origin(annotation), get_args(annotation)
    if origin is dict:
        return _models(arguments[1], ("*",))
    if origin in (Union, types.UnionType, Annotated, tuple):
        return [model for argument in arguments for model in _models(argument, chosen)]
    return []


def _shown(loc: tuple[str, ...], shown: set[tuple[str, ...]]) -> bool:
    return any(len(one) == len(loc) and all(a in (b, "*") for a, b in zip(loc, one, strict=True)) for one in shown)


def test_scalars_mean_what_was_written() -> None:
    """`no`, `010`, `1e5`, `1:30` and a date stay the texts that they are where a text is wanted."""
    config = _changed("name: ZN-5", "name: 1e5\n    lot: 010")
    config = _changed("laboratory: Skerry Point Water Laboratory", "laboratory: no", config)
    config = _changed("levels: {A1: 5 mL}", "levels: {1:30: 5 mL, 007: 10 mL, on: 15 mL}", config)
    config += "analytes: {Zn: {linear_to: 1e1 mg/L, proved_on: 2026-09-14}}\n"

    found = settings(config)
    ((_, method),) = found.layouts

    assert found.file.laboratory == "no"
    assert (method.stocks[0].name, method.stocks[0].lot) == ("1e5", "010")
    assert list(method.bench.levels) == ["1:30", "007", "on"]
    assert method.analytes["Zn"].proved_on == "2026-09-14"
    assert method.analytes["Zn"].linear_to == Measure(10.0, "mg/L")


@pytest.mark.parametrize(
    ("check", "limit"),
    [
        ("levels", "at least 3"),
        ("slope_certainty", "below 0.1"),
        ("correlation", "at least 0.995"),
        ("curvature", "at least 0.01"),
        ("residual", "at most 5 %"),
        ("addition_size", "0.5 to 5"),
        ("recovery", "80 to 120 %"),
        ("spike_size", "at least 30 %"),
        ("matrix_effect", "-10 to 10 %"),
        ("repeatability", "at most 3 %"),
        ("check_standard", "95 to 105 %"),
        ("blank", "below 0.3 LOQ"),
    ],
)
def test_each_check_takes_a_limit(check: str, limit: str) -> None:
    """Each check takes a bare limit that fails, a pair of limits, or `off`; in another unit it is refused."""
    bare = settings(f"{CONFIG}limits: {{{check}: {limit}}}\n").layouts[0][1].limits[check]
    pair = settings(f"{CONFIG}limits: {{{check}: {{warn: {limit}, fail: off}}}}\n").layouts[0][1].limits[check]
    off = settings(f"{CONFIG}limits: {{{check}: off}}\n").layouts[0][1].limits[check]
    other = limit.removesuffix("%").removesuffix("LOQ").strip() if limit[-1] in "%Q" else f"{limit} %"

    assert check in DEFAULTS
    assert (bare.warn, bare.fail and bare.fail.text, bare.stated) == (None, limit, True)
    assert (pair.warn and pair.warn.text, pair.fail) == (limit, None)
    assert off.off
    (fault,) = faults(f"{CONFIG}limits: {{{check}: {other}}}\n")
    assert fault.startswith(f"config.yaml, line 11, limits.{check}: expected a limit ")
    assert f"got '{other}'" in fault


def test_a_layout_decides_again_for_its_exports() -> None:
    """A layout's bench, stocks, report and blank replace the configuration's whole; its limits check by check."""
    own = LAYOUT.replace("flame bench", "brine bench") + (
        "stocks: [{name: CD-500, contains: {Cd: 500 µg/L}, uncertainty: '0.4 %, k=2'}]\n"
        "bench: {aliquot: 5 mL}\n"
        "limits: {recovery: 60 to 140 %}\n"
        "report: calibration\nblank: subtract\nadded_refers_to: aliquot\nvariance: constant\n"
    )
    config = f"{CONFIG}limits: {{recovery: 75 to 125 %, correlation: at least 0.995}}\nblank: none\n"

    (_, general), (_, special) = settings(config, LAYOUT, own).layouts

    assert (general.report, general.blank, general.added_refers_to) == ("additions", "none", None)
    assert (special.report, special.blank, special.added_refers_to) == ("calibration", "subtract", "aliquot")
    assert [stock.name for stock in special.stocks] == ["CD-500"]
    assert special.stocks[0].relative_uncertainty == pytest.approx(0.002)
    assert (special.bench.aliquot, special.bench.made_up_to, special.bench.levels) == (Measure(5.0, "mL"), None, {})
    assert {name: limit.fail.text for name, limit in special.limits.items() if limit.fail} == {
        "recovery": "60 to 140 %",
        "correlation": "at least 0.995",
    }
    assert general.bench.made_up_to == Measure(50.0, "mL")


# -- faults --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        (
            "report: additions",
            "report: automatik",
            "line 8, report: expected one of 'additions', 'calibration', 'automatic', got 'automatik'",
        ),
        ("report: additions\n", "", "line 1, report: the key 'report' is missing."),
        (
            "units: {export: mg/L, result: mg/L}",
            "units: {export: mg/L}",
            "line 9, units.result: the key 'result' is missing.",
        ),
        (
            "units: {export: mg/L,",
            "units: {export: ppm,",
            "units.export: 'ppm' does not say per what: write mg/L, µg/L or ng/L.",
        ),
        (
            "mail: none",
            "mail: nobody",
            "line 10, mail: expected keys such as server, from and to, or none, got 'nobody'.",
        ),
        (
            "mail: none",
            f"{MAIL}, prot: 25}}",
            "mail.prot: unknown key 'prot'. Nothing is evaluated with these settings. Did you mean 'port'?",
        ),
        ("mail: none", f"{MAIL}, port: 0}}", "mail.port: expected more than 0, got 0."),
        ("mail: none", f"{MAIL}, port: smtp}}", "mail.port: expected a number with a decimal point, got 'smtp'."),
        (
            "mail: none",
            f"{MAIL}, security: none, user: bench}}",
            "line 10, mail: security: none is for servers without sign-in only.",
        ),
        (
            "mail: none",
            "mail: {server: mail.example, from: bench, to: lead@example}",
            "mail.from: expected an address such as lead@example, got 'bench'.",
        ),
        (
            "mail: none",
            f"{MAIL}, about: [fial]}}",
            "mail.about[1]: expected one of 'fail', 'incomplete', 'problem', 'cleared', got 'fial'.",
        ),
        ("mail: none", "mail: {server: m, from: a@b, to: []}", "mail.to: expected at least 1 entries, got a list."),
        ("exports: ./exports", "exports: []", "folders.exports: expected at least 1 entries, got a list."),
        ("layouts: [flame.yaml]", "layouts: []", "line 3, layouts: expected at least 1 entries, got a list."),
        (
            "contains: {Zn: 5 mg/L}",
            "contains: {Zn: 5 mL}",
            "line 6, stocks[1].contains.Zn: expected a concentration such as mg/L or µg/L, got 'mL'.",
        ),
        (
            "contains: {Zn: 5 mg/L}",
            "contains: {Zn: [5]}",
            "stocks[1].contains.Zn: expected a single value, got a list.",
        ),
        (
            "contains: {Zn: 5 mg/L}",
            "contains: {}",
            "line 6, stocks[1].contains: expected at least 1 entries, got keys and values.",
        ),
        (
            "contains: {Zn: 5 mg/L}",
            "contains: {Zn: 5 mg/L}\n    from: 2026-03-02\n    until: 2026-03-01",
            (
                "stocks[1]: stock 'ZN-5' ends before it begins. Nothing is evaluated with these settings. "
                "Correct from or until."
            ),
        ),
        (
            "contains: {Zn: 5 mg/L}",
            "contains: {Zn: 5 mg/L}\n    tolerance: 1 %\n    uncertainty: 1 %, k=2",
            "stocks[1]: stock 'ZN-5' states tolerance and uncertainty.",
        ),
        ("{aliquot: 10 mL, made_up_to", "{made_up_to", "line 7, bench: made_up_to is stated and aliquot is not."),
        (
            "levels: {A1: 5 mL}",
            "levels: {A1: 5}",
            "bench.levels.A1: expected a volume such as '5 mL' or a concentration such as '2 mg/L', got '5'.",
        ),
        (
            "levels: {A1: 5 mL}",
            "levels: {A1: 5 mL}, predilution: 1 to 10",
            "bench.predilution: expected a dilution such as '10', '1 in 10' or '1+9', got '1 to 10'.",
        ),
        ("levels: {A1: 5 mL}", "preparation: {rsd: 1.5 %}", "bench.preparation.dof: the key 'dof' is missing."),
        (
            "levels: {A1: 5 mL}",
            "preparation: {rsd: 1.5 %, dof: 0}",
            "bench.preparation.dof: expected more than 0, got 0.",
        ),
        (
            "mail: none",
            "mail: none\nconfidence: 0.95",
            "line 11, confidence: expected a percentage such as '0.5 %', got '0.95'.",
        ),
        ("mail: none", "mail: none\nconfidence: 100 %", "line 11, confidence: expected less than 1"),
        (
            "mail: none",
            "mail: none\nwatching: {settle: 5}",
            "watching.settle: expected a duration such as '5 s', '10 min' or '2 h', got '5'.",
        ),
        ("mail: none", "mail: none\nwatching: {settle: 0 s}", "watching.settle: expected more than 0"),
        ("mail: none", "mail: none\nwatching: {events: maybe}", "watching.events: expected yes or no, got 'maybe'."),
        ("mail: none", "mail: none\ncsv: {decimal: ','}", "line 11, csv: separator and decimal mark must differ."),
        (
            "mail: none",
            "mail: none\nlimits: {recovery: 125 to 75 %}",
            "limits.recovery: expected the smaller number first, got '125 to 75 %'.",
        ),
        (
            "mail: none",
            "mail: none\nlimits: {recovery: {worn: 75 to 125 %}}",
            "limits.recovery: expected the keys 'warn' and 'fail', got 'worn'.",
        ),
        (
            "mail: none",
            "mail: none\nlimits: {recovery: [75, 125]}",
            "limits.recovery: expected a limit, or the keys warn and fail with one each, got a list.",
        ),
        (
            "mail: none",
            "mail: none\nlimits: {recovry: 75 to 125 %}",
            "limits.recovry: unknown key 'recovry'. Nothing is evaluated with these settings. Did you mean 'recovery'?",
        ),
        ("mail: none", "mail: none\nmail: none", "line 11, mail: the key stands here again, first in line 10."),
        ("mail: none", "mail: *none", "line 10, mail: a value that begins with * is an alias."),
        ("mail: none", "mail: !none x", "line 10, mail: a value that begins with ! is a tag."),
    ],
)
def test_a_fault_says_where_and_what(old: str, new: str, expected: str) -> None:
    """A fault names file, line and key, says what was expected and found, and what follows."""
    found = faults(_changed(old, new))

    assert len(found) == 1
    assert found[0].startswith("config.yaml, line ")
    assert expected in found[0]
    assert "Nothing is evaluated with these settings." in found[0]


def test_a_password_is_refused_and_not_repeated() -> None:
    """A password in the settings is refused with the way to give it, and stands in no message."""
    (fault,) = faults(_changed("mail: none", f"{MAIL}, password: herring7}}"))

    assert "line 10, mail.password: a password never stands in this file." in fault
    assert "mail.password_file" in fault
    assert "herring7" not in fault


def test_a_password_is_refused_beside_other_faults_without_being_repeated() -> None:
    """Also where the rest of the mail settings is wrong, no message repeats the password."""
    found = faults(_changed("mail: none", "mail: {server: m, from: bench, password: herring7}"))

    assert any("a password never stands in this file" in fault for fault in found)
    assert "herring7" not in "\n".join(found)


def test_all_faults_of_all_files_come_at_once() -> None:
    """Faults of the configuration and of every layout are named together, each with its own file."""
    config = _changed("report: additions", "report: neither\nblank: perhaps")
    broken = LAYOUT.replace("separator: ';'", "separator: ';;'").replace("signal: R1", "signal: [R1, 3, {}]")

    found = faults(config, broken, LAYOUT.replace("flame bench", "second") + "bench: {aliquot: 10}\n")

    assert [fault.partition(":")[0] for fault in found] == [
        "config.yaml, line 8, report",
        "config.yaml, line 9, blank",
        "flame.yaml, line 3, separator",
        "flame.yaml, line 7, columns.signal[3]",
        "layout-2.yaml, line 9, bench.aliquot",
    ]
    assert "No export can be evaluated with this layout." in found[-1]


def test_two_layouts_with_one_name_are_a_fault() -> None:
    """A layout's name belongs to one layout, since records name layouts."""
    (fault,) = faults(CONFIG, LAYOUT, LAYOUT)

    assert fault.startswith("layout-2.yaml, line 1, layout: the name 'flame bench' belongs to flame.yaml already.")


# -- files ---------------------------------------------------------------------------------------------------------


def test_missing_layouts_are_named_beside_the_other_faults(tmp_path: Path) -> None:
    """Each layout that is not there is named with its line in the configuration, together with every other fault."""
    config = tmp_path / "config.yaml"
    config.write_text(_changed("[flame.yaml]", "\n  - flame.yaml\n  - layouts/gone.yaml") + "blank: perhaps\n")
    (tmp_path / "flame.yaml").write_text(LAYOUT + "colour: red\n")

    with pytest.raises(SettingsInvalid) as invalid:
        read_files(config)

    told = str(invalid.value)
    assert "config.yaml, line 5, layouts[2]: expected a file at " in told
    assert "gone.yaml: no such file or directory." in told
    assert "config.yaml, line 13, blank: expected one of" in told
    assert "flame.yaml, line 9, colour: unknown key 'colour'" in told


def test_a_missing_configuration_is_named(tmp_path: Path) -> None:
    """A configuration that is not there is named with its whole path and what to do."""
    with pytest.raises(SettingsInvalid, match=r"config\.yaml: expected a file at .*/config\.yaml: no such file"):
        read_files(tmp_path / "config.yaml")


def test_text_that_is_not_utf_8_is_named_with_its_line(tmp_path: Path) -> None:
    """A file in another encoding is refused with the line of the first byte that does not fit."""
    (tmp_path / "config.yaml").write_bytes(CONFIG.encode() + "# µg\n".encode("cp1252"))

    with pytest.raises(SettingsInvalid, match=r"config\.yaml, line 11: expected UTF-8 text\..*Save the file as UTF-8"):
        read_files(tmp_path / "config.yaml")


def test_a_mark_at_the_beginning_is_no_part_of_the_first_key(tmp_path: Path) -> None:
    """A configuration saved with a UTF-8 mark reads like one without."""
    (tmp_path / "config.yaml").write_bytes(b"\xef\xbb\xbf" + CONFIG.encode())
    (tmp_path / "flame.yaml").write_text(LAYOUT)

    assert compile_snapshot(read_files(tmp_path / "config.yaml")).file.laboratory == "Skerry Point Water Laboratory"


def test_a_snapshot_survives_the_ledger() -> None:
    """The body of a snapshot gives the same texts and the same hash back; another text has another hash."""
    snapshot = settings().snapshot
    other = settings(_changed("10 mL", "20 mL")).snapshot
    again = Snapshot.of_plain(json.loads(snapshot.body))

    assert (again.body, again.sha256) == (snapshot.body, snapshot.sha256)
    assert compile_snapshot(again).file == settings().file
    assert other.sha256 != snapshot.sha256


def test_a_variance_model_needs_its_evidence() -> None:
    """The safe model is just named; another one is refused without the evidence that it holds, and taken with it."""
    bare = faults(_changed("mail: none", "mail: none\nvariance: proportional"))
    ((_, stated),) = settings(
        _changed("mail: none", "mail: none\nvariance: {model: proportional, evidence: 'VAL-26-04'}")
    ).layouts
    ((_, safe),) = settings(_changed("mail: none", "mail: none\nvariance: constant")).layouts

    assert len(bare) == 1
    assert "variance: expected the evidence that the scatter is proportional" in bare[0]
    assert (stated.variance, safe.variance) == ("proportional", "constant")


@pytest.mark.parametrize("unit", ["mg/kg", "µg/g"])
def test_results_may_be_contents_of_a_solid(unit: str) -> None:
    """A content is a unit of results and never of an export's concentrations."""
    ((_, method),) = settings(_changed("result: mg/L", f"result: {unit}")).layouts
    (fault,) = faults(_changed("export: mg/L", f"export: {unit}"))

    assert (method.solid, method.vessel_unit) == (True, "mg/L")
    assert f"expected a concentration such as mg/L or µg/L, got '{unit}'" in fault
