"""One conversation with the mail server about one mail, under one deadline, with an outcome for each recipient.

Told apart are: delivered; refused for good (5xx for this recipient or this message); not now (anything before the
message was handed over, and 4xx); and unknown: the line broke after the message began to travel, so that the
server may have it. Certificates are always verified, and nobody signs in over an open line. What is in the mail
and when it is tried again is decided elsewhere.
"""

from __future__ import annotations

import contextlib
import smtplib
import socket
import ssl
import threading
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from watcher.errors import WatcherError
from watcher.ledger_rows import RecipientOutcome
from watcher.log import hide
from watcher.password import read_password

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from watcher.service_settings import MailSettings

#: Seconds for each single answer of the server.
ANSWER_SECONDS = 20.0
#: Seconds for a whole attempt.
ATTEMPT_SECONDS = 60.0

_FAULTS = (smtplib.SMTPException, OSError, ValueError, WatcherError)


class Post:
    """The way to the mail server; one attempt at a time, which another thread may break off.

    Parameters
    ----------
    settings
        Server, protection, sign-in, sender.
    answer_seconds, attempt_seconds
        How long to wait for one answer, and for all of it.
    """

    def __init__(
        self,
        settings: MailSettings,
        *,
        answer_seconds: float = ANSWER_SECONDS,
        attempt_seconds: float = ATTEMPT_SECONDS,
    ) -> None:
        self._settings = settings
        self._answer_seconds = answer_seconds
        self._attempt_seconds = attempt_seconds
        self._current: _Conversation | None = None
        self._closed = False

    @property
    def sender(self) -> str:
        """The address mails come from."""
        return self._settings.sender

    def send(self, message: bytes, recipients: Sequence[str]) -> list[RecipientOutcome]:
        """Try to deliver a message; never raises for what a server or network does.

        Returns
        -------
        list of RecipientOutcome
            One for each recipient, without a time for the next attempt.
        """
        conversation = _Conversation(self._settings, self._answer_seconds, message, tuple(recipients))
        self._current = conversation
        if self._closed:
            return conversation.outcomes("the service is stopping")
        # A thread of its own: looking up a name cannot be interrupted, only left behind.
        thread = threading.Thread(target=conversation.run, name="conversation", daemon=True)
        thread.start()
        if not conversation.ended.wait(self._attempt_seconds):
            conversation.break_off(f"no outcome within {self._attempt_seconds:g} s")
            conversation.ended.wait(1.0)
        return conversation.outcomes()

    def close(self) -> None:
        """Break off the attempt under way and refuse further ones."""
        self._closed = True
        if self._current is not None:
            self._current.break_off("the service is stopping")


