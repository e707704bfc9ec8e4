"""The worker: reads a copied export through its layout, evaluates it and writes its result files into the records.

Runs in a process of its own (`python -m watcher.evaluation`), asked by the service; see `watcher.worker_loop` for the
conversation. It knows no ledger and sends nothing: it answers with what should be recorded, delivered and mailed.
"""

from __future__ import annotations

import calendar
import hashlib
import json
import sys
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

from parsers.errors import ExportRefused
from parsers.read import claims, is_finished, read
from rules.evaluate import evaluate
from rules.spanning import Other, lacks
from watcher import VERSION, mail, results
from watcher.clock import moment
from watcher.difference import difference
from watcher.disk import Disk
from watcher.growth import compare
from watcher.names import target
from watcher.pictures import Undrawn, pictures
from watcher.record import Export, lent, number
from watcher.scalars import duration
from watcher.settings import Settings, SettingsInvalid, Snapshot, compile_snapshot, read_files
from watcher.worker_loop import serve

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Mapping

    from parsers.layout import Layout
    from rules.method import Method
    from rules.outcomes import Outcomes


@dataclass(frozen=True, slots=True)
class Job:
    """One export that is to be evaluated."""

    name: str
    data: bytes
    revision: int
    accepted_at: str
    seal: Mapping[str, object] | None = None

    @property
    def sha256(self) -> str:
        """Hash of the content."""
        return hashlib.sha256(self.data).hexdigest()


@dataclass(frozen=True, slots=True)
class Evaluated:
    """An export that was evaluated, with the words for its record.

    Attributes
    ----------
    problems
        What a person must see and what belongs to no series: rows without sample, a missing last line.
    """

    export: Export
    layout: Layout
    outcomes: Outcomes
    problems: tuple[str, ...]


NARROW = "Narrow claims.file or claims.text of one of them."


class Unclaimed(Exception):
    """No layout claims the export."""


class Unfinished(Exception):
    """The line that ends the export is not there yet."""

    def __init__(self, layout: Layout) -> None:
        super().__init__(layout.layout)
        self.layout = layout


def choose_layout(settings: Settings, job: Job) -> tuple[Layout, Method]:
    """Return the only layout that claims an export.

    Raises
    ------
    Unclaimed
        If none does.
    ExportRefused
        If several do.
    """
    claiming = [pair for pair in settings.layouts if claims(pair[0], job.name, job.data)]
    if not claiming:
        raise Unclaimed
    if len(claiming) > 1:
        names = " and ".join(f"'{layout.layout}' ({layout.document.path})" for layout, _ in claiming)
        raise ExportRefused(
            job.name,
            None,
            None,
            f"expected one layout to claim it, got {names}. Nothing of it was evaluated. {NARROW}",
            NARROW,
        )
    return claiming[0]


def evaluate_job(
    settings: Settings, job: Job, *, final: bool, others: Callable[[], Iterable[Job]] = lambda: ()
) -> Evaluated:
    """Read and evaluate one export.

    `others` gives the exports that may lend what is missing in it; those of another layout, and those that cannot be
    read, lend nothing.

    Raises
    ------
    Unclaimed, Unfinished, ExportRefused
        If there is nothing to evaluate, or not yet.
    """
    layout, method = choose_layout(settings, job)
    finished = is_finished(layout, job.data)
    if not final and not finished:
        raise Unfinished(layout)
    readings = read(job.data, layout, job.name)
    problems = [str(problem) for problem in readings.problems]
    if not finished:
        problems.append(
            f"{_no_end(layout)} What is there was evaluated all the same. Look whether the run was cut short, and "
            f"export it whole."
        )
    outcomes = evaluate(readings, method, _local_seconds(job.accepted_at), lambda: _lenders(settings, layout, others()))
    export = Export(
        name=job.name,
        sha256=job.sha256,
        size=len(job.data),
        revision=job.revision,
        accepted_at=job.accepted_at,
        layout=layout.layout,
        settings=settings.sha256,
        program=VERSION,
        seal=job.seal,
    )
    return Evaluated(export, layout, outcomes, tuple(problems))


