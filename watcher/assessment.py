"""One export through the worker and into the ledger: its fate is decided here, in one place.

Bad input is refused, a failing sample is an ordinary result, a worker that dies costs an attempt, a defect of the
program refuses the export and is mailed once. A stop of the service costs nothing. What is computed, and what a
mail about a sample says, comes from the worker.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import timedelta
from typing import TYPE_CHECKING, Any

import structlog

from watcher import notices
from watcher.clock import moment
from watcher.failures import closed_by
from watcher.ledger_rows import Fate
from watcher.queueing import TargetTaken
from watcher.replies import Reply, ReplyBroken, read_reply
from watcher.worker import WorkerFailed

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping
    from pathlib import Path

    from watcher.addressing import Addressing
    from watcher.clock import Clock
    from watcher.copies import Copies
    from watcher.disk import Disk
    from watcher.ledger import Ledger
    from watcher.ledger_rows import AdoptedSettings, ExportRow
    from watcher.replies import WantedMail
    from watcher.service_settings import ServiceSettings
    from watcher.troubles import Troubles
    from watcher.worker import Worker

#: Where the worker puts result files, in the records folder.
STAGING_NAME = "outgoing"

_log = structlog.get_logger("spikewarden.assessment")


@dataclass(frozen=True, slots=True)
class Assessed:
    """An export as it stands after an evaluation, with the number of series for each verdict."""

    export: ExportRow
    counts: Mapping[str, int] = field(default_factory=dict)


class Assessment:
    """Evaluates exports.

    Parameters
    ----------
    settings
        Folders and times.
    adopted
        The settings in force.
    worker, ledger, copies, addressing, troubles, clock, disk
        The parts it works with.
    """

    def __init__(  # noqa: PLR0913 - it is where the parts of the service meet
        self,
        settings: ServiceSettings,
        adopted: AdoptedSettings,
        *,
        worker: Worker,
        ledger: Ledger,
        copies: Copies,
        addressing: Addressing,
        troubles: Troubles,
        clock: Clock,
        disk: Disk,
    ) -> None:
        self._adopted = adopted
        #: Mails were queued whose plots are still to be drawn.
        self.undrawn = False
        self.staging = settings.records / STAGING_NAME
        self._span_seconds = settings.span_seconds
        self._complete_after = timedelta(seconds=settings.complete_after_seconds)
        self._worker = worker
        self._ledger = ledger
        self._copies = copies
        self._addressing = addressing
        self._troubles = troubles
        self._clock = clock
        self._disk = disk

    def renew(self, settings: ServiceSettings, adopted: AdoptedSettings) -> None:
        """Evaluate under these settings from now on."""
        self._adopted = adopted
        self._complete_after = timedelta(seconds=settings.complete_after_seconds)

    def prepare(self) -> None:
        """Make the folder of result files and remove what an evaluation left that was cut short."""
        self.staging.mkdir(parents=True, exist_ok=True)
        # Without its name on disk, a power cut would take the folder and every staged file with it.
        self._disk.sync_folder(self.staging.parent)
        wanted = self._ledger.outgoing.staged_files()
        for path in self.staging.iterdir():
            if path not in wanted:
                path.unlink(missing_ok=True)

    def evaluate(self, export: ExportRow, *, at_once: bool) -> Assessed:
        """Evaluate an export and record what became of it.

        Parameters
        ----------
        export
            A pending one.
        at_once
            Mails about incomplete samples do not wait for what may still come.

        Raises
        ------
        WorkerUnfit, WorkerStopped
            Nothing was recorded; the export stays as it is.
        """
        if export.state == "accepted" and (original := self._ledger.duplicate_of(export)) is not None:
            return Assessed(self._ledger.recognise(export, original))
        copy = self._copies.path_of(export.sha256)
        if not copy.is_file():
            return self._refuse(export, f"its copy {copy} is missing. Put it back, or export it again changed")
        try:
            reply = self._ask(self._request(export, copy))
        except (WorkerFailed, ReplyBroken) as error:
            return self._attempt_failed(export, str(error))
        if reply.fate == "bug":
            self._troubles.defect(reply.error or "unnamed", reply.traceback or "")
            # Told in the transaction that refuses the export: between two of them the service may be killed.
            letter = notices.defect(reply.error or "unnamed", reply.traceback or "")
            return self._finish(export, _refused(f"defect of the program: {reply.error}", letter), at_once=True)
        return self._finish(export, reply, at_once=at_once)

    def _ask(self, request: dict[str, Any]) -> Reply:
        reply = read_reply(self._worker.ask(request), self.staging)
        if reply.fate == "waiting" and request["final"]:
            raise ReplyBroken("fate", "another one, since nothing more is waited for", "waiting")
        return reply

    def _request(self, export: ExportRow, copy: Path) -> dict[str, Any]:
        # an export whose last line does not come is evaluated once it has not changed for long enough
        complete = self._clock.now() - moment(export.accepted_at) >= self._complete_after
        return {
            "do": "evaluate",
            "copy": str(copy),
            "name": export.name,
            "sha256": export.sha256,
            "bytes": export.size,
            "revision": export.revision,
            "accepted_at": export.accepted_at,
            "seal": self._ledger.acceptance(export.id).plain(),
            "settings_number": self._adopted.number,
            "settings_sha256": self._adopted.sha256,
            "staging": str(self.staging),
            "final": complete,
            "alerted": sorted(self._ledger.alerted_keys(export.name)),
            "others": [self._other(each) for each in self._ledger.neighbours(export, self._span_seconds)],
            "lent": export.lent,
            "previous": self._previous(export),
        }

    def _other(self, export: ExportRow) -> dict[str, Any]:
        return {
            "copy": str(self._copies.path_of(export.sha256)),
            "name": export.name,
            "revision": export.revision,
            "accepted_at": export.accepted_at,
        }

    def _previous(self, export: ExportRow) -> dict[str, Any] | None:
        found = self._ledger.previous(export)
        if found is None:
            return None
        previous, family = found
        return {"copy": str(self._copies.path_of(previous.sha256)), "revision": previous.revision, "family": family}

    def _finish(self, export: ExportRow, reply: Reply, *, at_once: bool) -> Assessed:
        if reply.fate == "unchanged":
            counts = self._ledger.unchanged(export, wants=reply.wants)
            return Assessed(self._ledger.export(export.id), counts)
        wanted_mails = [*reply.mails, *(self._clearing(export, reply) if reply.fate == "done" else ())]
        mails = (self._addressing.address(wanted, at_once=at_once) for wanted in wanted_mails)
        fate = Fate(
            state=reply.fate,
            settings_number=self._adopted.number,
            layout=reply.layout,
            files=reply.files,
            mails=tuple(mail for mail in mails if mail is not None),
            series=reply.series,
            counts=reply.counts,
            problem=reply.problem,
            lent=reply.lent,
            wants=reply.wants,
            family=reply.family,
        )
        try:
            self._ledger.finish(export, fate, self._span_seconds)
            self.undrawn |= any(mail.pictures for mail in fate.mails)
        except TargetTaken as error:
            return self._refuse(export, str(error))
        _log.info("export evaluated", export=export.name, fate=fate.state, counts=fate.counts, problem=fate.problem)
        return Assessed(self._ledger.export(export.id), reply.counts)

    def _clearing(self, export: ExportRow, reply: Reply) -> Iterator[WantedMail]:
        """Say what is settled now: a refusal, or failures that were mailed."""
        if export.state in ("refused", "unclaimed"):
            yield notices.evaluated_after_all(export)
        mailed = [each for each in self._ledger.open_failures() if each.verdict == "fail"]
        if closed := closed_by(mailed, export, reply.series):
            yield notices.cleared(export, closed)

    def _refuse(self, export: ExportRow, reason: str) -> Assessed:
        return self._finish(export, _refused(reason, notices.refused(export, reason)), at_once=True)

    def _attempt_failed(self, export: ExportRow, reason: str) -> Assessed:
        _log.warning("evaluation failed", export=export.name, reason=reason)
        mail = self._addressing.address(notices.poison(export, self._adopted.number, reason))
        return Assessed(self._ledger.failed_attempt(export, self._adopted.number, reason, mail))


def _refused(reason: str, *mails: WantedMail) -> Reply:
    return Reply("refused", mails=mails, problem=reason)
