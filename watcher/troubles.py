"""What is wrong now, and who was told: every trouble is mailed once while it lasts and shown until it is gone.

The one place where a round that failed is dealt with: a passing fault of the system is named and waited out; a
defect is logged with its traceback, mailed once, and the service goes on.
"""

from __future__ import annotations

import sqlite3
import threading
import traceback
from typing import TYPE_CHECKING, TypeVar

import structlog

from watcher import notices
from watcher.folder import Trouble

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from watcher.addressing import Addressing
    from watcher.clock import Clock
    from watcher.ledger import Ledger
    from watcher.replies import WantedMail

T = TypeVar("T")

_log = structlog.get_logger("spikewarden.troubles")


class Troubles:
    """The troubles of a running service; used by all its threads.

    Parameters
    ----------
    ledger, addressing, clock
        To mail each trouble once.
    """

    def __init__(self, ledger: Ledger, addressing: Addressing, clock: Clock) -> None:
        self._ledger = ledger
        self._addressing = addressing
        self._clock = clock
        self._lock = threading.Lock()
        self._now: dict[str, tuple[Trouble, ...]] = {}
        self._told: set[str] = set()
        self._unmailed: list[WantedMail] = []

    def sentences(self) -> list[str]:
        """Everything that is wrong now."""
        with self._lock:
            return [each.sentence for source in self._now.values() for each in source]

    def set(self, source: str, troubles: Iterable[Trouble]) -> None:
        """Say what is wrong with one part of the service now; nothing, where it is well."""
        with self._lock:
            self._now[source] = tuple(troubles)

    def defect(self, error: str, trace: str) -> None:
        """Take note of a defect: logged with its traceback, mailed once for each distinct one."""
        _log.error("defect of the program", error=error, traceback=trace)
        sentence = f"Defect of the program: {error}. What it was doing has no result; the log has the traceback."
        with self._lock:
            self._now[f"defect {error}"] = (Trouble(f"defect:{error}", sentence),)
            self._told.add(f"defect:{error}")
            self._unmailed.append(notices.defect(error, trace))

    def survive(self, part: str, work: Callable[[], T]) -> T | None:
        """Run a part's round; whatever stops it, the service goes on. Returns None where it was stopped."""
        try:
            result = work()
        except (OSError, sqlite3.OperationalError) as error:
            # Full disk, vanished share, read-only folder: nothing was lost, the next round tries again.
            _log.error("round failed", part=part, error=str(error))
            self.set(part, (_passing(part, error),))
            return None
        except Exception as error:  # noqa: BLE001 - the one place where a defect ends: the others' work goes on
            where = traceback.extract_tb(error.__traceback__)[-1]
            name = f"{type(error).__name__} in {where.name} (line {where.lineno})"
            self.defect(name, "".join(traceback.format_exception(error)))
            return None
        self.set(part, ())
        return result

    def report_new(self) -> None:
        """Log and mail what was not told yet; call it from one thread."""
        with self._lock:
            present = {each.key: each for source in self._now.values() for each in source}
            new = [each for key, each in present.items() if key not in self._told]
            self._told = set(present)
            defects, self._unmailed = self._unmailed, []
        try:
            self._report(new, defects)
        except Exception:
            with self._lock:  # the ledger's disk is full: all of it is told later, what was queued is known by its key
                self._told.difference_update(each.key for each in new)
                self._unmailed[:0] = defects
            raise

    def _report(self, new: list[Trouble], defects: list[WantedMail]) -> None:
        for each in new:
            _log.warning("trouble", sentence=each.sentence)
        mails = list(defects)
        # A restart knows nothing of what it told: what was mailed before is not said again beside what is new.
        if news := [each for each in new if not self._ledger.mailed(self._lasting_key(each))]:
            mails.append(notices.troubles(news, tuple(self._lasting_key(each) for each in news)))
        for wanted in mails:
            mail = self._addressing.address(wanted)
            if mail is not None:
                self._ledger.report(mail)

    def _lasting_key(self, trouble: Trouble) -> str:
        """What about a file is told once for ever; what comes and goes, at most once a day."""
        if trouble.key.startswith("odd:"):
            return trouble.key
        return f"{trouble.key}:{self._clock.now():%Y-%m-%d}"


def _passing(part: str, error: Exception) -> Trouble:
    return Trouble(
        f"round:{part}:{type(error).__name__}",
        f"The service cannot go on with {part} ({error}). Nothing is lost; it tries again by itself. See whether a "
        "disk is full, a share is gone or a folder may not be written.",
    )
