"""A queued mail as a message: headers that nothing in an export can break, and the text as it was queued.

The only sentences added here are about the mail itself: that it may be a repeat, and that it is late.
"""

from __future__ import annotations

import email.policy
import email.utils
import unicodedata
from datetime import timedelta
from email.message import EmailMessage
from typing import TYPE_CHECKING

from watcher.clock import moment

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import datetime

    from watcher.ledger_rows import DueMail

#: Characters of a subject; a phone shows fewer.
SUBJECT_LIMIT = 160
#: A mail that left so much after it was due says so.
LATE_AFTER = timedelta(minutes=15)

#: Only ASCII on the line: no server has to promise anything.
_POLICY = email.policy.SMTP.clone(cte_type="7bit")


def clean(text: str, limit: int | None = None) -> str:
    r"""Make a text fit for a header: no control or invisible directing characters, one line, capped.

    >>> clean("FAIL SED-12\r\nBcc: nobody@example")
    'FAIL SED-12 Bcc: nobody@example'
    """
    visible = "".join(" " if unicodedata.category(char) in _UNFIT else char for char in text)
    line = " ".join(visible.split())
    return line if limit is None or len(line) <= limit else line[: limit - 1] + "…"


#: Control, formatting (directions of writing), half characters, private and unassigned, line and paragraph ends.
_UNFIT = frozenset({"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"})


def new_message_id(sender: str) -> str:
    """Make an identity for a mail, in the sender's domain; asks no name server."""
    _, _, domain = sender.rpartition("@") if "@" in sender else ("", "", "localhost")
    return email.utils.make_msgid(domain=domain.strip(">. ") or "localhost")


def compose(due: DueMail, sender: str, recipients: Sequence[str], now: datetime) -> bytes:
    """Write the message as it goes over the line.

    Parameters
    ----------
    due
        The queued mail.
    sender, recipients
        Addresses for ``From`` and ``To``.
    now
        For ``Date``.
    """
    message = EmailMessage(policy=_POLICY)
    message["Subject"] = clean(f"LATE {due.subject}" if _is_late(due, now) else due.subject, SUBJECT_LIMIT)
    message["From"] = clean(sender)
    message["To"] = ", ".join(clean(address) for address in recipients)
    message["Date"] = email.utils.format_datetime(now)
    message["Message-ID"] = due.message_id
    message["Auto-Submitted"] = "auto-generated"
    message.set_content("".join(_remarks(due, now)) + _body(due.body) + _seal(due))
    return message.as_bytes()


def _is_late(due: DueMail, now: datetime) -> bool:
    return now - moment(due.first_due_at) > LATE_AFTER


def _remarks(due: DueMail, now: datetime) -> list[str]:
    remarks = []
    if due.possible_repeat:
        remarks.append("possible repeat: it is not known whether an earlier attempt to send this mail reached you.\n")
    if _is_late(due, now):
        remarks.append(f"late: this mail was due at {due.first_due_at} and could not be sent until now.\n")
    return [*remarks, "\n"] if remarks else []


def _seal(due: DueMail) -> str:
    """Say which entry of the ledger queued the mail: a mailbox is a witness that nobody at the bench can alter."""
    return "" if due.seal is None else f"\nLedger entry {due.seal.number}, seal {due.seal.seal}\n"


def _body(text: str) -> str:
    """Keep the text's lines and drop what could steer a terminal or half a character."""
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    kept = (
        "".join(c if c == "\t" or unicodedata.category(c) not in _UNFIT else "\N{REPLACEMENT CHARACTER}" for c in line)
        for line in lines
    )
    return "\n".join(kept)
