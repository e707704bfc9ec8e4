"""ATTENTION.txt in the results folder: the way to people that is left while mail is broken.

It is written when a mail has waited for too long or was refused for good, rewritten when that changes, and removed
when everything has gone out.
"""

from __future__ import annotations

from datetime import timedelta
from typing import TYPE_CHECKING

from watcher.clock import moment

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from watcher.clock import Clock
    from watcher.disk import Disk
    from watcher.ledger_rows import UndeliveredMail

FILE_NAME = "ATTENTION.txt"
#: A mail that could not be sent for so long is made known here.
PATIENCE = timedelta(minutes=5)
#: Mails named one by one.
NAMED = 50


class Attention:
    """The file in a results folder.

    Parameters
    ----------
    disk, clock
        The world.
    """

    def __init__(self, disk: Disk, clock: Clock) -> None:
        self._disk = disk
        self._clock = clock
        self._shown: str | None = None

    def show(self, results: Path, server: str, mails: Sequence[UndeliveredMail]) -> str | None:
        """Bring the file up to date.

        Parameters
        ----------
        results
            The results folder; where it is not there, nothing is written.
        server
            The mail server, as people know it.
        mails
            What is undelivered.

        Returns
        -------
        str or None
            The sentence that says that mail is broken, or None where it is well.

        Raises
        ------
        OSError
            The file could not be written or removed; it is tried again.
        """
        now = self._clock.now()
        stuck = [
            each
            for each in mails
            if each.state == "refused" or (each.last_error and now - moment(each.first_due_at) > PATIENCE)
        ]
        text = None if not stuck else _text(server, stuck)
        path = results / FILE_NAME
        if text != self._shown or (text is None and path.exists()):
            if text is None:
                path.unlink(missing_ok=True)
            elif results.is_dir():
                self._disk.atomic_write(path, text.encode())
            self._shown = text
        return None if text is None else text.partition("\n\n")[0].replace("\n", " ")


def _text(server: str, stuck: Sequence[UndeliveredMail]) -> str:
    refused = [each for each in stuck if each.state == "refused"]
    waiting = [each for each in stuck if each.state != "refused"]
    lines = []
    if waiting:
        lines.append(
            f"{len(waiting)} mails could not be sent by {server} ({waiting[-1].last_error}).\n"
            "They stay queued and are tried again by themselves. See whether the server is reachable from this "
            "computer and whether user, password_file and security in the settings are right."
        )
    if refused:
        lines.append(
            f"{len(refused)} mails were refused for good by {server} ({refused[-1].last_error}).\n"
            "They are not tried again. Correct mail.to or mail.from in the settings, and tell the people meant below."
        )
    lines.append(
        "What nobody was told by mail:\n"
        + "\n".join(
            f"- {_line(each.subject)} (to {_line(each.address)}, since {each.first_due_at})" for each in stuck[:NAMED]
        )
        + (f"\n- and {len(stuck) - NAMED} more" if len(stuck) > NAMED else "")
    )
    return "\n\n".join(lines) + "\n"


def _line(text: str) -> str:
    return "".join(char if char.isprintable() else " " for char in text)