def _lenders(settings: Settings, layout: Layout, jobs: Iterable[Job]) -> Iterator[Other]:
    for job in jobs:
        try:
            if choose_layout(settings, job)[0] is layout:
                readings = read(job.data, layout, job.name)
                yield Other(job.name, job.sha256, job.revision, _local_seconds(job.accepted_at), readings)
        except (Unclaimed, ExportRefused):
            continue


def _no_end(layout: Layout) -> str:
    """Say which line is missing."""
    pattern = layout.finished.pattern if layout.finished else ""
    return (
        f"expected a line that matches '{pattern}' (finished), which says that the export is complete, and none came."
    )


def _local_seconds(accepted_at: str) -> float:
    """Return a moment of the ledger as seconds of local time, the time that exports and bottles are labelled with."""
    local = moment(accepted_at).astimezone()
    return calendar.timegm(local.timetuple()) + local.microsecond / 1e6


class Hashed:
    """Pieces of a file, gathered to blocks and hashed as they pass."""

    #: Bytes to a block: few system calls, and no whole file in memory.
    BLOCK = 1 << 18

    def __init__(self, pieces: Iterable[bytes]) -> None:
        self._pieces = pieces
        self.digest = hashlib.sha256()

    def __iter__(self) -> Iterator[bytes]:
        """Yield the blocks."""
        block = bytearray()
        for piece in self._pieces:
            block += piece
            if len(block) >= self.BLOCK:
                yield self._passed(block)
                block = bytearray()
        yield self._passed(block)

    def _passed(self, block: bytearray) -> bytes:
        self.digest.update(block)
        return bytes(block)


def stage(evaluated: Evaluated, settings: Settings, folder: Path, disk: Disk) -> list[dict[str, str]]:
    """Write the result files durably into the records; return where each belongs."""
    export = evaluated.export
    contents = {
        "csv": Hashed(results.csv_pieces(evaluated.outcomes, export, settings.file.csv)),
        "json": Hashed(results.json_pieces(evaluated.outcomes, export, evaluated.problems)),
    }
    names = {extension: target(export.name, export.revision, export.accepted_at, extension) for extension in contents}
    staged = {extension: f"{export.sha256[:16]}-{Path(name).name}" for extension, name in names.items()}
    folder.mkdir(parents=True, exist_ok=True)
    disk.write_all(folder, {staged[extension]: content for extension, content in contents.items()}, "stage")
    return [
        {
            "target": names[extension],
            "staged": str(folder / staged[extension]),
            "sha256": content.digest.hexdigest(),
        }
        for extension, content in contents.items()
    ]


