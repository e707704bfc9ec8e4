"""`check --mail`: one test mail by the way that alerts take, and what the server said of each address."""

from __future__ import annotations

from typing import TYPE_CHECKING

from watcher.clock import SystemClock, stamp
from watcher.exit_codes import ALL_PASS, NOT_DONE
from watcher.inspection import settings_of
from watcher.ledger_rows import DueMail
from watcher.letter import compose, new_message_id
from watcher.post import Post
from watcher.service_settings import ServiceSettings
from watcher.terminal import console, heading, lines

if TYPE_CHECKING:
    from pathlib import Path


def run(config: Path) -> int:
    """Send a test mail to everybody whom alerts would reach; return the exit code."""
    settings = settings_of(config)
    if settings is None:
        return NOT_DONE
    mail = ServiceSettings.from_plain(settings.service()).mail
    if mail is None:
        lines(console(error=True), ["The settings say mail: none, so nobody is mailed. No test mail was sent."])
        return NOT_DONE
    now = SystemClock().now()
    headline = f"TEST {settings.file.laboratory}: alerts reach you"
    due = DueMail(
        id=0,
        message_id=new_message_id(mail.sender),
        subject=headline,
        body=f"{headline}\n\nDO\nNothing. Somebody tried whether mails of spikewarden arrive.\n",
        created_at=stamp(now),
        first_due_at=stamp(now),
        recipients=mail.to,
        possible_repeat=False,
        attempts=0,
    )
    outcomes = Post(mail).send(compose(due, mail.sender, mail.to, now), mail.to)
    out = console()
    heading(out, f"Test mail by {mail.server}:{mail.port}, from {mail.sender}")
    lines(out, (f"{each.address}: {each.state}{f' ({each.error})' if each.error else ''}" for each in outcomes))
    if all(each.state == "delivered" for each in outcomes):
        return ALL_PASS
    remedy = "Correct mail.server, port, security, user, password_file, from or to, and run it again."
    lines(console(error=True), [f"The server did not take the test mail for everybody. {remedy}"])
    return NOT_DONE
