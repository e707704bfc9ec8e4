"""Conversations with a real mail server that answers as its script says."""

from __future__ import annotations

import socket
import threading
import time
from typing import TYPE_CHECKING, Any

import pytest

from watcher.password import MASK, Secret
from watcher.post import Post
from watcher.service_settings import MailSettings

if TYPE_CHECKING:
    from pathlib import Path

MESSAGE = b"Subject: FAIL RIV-17 Zn\r\n\r\n.DO prepare RIV-17 again\r\n"
TWO = ("lead@example", "deputy@example")


def _post(server: Any, **options: Any) -> Post:
    timing = {key: options.pop(key) for key in ("answer_seconds", "attempt_seconds") if key in options}
    settings = {"security": "none"} | options
    return Post(MailSettings(server.host, "bench@example", TWO, port=server.port, **settings), **timing)


def _states(outcomes: Any) -> dict[str, tuple[str, str | None]]:
    return {each.address: (each.state, each.error) for each in outcomes}


def test_a_mail_reaches_both_recipients_in_one_conversation(mail_server: Any) -> None:
    """One message for two recipients, with a leading point intact."""
    outcomes = _post(mail_server).send(MESSAGE, TWO)

    assert _states(outcomes) == dict.fromkeys(TWO, ("delivered", None))
    ((recipients, text),) = mail_server.mailbox.received
    assert recipients == TWO
    assert ".DO prepare" in text
    assert "..DO" not in text


def test_one_recipient_refused_of_two(mail_server: Any) -> None:
    """The other one has the mail; the refusal is told with the server's words."""
    mail_server.mailbox.rcpt["deputy@example"] = "550 no such person"

    outcomes = _post(mail_server).send(MESSAGE, TWO)

    assert _states(outcomes) == {
        "lead@example": ("delivered", None),
        "deputy@example": ("refused", "550 no such person"),
    }


def test_one_recipient_put_off_of_two(mail_server: Any) -> None:
    """A 4xx for one recipient puts off that one only."""
    mail_server.mailbox.rcpt["deputy@example"] = "451 mailbox busy"

    outcomes = _post(mail_server).send(MESSAGE, TWO)

    assert _states(outcomes) == {
        "lead@example": ("delivered", None),
        "deputy@example": ("waiting", "451 mailbox busy"),
    }


@pytest.mark.parametrize(
    ("step", "answer", "state"),
    [
        ("data", "451 later", "waiting"),
        ("data", "421 closing", "waiting"),
        ("data", "554 not this message", "refused"),
        ("mail", "421 closing", "waiting"),
        ("mail", "451 later", "waiting"),
        ("mail", "550 who are you", "waiting"),
        ("rcpt", "421 closing", "waiting"),
        ("rcpt", "550 nobody here", "refused"),
    ],
)
def test_answers_are_told_apart(mail_server: Any, step: str, answer: str, state: str) -> None:
    """4xx is "not now"; 5xx for recipient or message is for good; 5xx for the sender is no recipient's fault."""
    if step == "rcpt":
        mail_server.mailbox.rcpt = dict.fromkeys(TWO, answer)
    else:
        getattr(mail_server.mailbox, step).append(answer)

    outcomes = _post(mail_server).send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {state}
    assert all(answer[:3] in (each.error or "") for each in outcomes)
    assert mail_server.mailbox.received == []


def test_a_line_that_breaks_after_the_message_is_unknown(mail_server: Any) -> None:
    """The server stored the mail and went away without an answer: nobody can know from here."""
    mail_server.mailbox.drops = 1

    outcomes = _post(mail_server).send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {"unknown"}
    assert len(mail_server.mailbox.received) == 1


def test_no_server_is_not_now() -> None:
    """A refused connection and a name that does not exist put every recipient off."""
    with socket.socket() as unused:
        unused.bind(("127.0.0.1", 0))
        port = unused.getsockname()[1]
    settings = MailSettings("127.0.0.1", "bench@example", TWO, port=port, security="none")

    outcomes = Post(settings).send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {"waiting"}
    assert "ConnectionRefusedError" in (outcomes[0].error or "")


class _Dribbler:
    """A server that sends one byte of its greeting at a time and never ends."""

    def __init__(self, until: threading.Event) -> None:
        self._socket = socket.create_server(("127.0.0.1", 0))
        self.host, self.port = self._socket.getsockname()
        self._until = until
        self._thread = threading.Thread(target=self._dribble, daemon=True)
        self._thread.start()

    def _dribble(self) -> None:
        line, _ = self._socket.accept()
        with line, self._socket:
            while not self._until.wait(0.05):
                try:
                    line.sendall(b"2")
                except OSError:
                    return

    def join(self) -> None:
        self._until.set()
        self._thread.join(5.0)


def test_a_dribbling_server_meets_the_deadline_of_the_attempt() -> None:
    """A byte now and then keeps no attempt alive beyond its deadline."""
    dribbler = _Dribbler(threading.Event())
    begun = time.monotonic()

    outcomes = _post(dribbler, answer_seconds=5.0, attempt_seconds=0.4).send(MESSAGE, TWO)

    assert time.monotonic() - begun < 4.0
    assert _states(outcomes) == dict.fromkeys(TWO, ("waiting", "no outcome within 0.4 s"))
    dribbler.join()