class Worker:
    """Answers the service's requests with the settings that it was last given."""

    def __init__(self) -> None:
        self._settings: Settings | None = None
        self._disk = Disk()
        self._undrawn: list[Undrawn] = []

    def handle(self, request: dict[str, Any]) -> dict[str, Any]:
        """Answer one request."""
        match request["do"]:
            case "read settings":
                return self._read_settings(Path(request["config"]))
            case "look at settings":
                return self._look_at_settings(Path(request["config"]), request["adopted"])
            case "plain settings":
                snapshot = Snapshot.of_plain(request["snapshot"])
                return compile_snapshot(replace(snapshot, folder=request["folder"])).service()
            case "adopt":
                self._settings = compile_snapshot(Snapshot.of_plain(request["snapshot"]))
                return {"ok": True}
            case "page" | "pictures" as what:
                return self._draw_page(request) if what == "page" else self._draw_pictures()
            case "evaluate":
                return self._evaluate(request)
            case unknown:
                raise ValueError(f"unknown request {unknown!r}")

    def _draw_page(self, request: dict[str, Any]) -> dict[str, Any]:
        """Draw the page of a record; nothing where the record is not to be read now."""
        from watcher.page import page  # noqa: PLC0415 - templates and plots take longer to import than to evaluate

        content = next(filter(None, (_hashed(Path(path), request["sha256"]) for path in request["records"])), None)
        if content is None:
            return {"page": None}
        newer = request["newer"]
        written = page(json.loads(content), newer and Path(newer).name).encode()
        staged = Path(request["staging"]) / f"{request['sha256'][:16]}-{Path(request['target']).name}"
        self._disk.atomic_write(staged, written, "stage-page")
        digest = hashlib.sha256(written).hexdigest()
        return {"page": {"target": request["target"], "staged": str(staged), "sha256": digest}}

    def _read_settings(self, config: Path) -> dict[str, Any]:
        """Read and validate the settings, which the service itself cannot, and work with them from now on."""
        try:
            self._settings = settings = compile_snapshot(read_files(config))
        except SettingsInvalid as invalid:
            return {"faults": [str(fault) for fault in invalid.faults], "body": None, "service": None}
        return {"faults": [], "body": settings.snapshot.body, "service": settings.service()}

    def _look_at_settings(self, config: Path, adopted: dict[str, Any] | None) -> dict[str, Any]:
        """Read and validate files that changed; what is worked with stays as it is until it is adopted."""
        try:
            settings = compile_snapshot(read_files(config))
        except SettingsInvalid as invalid:
            return {"faults": [str(fault) for fault in invalid.faults], "body": None, "service": None}
        snapshot = settings.snapshot
        body = json.loads(snapshot.body)
        paths = [each["path"] for each in (body["config"], *body["layouts"], *body.get("tables", ()))]
        return {
            "faults": [],
            "body": snapshot.body,
            "service": settings.service(),
            "files": [str(Path(snapshot.folder, path)) for path in paths],
            "difference": [] if adopted is None else difference(adopted, body),
        }

    def _evaluate(self, request: dict[str, Any]) -> dict[str, Any]:
        if self._settings is None:
            raise ValueError("asked to evaluate before settings were adopted")
        job = _job(request)
        answer = partial(_answer, name=job.name)
        try:
            evaluated = evaluate_job(
                self._settings, job, final=request["final"], others=lambda: map(_job, request["others"])
            )
        except Unclaimed:
            return answer("unclaimed", problem=unclaimed_sentence(self._settings))
        except Unfinished as unfinished:
            long = duration(self._settings.file.complete_after)
            wait = f"It is evaluated when that line is there, or when nothing changes for {long} (complete_after)."
            return answer("waiting", layout=unfinished.layout.layout, problem=f"{_no_end(unfinished.layout)} {wait}")
        except ExportRefused as refused:
            letter = mail.refusal(job.name, str(refused), refused.remedy, job.sha256)
            return answer("refused", problem=str(refused), mails=[letter.plain()])
        outcomes = evaluated.outcomes
        loans = json.dumps(lent(outcomes), sort_keys=True, ensure_ascii=False)
        wants = lacks(outcomes.case)
        if request["lent"] == loans:
            return answer("unchanged", lent=loans, wants=wants)
        evaluated, family = _in_view_of(request.get("previous"), evaluated, job)
        mark = f"|{family}" if family else ""
        known = [key.removesuffix(mark) for key in request["alerted"] if key.endswith(mark)]
        letters = mail.mails(outcomes, evaluated.export, evaluated.problems, self._settings.file.complete_after, known)
        # Contents that have nothing to do with each other must not silence each other's alerts.
        letters = [replace(letter, keys=tuple(f"{key}{mark}" for key in letter.keys)) for letter in letters]
        return answer(
            "done",
            layout=evaluated.layout.layout,
            files=stage(evaluated, self._settings, Path(request["staging"]), self._disk),
            mails=[self._illustrated(letter, evaluated, Path(request["staging"])) for letter in letters],
            series=series_index(outcomes),
            verdicts=verdict_counts(outcomes),
            problems=list(evaluated.problems),
            lent=loans,
            wants=wants,
            family=family,
        )

    def _illustrated(self, letter: mail.Mail, evaluated: Evaluated, folder: Path) -> dict[str, Any]:
        """Return a mail with the plots that it will have, and remember to draw them."""
        undrawn = pictures(evaluated.outcomes, evaluated.export, letter.kind, letter.series, folder)
        self._undrawn += undrawn
        return letter.plain() | {"pictures": [picture.plain() for picture in undrawn]}

    def _draw_pictures(self) -> dict[str, Any]:
        """Draw what was remembered; a plot that cannot be drawn must not keep others back."""
        undrawn, self._undrawn = self._undrawn, []
        for picture in undrawn:
            try:
                picture.draw()
            except Exception as error:  # noqa: BLE001 - the words are the alert
                print(f"a plot was not drawn: {type(error).__name__}: {error}", file=sys.stderr)  # noqa: T201
        return {"drawn": len(undrawn)}


