"""From what is to be said to a mail in the queue: to whom, from when, under which identity, and whether at all.

What a mail says comes from elsewhere. Kinds that nobody asked for are dropped here, and with them their keys:
whoever asks for them later is told of what comes up then.
"""

from __future__ import annotations

from datetime import timedelta
from typing import TYPE_CHECKING

from watcher.clock import stamp
from watcher.ledger_rows import QueuedMail
from watcher.letter import new_message_id

if TYPE_CHECKING:
    from watcher.clock import Clock
    from watcher.replies import WantedMail
    from watcher.service_settings import MailSettings


class Addressing:
    """Makes queued mails.

    Parameters
    ----------
    settings
        Where mails go; None: nowhere.
    clock
        For due times.
    """

    def __init__(self, settings: MailSettings | None, clock: Clock) -> None:
        self._settings = settings
        self._clock = clock

    def renew(self, settings: MailSettings | None) -> None:
        """Address by these settings from now on."""
        self._settings = settings

    def address(self, wanted: WantedMail, *, at_once: bool = False) -> QueuedMail | None:
        """Address a mail; None where nobody wants it.

        Parameters
        ----------
        wanted
            What it says.
        at_once
            Whether a mail that should wait is due now.
        """
        if self._settings is None or wanted.kind not in (*self._settings.about, "alive"):
            return None
        wait = timedelta(seconds=0 if at_once else wanted.after_seconds)
        return QueuedMail(
            kind=wanted.kind,
            subject=wanted.subject,
            body=wanted.body,
            keys=wanted.keys,
            recipients=self._settings.to,
            message_id=new_message_id(self._settings.sender),
            due_at=stamp(self._clock.now() + wait),
            pictures=wanted.pictures,
        )