def test_a_server_that_is_silent_after_the_message_is_unknown(mail_server: Any) -> None:
    """The deadline of the attempt also ends the wait for the last answer, whose outcome is then unknown."""
    answer = threading.Event()
    mail_server.mailbox.before_answer = lambda: answer.wait(5.0)

    outcomes = _post(mail_server, attempt_seconds=0.4).send(MESSAGE, TWO)
    answer.set()

    assert _states(outcomes) == dict.fromkeys(TWO, ("unknown", "no outcome within 0.4 s"))


def test_a_closed_way_sends_nothing(mail_server: Any) -> None:
    """After the service began to stop, no conversation begins."""
    way = _post(mail_server)
    way.close()

    assert {each.state for each in way.send(MESSAGE, TWO)} == {"waiting"}
    assert mail_server.mailbox.received == []


@pytest.fixture
def password_file(tmp_path: Path) -> Path:
    """A file with the right password and a line end."""
    path = tmp_path / "password"
    path.write_text("brine-and-roof\n")
    return path


def test_starttls_with_sign_in(start_mail_server: Any, authority: Any, sign_in_as: Any, password_file: Path) -> None:
    """Over STARTTLS with a private authority, a user signs in and the mail goes through."""
    server = start_mail_server(
        tls_context=authority.context,
        auth_required=True,
        authenticator=sign_in_as("bench", "brine-and-roof"),
    )
    way = _post(server, security="starttls", ca_file=authority.ca_file, user="bench", password_file=password_file)

    assert {each.state for each in way.send(MESSAGE, TWO)} == {"delivered"}


def test_tls_from_the_first_byte(start_mail_server: Any, authority: Any) -> None:
    """Over TLS with a private authority the mail goes through."""
    server = start_mail_server(ssl_context=authority.context)

    outcomes = _post(server, security="tls", ca_file=authority.ca_file).send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {"delivered"}


@pytest.mark.parametrize("security", ["tls", "starttls"])
def test_an_unknown_certificate_is_not_accepted(start_mail_server: Any, authority: Any, security: str) -> None:
    """Without the private authority the certificate is refused and nothing is sent."""
    option = "ssl_context" if security == "tls" else "tls_context"
    server = start_mail_server(**{option: authority.context})

    outcomes = _post(server, security=security).send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {"waiting"}
    assert "CERTIFICATE_VERIFY_FAILED" in (outcomes[0].error or "")
    assert server.mailbox.received == []


def test_a_certificate_for_another_host_is_not_accepted(start_mail_server: Any, authority: Any) -> None:
    """The certificate must be for the server that was asked for."""
    server = start_mail_server(ssl_context=authority.context)
    server.host = "localhost"

    outcomes = _post(server, security="tls", ca_file=authority.ca_file).send(MESSAGE, TWO)

    assert "CERTIFICATE_VERIFY_FAILED" in (outcomes[0].error or "")


def test_there_is_no_step_back_to_an_open_line(mail_server: Any, password_file: Path) -> None:
    """A server without STARTTLS gets neither password nor mail."""
    way = _post(mail_server, security="starttls", user="bench", password_file=password_file)

    outcomes = way.send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {"waiting"}
    assert "STARTTLS" in (outcomes[0].error or "")
    assert mail_server.mailbox.received == []


def test_a_wrong_password_keeps_the_mail_and_itself_secret(
    start_mail_server: Any, authority: Any, sign_in_as: Any, monkeypatch: Any
) -> None:
    """A refused sign-in is "not now", and the password is in no error."""
    monkeypatch.setenv("SPIKEWARDEN_MAIL_PASSWORD", "wrong-and-salty")
    server = start_mail_server(
        tls_context=authority.context, auth_required=True, authenticator=sign_in_as("bench", "brine-and-roof")
    )

    outcomes = _post(server, security="starttls", ca_file=authority.ca_file, user="bench").send(MESSAGE, TWO)

    assert {each.state for each in outcomes} == {"waiting"}
    assert "535" in (outcomes[0].error or "")
    assert "salty" not in (outcomes[0].error or "")


def test_a_missing_password_is_told(start_mail_server: Any, authority: Any, tmp_path: Path) -> None:
    """A password file that is not there puts the mail off with the file's name and the remedy."""
    server = start_mail_server(tls_context=authority.context)
    way = _post(server, security="starttls", ca_file=authority.ca_file, user="bench", password_file=tmp_path / "gone")

    error = way.send(MESSAGE, TWO)[0].error or ""

    assert f"cannot be read from {tmp_path / 'gone'}" in error
    assert "Correct mail.password_file" in error


def test_a_secret_shows_itself_nowhere() -> None:
    """Neither text, nor representation, nor formatting shows a secret."""
    secret = Secret("brine-and-roof")

    assert f"{secret} {secret!r} {[secret]}" == f"{MASK} Secret{MASK} [Secret{MASK}]"
    assert secret.reveal() == "brine-and-roof"