def _hashed(path: Path, sha256: str) -> bytes | None:
    """Return the bytes of a file if it is there and the one that is meant."""
    try:
        content = path.read_bytes()
    except OSError:
        return None
    return content if hashlib.sha256(content).hexdigest() == sha256 else None


def _job(plain: Mapping[str, Any]) -> Job:
    data = Path(plain["copy"]).read_bytes()
    return Job(plain["name"], data, plain["revision"], plain["accepted_at"], plain.get("seal"))


def _in_view_of(previous: Mapping[str, Any] | None, evaluated: Evaluated, job: Job) -> tuple[Evaluated, str]:
    """Compare with the content before; returns what is to be reported, and the family of the content."""
    if previous is None:
        return evaluated, ""
    try:
        old = Path(previous["copy"]).read_bytes()
    except FileNotFoundError:  # nothing to compare with; that a copy is gone is found by `audit`
        return evaluated, previous["family"]
    growth = compare(old, job.data, evaluated.layout, job.name)
    if growth.unrelated:
        return evaluated, job.sha256[:16]
    problem = growth.problem(job.name, previous["revision"])
    problems = evaluated.problems if problem is None else (*evaluated.problems, problem)
    return replace(evaluated, problems=problems), previous["family"]


def _answer(  # noqa: PLR0913 - the reply has these parts
    fate: str,
    *,
    name: str,
    layout: str | None = None,
    problem: str | None = None,
    files: list[dict[str, str]] | None = None,
    mails: list[dict[str, Any]] | None = None,
    series: list[dict[str, Any]] | None = None,
    verdicts: dict[str, int] | None = None,
    problems: list[str] | None = None,
    lent: str = "[]",
    wants: bool = False,
    family: str = "",
) -> dict[str, Any]:
    return {
        "fate": fate,
        "name": name,
        "layout": layout,
        "problem": problem,
        "files": files or [],
        "mails": mails or [],
        "series": series or [],
        "verdicts": verdicts or {},
        "problems": problems or [],
        "lent": lent,
        "wants": wants,
        "family": family,
    }


def unclaimed_sentence(settings: Settings) -> str:
    """Say that no layout claims an export, and which were tried."""
    tried = ", ".join(f"'{layout.layout}'" for layout, _ in settings.layouts)
    return f"no layout claims it (tried {tried}). Nothing of it was evaluated. Widen claims of a layout, or write one."


def series_index(outcomes: Outcomes) -> list[dict[str, Any]]:
    """Return one line for each series, for the ledger's index."""
    case = outcomes.case
    values = case.reported_value()
    return [
        {
            "sample": case.sample(i),
            "analyte": case.analyte(i),
            "channel": case.channel(i),
            "attempt": int(case.series.attempt[i]),
            "verdict": outcomes.verdict_of(i).word,
            "value": None if i in case.faults else number(values[i]),
            "unit": case.method.result_unit,
        }
        for i in range(len(case))
    ]


def verdict_counts(outcomes: Outcomes) -> dict[str, int]:
    """Count the series of each verdict."""
    counts: dict[str, int] = {}
    for i in range(len(outcomes.case)):
        word = outcomes.verdict_of(i).word
        counts[word] = counts.get(word, 0) + 1
    return counts


if __name__ == "__main__":
    serve(Worker().handle)