@dataclass(slots=True)
class _Conversation:
    """The state of one attempt; filled by its thread, read by the one that waits for it."""

    settings: MailSettings
    answer_seconds: float
    message: bytes
    recipients: tuple[str, ...]
    ended: threading.Event = field(default_factory=threading.Event)
    #: The message may be at the server from here on.
    handed_over: bool = False
    #: Nobody waits any more: the message must not be handed over.
    given_up: bool = False
    known: dict[str, RecipientOutcome] = field(default_factory=dict)
    fault: str | None = None
    _server: smtplib.SMTP | None = None
    _turn: threading.Lock = field(default_factory=threading.Lock)

    def run(self) -> None:
        try:
            self._talk()
        except _FAULTS as error:
            self.fault = self.fault or _text_of(error)
        finally:
            self._hang_up()
            self.ended.set()

    def break_off(self, reason: str) -> None:
        """Give up, from another thread: cut the line, or leave a search for the server behind."""
        with self._turn:
            self.given_up = True
            self.fault = self.fault or reason
            nothing_left = not self.handed_over
        line = None if self._server is None else self._server.sock
        if line is not None:
            with contextlib.suppress(OSError):
                # Past any TLS layer, whose own shutdown belongs to the thread that reads.
                socket.socket.shutdown(line, socket.SHUT_RDWR)
        if nothing_left:
            self.ended.set()

    def outcomes(self, fault: str | None = None) -> list[RecipientOutcome]:
        """What is known about each recipient."""
        fault = fault or self.fault or "the conversation ended without an answer"
        open_state = "unknown" if self.handed_over else "waiting"
        known = dict(self.known)
        return [known.get(each) or RecipientOutcome(each, open_state, fault) for each in self.recipients]

    def _talk(self) -> None:
        server = self._connect()
        self._sign_in(server)
        code, answer = server.mail(self.settings.sender)
        if code != 250:
            raise smtplib.SMTPSenderRefused(code, answer, self.settings.sender)
        accepted = [each for each in self.recipients if self._announce(server, each)]
        if accepted:
            self._hand_over(server, accepted)
        with contextlib.suppress(smtplib.SMTPException, OSError):
            server.quit()  # every outcome is known; a rude goodbye changes none

    def _connect(self) -> smtplib.SMTP:
        settings = self.settings
        address = (settings.server, settings.port)
        if settings.security == "none":
            self._server = server = smtplib.SMTP(*address, timeout=self.answer_seconds)
        elif settings.security == "tls":
            context = _verifying(settings.ca_file)
            self._server = server = smtplib.SMTP_SSL(*address, timeout=self.answer_seconds, context=context)
        else:
            context = _verifying(settings.ca_file)
            self._server = server = smtplib.SMTP(*address, timeout=self.answer_seconds)
            server.starttls(context=context)  # raises where the server has none: no silent step back
        server.ehlo_or_helo_if_needed()
        return server

    def _sign_in(self, server: smtplib.SMTP) -> None:
        if self.settings.user is None:
            return
        if self.settings.security == "none":  # the settings refuse this too; a password must not hang on that
            raise smtplib.SMTPNotSupportedError("no sign-in without TLS")
        password = read_password(self.settings.password_file)
        hide(password)
        server.login(self.settings.user, password.reveal())

    def _announce(self, server: smtplib.SMTP, address: str) -> bool:
        code, answer = server.rcpt(address)
        if code in (250, 251):
            return True
        if code == 421:
            raise smtplib.SMTPResponseException(code, answer)
        self.known[address] = _turned_down(address, code, answer)
        return False

    def _hand_over(self, server: smtplib.SMTP, accepted: list[str]) -> None:
        with self._turn:
            if self.given_up:
                raise smtplib.SMTPServerDisconnected("given up before the message was handed over")
            self.handed_over = True
        try:
            code, answer = server.data(self.message)
        except smtplib.SMTPDataError as error:  # not even begun
            code, answer = error.smtp_code, error.smtp_error  # type: ignore[assignment]
        for address in accepted:
            self.known[address] = (
                RecipientOutcome(address, "delivered") if code == 250 else _turned_down(address, code, answer)
            )

    def _hang_up(self) -> None:
        if self._server is not None:
            with contextlib.suppress(OSError):
                self._server.close()


def _verifying(ca_file: Path | None) -> ssl.SSLContext:
    """Make a context that verifies certificates; the library's own default would not."""
    context = ssl.create_default_context()
    if ca_file is not None:
        context.load_verify_locations(cafile=ca_file)
    return context


def _turned_down(address: str, code: int, answer: bytes | str) -> RecipientOutcome:
    state = "refused" if 500 <= code <= 599 else "waiting"
    return RecipientOutcome(address, state, f"{code} {_shown(answer)}")


def _text_of(error: BaseException) -> str:
    if isinstance(error, smtplib.SMTPResponseException):
        return f"{type(error).__name__}: {error.smtp_code} {_shown(error.smtp_error)}"
    return f"{type(error).__name__}: {error}"


def _shown(answer: bytes | str) -> str:
    text = answer.decode("utf-8", "backslashreplace") if isinstance(answer, bytes) else answer
    return " ".join(text.split())[:300]
