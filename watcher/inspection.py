"""Commands that look and change nothing: `check`, `explain`."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

from parsers.errors import ExportRefused
from parsers.examples import differences
from parsers.read import claims, read
from rules.limits import DEFAULTS
from watcher import explanation_json, explanation_text
from watcher.clock import SystemClock, stamp
from watcher.evaluation import Job, Unclaimed, evaluate_job, unclaimed_sentence
from watcher.exit_codes import ALL_PASS, NOT_DONE
from watcher.explanation import Explanation
from watcher.settings import Settings, SettingsInvalid, compile_snapshot, read_files
from watcher.terminal import console, heading, lines, table

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from rules.method import Bench

#: Checks that judge the calibration's result, and so decide nothing on an additions' result unless stated.
INFORMING = ("recovery", "spike_size", "matrix_effect")


def settings_of(config: Path) -> Settings | None:
    """Return the settings, or None after naming their faults on standard error."""
    try:
        return compile_snapshot(read_files(config))
    except SettingsInvalid as invalid:
        faults = sorted(invalid.faults, key=lambda fault: (fault.path, fault.line))
        err = console(error=True)
        lines(err, (str(fault) for fault in faults))
        lines(err, [f"{len(faults)} fault{'s' if len(faults) != 1 else ''} in all."])
        return None


def check(config: Path) -> int:
    """Name every fault of settings and layouts, and exports that two layouts claim."""
    settings = settings_of(config)
    if settings is None:
        return NOT_DONE
    doubled = list(_claimed_twice(settings))
    if doubled:
        lines(console(error=True), doubled)
        return NOT_DONE
    unlike = list(_unlike_examples(settings))
    if unlike:
        lines(console(error=True), unlike)
        return NOT_DONE
    out = console()
    file = settings.file
    lines(out, [f"{config}: no fault found. {file.laboratory}, settings {settings.sha256[:12]}"])
    heading(out, "Layouts")
    table(out, ("layout", "file", "reports", "blank"), [
        (layout.layout, layout.document.path, method.report, method.blank or "not stated")
        for layout, method in settings.layouts
    ])  # fmt: skip
    heading(out, "Bench in force for each layout")
    lines(out, (f"{layout.layout}: {_bench(method.bench)}" for layout, method in settings.layouts))
    heading(out, "Limits")
    lines(out, _limits(settings))
    return ALL_PASS


def _bench(bench: Bench) -> str:
    """Say how solutions are prepared: a layout's bench replaces the configuration's whole, which is easily missed."""
    parts = [f"aliquot {bench.aliquot}" if bench.aliquot else "aliquot not stated"]
    if bench.aliquot:
        parts.append(f"made up to {bench.made_up_to}" if bench.made_up_to else "standard on top of the aliquot")
    parts.append(f"predilution {bench.predilution:g}")
    if bench.levels:
        parts.append("levels " + ", ".join(f"{name} {amount}" for name, amount in bench.levels.items()))
    return ", ".join(parts)


def _limits(settings: Settings) -> Iterator[str]:
    stated = settings.file.limits.stated()
    if stated:
        yield from (f"{name}: {limits.text}" for name, limits in stated.items())
    defaults = [name for name in DEFAULTS if name not in stated]
    if defaults:
        yield f"Not the laboratory's decision yet, defaults hold: {', '.join(defaults)}"
    silent = [name for name in INFORMING if name in defaults and settings.file.report == "additions"]
    if silent:
        yield f"With report: additions these only inform until the laboratory states a limit: {', '.join(silent)}"
    if "recovery" in silent:
        yield "So a poor recovery fails no sample and is not mailed: state limits.recovery if it should."


def _claimed_twice(settings: Settings) -> Iterator[str]:
    for folder in settings.file.folders.exports:
        root = settings.path(folder)
        if not root.is_dir():
            yield f"{root}: expected the exports folder. Nothing can be taken in. Make it or correct folders.exports."
            continue
        pattern = "**/*" if settings.file.watching.subfolders else "*"
        for path in sorted(root.glob(pattern)):
            if path.is_file() and not path.is_symlink():
                name = path.relative_to(root).as_posix()
                data = path.read_bytes()
                claiming = [layout.layout for layout, _ in settings.layouts if claims(layout, name, data)]
                if len(claiming) > 1:
                    yield (
                        f"{name}: expected one layout to claim it, got {' and '.join(claiming)}. It would be refused. "
                        f"Narrow claims.file or claims.text of one of them."
                    )


def _unlike_examples(settings: Settings) -> Iterator[str]:
    """Yield where the examples of a layout, which lie beside it, are not read as they say."""
    for layout, _ in settings.layouts:
        folder = settings.path(layout.document.path).parent
        for number, example in enumerate(layout.examples):
            place = f"{layout.document.path}, line {layout.document.line(('examples', number))}, examples[{number + 1}]"
            try:
                data = (folder / example.export).read_bytes()
                expected = (folder / example.expected).read_text("utf-8-sig")
                found = differences(read(data, layout, example.export), expected, example.expected)
                yield from (f"{place}: {one}" for one in found)
            except OSError as error:
                reason = (error.strerror or str(error)).lower()
                yield f"{place}: {error.filename}: {reason}. The example proves nothing. Put it there, or take it out."
            except UnicodeDecodeError:
                yield f"{place}: expected UTF-8 text in {example.expected}. Save the file as UTF-8."
            except ExportRefused as refused:
                yield f"{place}: {refused}"


def explain(config: Path, export: Path, *, with_lines: bool = False, as_json: bool = False) -> int:
    """Show how an export is understood and what would come of it; return the exit code, as of `once`."""
    settings = settings_of(config)
    if settings is None:
        return NOT_DONE
    try:
        data = export.read_bytes()
    except OSError as error:
        sentence = f"{export}: {(error.strerror or str(error)).lower()}. Nothing to explain. Correct the path."
        return _unexplained(export.name, sentence, as_json=as_json)
    job = Job(_name(settings, export), data, 1, stamp(SystemClock().now()))
    try:
        explanation = Explanation.of(settings, evaluate_job(settings, job, final=True), data)
    except Unclaimed:
        return _unexplained(job.name, f"{job.name}: {unclaimed_sentence(settings)}", as_json=as_json)
    except ExportRefused as refused:
        return _unexplained(job.name, f"refused: {refused}", refused, as_json=as_json)
    if as_json:
        _print_json(explanation_json.plain(explanation, with_lines=with_lines))
    else:
        explanation_text.explain(console(), explanation, with_lines=with_lines)
    return explanation.code


def _unexplained(name: str, sentence: str, refused: ExportRefused | None = None, *, as_json: bool) -> int:
    """Say why an export cannot be explained."""
    if as_json:
        _print_json(explanation_json.refusal(name, sentence, refused))
    else:
        lines(console(error=True), [sentence])
    return NOT_DONE


def _print_json(value: dict[str, Any]) -> None:
    print(json.dumps(value, ensure_ascii=False, indent=1, allow_nan=False))  # noqa: T201 - nothing may wrap it


def _name(settings: Settings, export: Path) -> str:
    """Return the export's name as the service would call it."""
    for folder in settings.file.folders.exports:
        root = settings.path(folder).resolve()
        if export.resolve().is_relative_to(root):
            return export.resolve().relative_to(root).as_posix()
    return export.name
