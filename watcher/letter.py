"""A queued mail as a message: headers that nothing in an export can break, and its text, plain and as HTML with plots.

The only sentences added here are about the mail itself: that it may be a repeat, and that it is late. The text is
`format=flowed` (RFC 3676): a phone joins its lines and breaks them to its own width.
"""

from __future__ import annotations

import email.policy
import email.utils
import textwrap
import unicodedata
from datetime import timedelta
from email.message import EmailMessage
from typing import TYPE_CHECKING

from watcher.clock import moment
from watcher.letter_html import html

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import datetime

    from watcher.ledger_rows import DueMail, Picture

#: Characters of a subject; a phone shows fewer.
SUBJECT_LIMIT = 160
#: How a picture begins (PNG specification, 5.2).
PNG = b"\x89PNG\r\n\x1a\n"
#: Width of the text.
COLUMNS = 72
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
    remarks, body, seal = _remarks(due, now), _body(due.body), _seal(due)
    message.set_content(_flowed("".join(remarks) + body + seal), params={"format": "flowed"})
    pictures = [(picture, content) for picture in due.pictures if (content := _content(picture)) is not None]
    domain = due.message_id.strip("<>").rpartition("@")[2]
    named = [(f"plot{number}.{due.id}@{domain}", picture.alt) for number, (picture, _) in enumerate(pictures, 1)]
    message.add_alternative(html(body, remarks, named, seal), subtype="html")
    part = message.get_body(("html",))
    for (cid, _), (_, content) in zip(named, pictures, strict=True):
        if part is not None:  # it was added a moment ago
            part.add_related(content, "image", "png", cid=f"<{cid}>", filename=f"{cid.partition('.')[0]}.png")
    return message.as_bytes()


def _content(picture: Picture) -> bytes | None:
    """Return a picture's bytes; None where it is not there or no picture: the mail says the same without it."""
    try:
        content = picture.staged.read_bytes()
    except OSError:
        return None
    return content if content.startswith(PNG) else None


def _flowed(text: str) -> str:
    """Break lines at 72 columns so that they can be joined again, and protect what would mean something (RFC 3676)."""
    lines = []
    for paragraph in text.split("\n"):
        broken = textwrap.wrap(
            paragraph, COLUMNS - 1, break_long_words=False, break_on_hyphens=False, drop_whitespace=True
        )
        # A line that goes on ends with a blank; the last one of a paragraph must not.
        lines += [f"{line} " for line in broken[:-1]] + (broken[-1:] or [""])
    return "\n".join(f" {line}" if line.startswith((" ", ">", "From ")) else line for line in lines)


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
