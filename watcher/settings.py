"""Settings and layouts, read, validated and combined: what the laboratory decided, ready to work with.

    files ──read_files──▶ Snapshot (plain texts, stored in the ledger) ──compile_snapshot──▶ Settings

All faults of all files are found at once. The service works on the snapshot that was adopted, never on files that
somebody is editing.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path, PurePosixPath
from typing import TYPE_CHECKING, Any

from parsers.document import load, validate
from parsers.errors import DocumentFault, DocumentInvalid
from parsers.layout import Layout, parse_layout
from rules import units
from rules.exceptions import LimitException
from rules.method import AnalyteRules, Bench, Measure, Method, Pipette, Preparation, Stock
from rules.substances import Substance
from rules.units import UnitUnusable
from watcher.errors import WatcherError
from watcher.schema import BenchPart, Decisions, ExpectPart, LimitsPart, SettingsFile, StockPart

if TYPE_CHECKING:
    from collections.abc import Mapping

CONSEQUENCE = "Nothing is evaluated with these settings."
LAYOUT_CONSEQUENCE = "No export can be evaluated with this layout."


class SettingsInvalid(WatcherError):
    """Settings or layouts have faults, all of which it names."""

    def __init__(self, faults: tuple[DocumentFault, ...]) -> None:
        super().__init__(faults)
        self.faults = faults

    def __str__(self) -> str:
        """Say all faults, one a line."""
        return "\n".join(str(fault) for fault in self.faults)


@dataclass(frozen=True, slots=True)
class File:
    """A text file of the settings: path as people know it (relative to the configuration) and content."""

    path: str
    text: str


@dataclass(frozen=True, slots=True)
class Snapshot:
    """Configuration, layouts and their side tables as texts, and the folder that relative paths start from."""

    folder: str
    config: File
    layouts: tuple[File, ...]
    tables: tuple[File, ...] = ()

    @property
    def body(self) -> str:
        """The texts as one JSON text, as the ledger keeps and hashes them; the folder was not decided by anybody."""
        config, *layouts = ({"path": file.path, "text": file.text} for file in (self.config, *self.layouts))
        tables = {"tables": [{"path": file.path, "text": file.text} for file in self.tables]} if self.tables else {}
        return json.dumps({"config": config, "layouts": layouts} | tables, sort_keys=True, ensure_ascii=False)

    def beside(self, layout: File) -> dict[str, str]:
        """Return the side tables that lie beside a layout, by the name that it gives them."""
        folder = PurePosixPath(layout.path).parent
        known = {file.path: file.text for file in self.tables}
        names = [name for name in side_tables(layout) if (folder / name).as_posix() in known]
        return {name: known[(folder / name).as_posix()] for name in names}

    @classmethod
    def of_plain(cls, plain: Mapping[str, Any]) -> Snapshot:
        """Return the snapshot whose body holds these values; where it lies is not known any more."""
        return cls(
            "",
            File(**plain["config"]),
            tuple(File(**layout) for layout in plain["layouts"]),
            tuple(File(**table) for table in plain.get("tables", ())),
        )

    @property
    def sha256(self) -> str:
        """Hash of the body."""
        return hashlib.sha256(self.body.encode()).hexdigest()


@dataclass(frozen=True)
class Settings:
    """What the laboratory decided.

    Attributes
    ----------
    snapshot
        The texts it was read from.
    file
        The configuration.
    layouts
        Each layout with the method for its exports.
    """

    snapshot: Snapshot
    file: SettingsFile
    layouts: tuple[tuple[Layout, Method], ...]

    @cached_property
    def sha256(self) -> str:
        """Hash of the texts."""
        return self.snapshot.sha256

    def path(self, text: str) -> Path:
        """Return a path of the settings as an absolute one."""
        return Path(self.snapshot.folder, text).absolute()

    def service(self) -> dict[str, Any]:
        """Return what the service process needs, as JSON values; it never sees YAML."""
        file = self.file
        mail = None
        if file.mail != "none":
            default_port = {"starttls": 587, "tls": 465, "none": 25}[file.mail.security]
            mail = {
                "server": file.mail.server,
                "port": file.mail.port or default_port,
                "security": file.mail.security,
                "sender": file.mail.from_,
                "to": list(file.mail.to),
                "about": list(file.mail.about),
                "daily": file.mail.daily,
                "user": file.mail.user,
                "password_file": str(self.path(file.mail.password_file)) if file.mail.password_file else None,
                "ca_file": str(self.path(file.mail.ca_file)) if file.mail.ca_file else None,
            }
        return {
            "laboratory": file.laboratory,
            "exports": [str(self.path(folder)) for folder in file.folders.exports],
            "results": str(self.path(file.folders.results)),
            "records": str(self.path(file.folders.records)),
            "settle_seconds": file.watching.settle,
            "scan_seconds": file.watching.scan,
            "subfolders": file.watching.subfolders,
            "events": file.watching.events,
            "complete_after_seconds": file.complete_after,
            "span_seconds": max(file.pair_within, file.calibration_within),
            "adoption": file.adoption,
            "silence_seconds": file.watching.silence.after if file.watching.silence else 0.0,
            "silence_hours": file.watching.silence.on if file.watching.silence else "Mon-Sun 00:00-24:00",
            "backup": str(self.path(file.folders.backup)) if file.folders.backup else None,
            "mail": mail,
        }


def read_files(config: Path) -> Snapshot:
    """Read the configuration and the layouts that it names, as texts.

    Raises
    ------
    SettingsInvalid
        If a file is missing or cannot be read as UTF-8, or the configuration cannot be understood so far as to
        know its layouts.
    """
    folder = config.absolute().parent
    file = File(config.name, _text(config, config.name))
    try:
        document = load(file.text, file.path, CONSEQUENCE)
    except DocumentInvalid as invalid:
        raise SettingsInvalid(invalid.faults) from invalid
    named = document.values.get("layouts", [])
    layouts: list[File] = []
    faults: list[DocumentFault] = []
    for index, path in enumerate(named if isinstance(named, list) else []):
        if not isinstance(path, str):
            continue  # the schema says what is wrong with it
        try:
            layouts.append(File(path, _text(folder / path, path)))
        except SettingsInvalid as invalid:
            reason = invalid.faults[0].sentence
            faults.append(DocumentFault(file.path, document.line(("layouts", index)), f"layouts[{index + 1}]", reason))
    tables: dict[str, File] = {}
    for layout in layouts:
        for name in side_tables(layout):
            path = (PurePosixPath(layout.path).parent / name).as_posix()
            if path not in tables and (folder / path).is_file():
                try:
                    tables[path] = File(path, _text(folder / path, path))
                except SettingsInvalid as invalid:
                    faults += invalid.faults
    snapshot = Snapshot(str(folder), file, tuple(layouts), tuple(tables.values()))
    if faults:
        raise SettingsInvalid((*faults, *_faults_of(snapshot)))
    return snapshot


def side_tables(layout: File) -> list[str]:
    """Return the files that a layout looks values up in; of a layout that cannot be read, none."""
    try:
        lookups = load(layout.text, layout.path, LAYOUT_CONSEQUENCE).values.get("lookup", [])
    except DocumentInvalid:
        return []
    named = [lookup.get("file") for lookup in lookups if isinstance(lookup, dict)] if isinstance(lookups, list) else []
    return [name for name in dict.fromkeys(named) if isinstance(name, str) and name]


def _text(path: Path, shown: str) -> str:
    try:
        return path.read_bytes().decode("utf-8-sig")
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise SettingsInvalid(
            (
                DocumentFault(
                    shown,
                    0,
                    "",
                    f"expected a file at {path}: {reason}. {CONSEQUENCE} Write it or correct the path.",
                ),
            )
        ) from error
    except UnicodeDecodeError as error:
        line = error.object.count(b"\n", 0, error.start) + 1
        raise SettingsInvalid(
            (DocumentFault(shown, line, "", f"expected UTF-8 text. {CONSEQUENCE} Save the file as UTF-8."),)
        ) from error


def _faults_of(snapshot: Snapshot) -> tuple[DocumentFault, ...]:
    try:
        compile_snapshot(snapshot)
    except SettingsInvalid as invalid:
        return invalid.faults
    return ()


def compile_snapshot(snapshot: Snapshot) -> Settings:
    """Validate and combine configuration and layouts.

    Raises
    ------
    SettingsInvalid
        With every fault of every file.
    """
    faults: list[DocumentFault] = []
    file: SettingsFile | None = None
    try:
        file = validate(load(snapshot.config.text, snapshot.config.path, CONSEQUENCE), SettingsFile, CONSEQUENCE)
    except DocumentInvalid as invalid:
        faults += invalid.faults
    read: list[tuple[Layout, Decisions]] = []
    for layout_file in snapshot.layouts:
        try:
            layout = parse_layout(layout_file.text, layout_file.path, snapshot.beside(layout_file))
            read.append((layout, validate(layout.settings, Decisions, LAYOUT_CONSEQUENCE)))
        except DocumentInvalid as invalid:
            faults += invalid.faults
    faults += _same_names([layout for layout, _ in read])
    if faults or file is None:
        raise SettingsInvalid(tuple(faults))
    decided = file
    settings = Settings(snapshot, decided, tuple((layout, method_for(decided, own)) for layout, own in read))
    if unconvertible := _without_molar_mass(settings):
        raise SettingsInvalid(unconvertible)
    return settings


def _without_molar_mass(settings: Settings) -> tuple[DocumentFault, ...]:
    """Concentrations of the settings that only a molar mass nobody knows could convert."""
    faults: dict[str, DocumentFault] = {}
    for layout, method in settings.layouts:
        stated = [(stock.name, name, measure) for stock in method.stocks for name, measure in stock.contains.items()]
        for name, rules in method.analytes.items():
            stated += [(name, name, m) for m in (rules.loq, rules.lod, rules.linear_to) if m is not None]
        for place, name, measure in stated:
            try:
                Substance.of(method, name).convert(measure, method.vessel_unit)
            except UnitUnusable as error:
                sentence = f"{measure} of {place}: {error}"
                faults.setdefault(sentence, layout.document.fault((), sentence, CONSEQUENCE, ""))
    return tuple(faults.values())


def _same_names(layouts: list[Layout]) -> list[DocumentFault]:
    seen: dict[str, str] = {}
    faults = []
    for layout in layouts:
        document = layout.document
        if layout.layout in seen:
            what = f"the name '{layout.layout}' belongs to {seen[layout.layout]} already"
            faults.append(document.fault(("layout",), what, LAYOUT_CONSEQUENCE, "Give each layout a name of its own"))
        seen.setdefault(layout.layout, document.path)
    return faults


def method_for(file: SettingsFile, own: Decisions) -> Method:
    """Combine the configuration with what a layout decides again: limits check by check, the rest whole.

    A bench is one thing: made_up_to of another practice must not slip into it.
    """
    stocks = own.stocks if own.stocks is not None else file.stocks or ()
    expect = own.expect or file.expect or ExpectPart()
    return Method(
        report=own.report or file.report,
        export_unit=file.units.export,
        result_unit=file.units.result,
        unit_words=file.units.words(),
        blank=own.blank or file.blank,
        stocks=tuple(_stock(stock) for stock in stocks),
        bench=_bench(own.bench or file.bench or BenchPart()),
        analytes={
            name: AnalyteRules(
                part.linear_to, part.proved_on, part.loq, part.lod, part.molar_mass, part.limits.stated()
            )
            for name, part in file.analytes.items()
        },
        limits=_limits(file.limits, own.limits),
        exceptions=tuple(
            LimitException(part.samples, frozenset(part.analytes), part.stated()) for part in file.exceptions
        ),
        variance=stated.model if (stated := own.variance or file.variance) else "constant",
        confidence=file.confidence,
        fixed_factor=file.coverage,
        added_refers_to=own.added_refers_to or file.added_refers_to,
        concentration_refers_to=own.concentration_refers_to or file.concentration_refers_to,
        reference=own.reference or file.reference,
        undetected_native=file.undetected_native,
        expected_spiked=expect.spiked,
        expected_levels=expect.levels,
        pair_seconds=file.pair_within,
        calibration_seconds=file.calibration_within,
        spiked_at=own.spiked_at or file.spiked_at or "before preparation",
        repeats=file.repeats,
    )


def _limits(general: LimitsPart, own: LimitsPart) -> dict[str, Any]:
    return general.stated() | own.stated()


def _stock(part: StockPart) -> Stock:
    relative = part.tolerance if part.tolerance is not None else part.uncertainty
    return Stock(part.name, part.contains, part.lot, part.from_, part.until, relative)


def _bench(part: BenchPart) -> Bench:
    tolerances: dict[str, Measure] = {
        name: stated
        for name in type(part.tolerances).model_fields
        if (stated := getattr(part.tolerances, name)) is not None
    }
    known = part.preparation
    return Bench(
        aliquot=part.aliquot,
        made_up_to=part.made_up_to,
        levels=part.levels,
        predilution=part.predilution,
        tolerances=tolerances,
        preparation=None if known is None else Preparation(known.rsd, known.dof),
        pipettes=tuple(
            Pipette(*(units.of_measure(each, "mL") for each in (one.from_, one.to, one.step))) for one in part.pipettes
        ),
    )
