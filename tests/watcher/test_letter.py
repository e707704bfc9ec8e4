"""A queued mail as a message: nothing in an export may break it or steer it."""

from __future__ import annotations

import email
import email.policy
from datetime import UTC, datetime
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from watcher.ledger_rows import DueMail
from watcher.letter import SUBJECT_LIMIT, clean, compose, new_message_id

NOW = datetime(2026, 12, 1, 7, 30, tzinfo=UTC)


def _due(**facts: Any) -> DueMail:
    values: dict[str, Any] = {
        "id": 1,
        "message_id": "<1@example>",
        "subject": "FAIL RIV-17 Zn",
        "body": "DO prepare RIV-17 again\n",
        "created_at": "2026-12-01T07:29:00.000000Z",
        "first_due_at": "2026-12-01T07:29:00.000000Z",
        "recipients": ("lead@example",),
        "possible_repeat": False,
        "attempts": 0,
    }
    return DueMail(**values | facts)


def _message(mail: DueMail) -> Any:
    return email.message_from_bytes(compose(mail, "bench@example", mail.recipients, NOW), policy=email.policy.default)


def _text_of(sent: Any) -> str:
    return str(sent.get_content()).replace("\r\n", "\n")


def test_the_headers_of_a_mail() -> None:
    """Sender, recipients, date, identity, and that no person wrote it."""
    sent = _message(_due(recipients=("lead@example", "deputy@example")))

    assert dict(sent.items()) | {"Content-Type": "", "Content-Transfer-Encoding": "", "MIME-Version": ""} == {
        "Subject": "FAIL RIV-17 Zn",
        "From": "bench@example",
        "To": "lead@example, deputy@example",
        "Date": "Tue, 01 Dec 2026 07:30:00 +0000",
        "Message-ID": "<1@example>",
        "Auto-Submitted": "auto-generated",
        "Content-Type": "",
        "Content-Transfer-Encoding": "",
        "MIME-Version": "",
    }
    assert _text_of(sent) == "DO prepare RIV-17 again\n"


@given(st.text(), st.text())
def test_no_subject_or_body_can_break_a_mail(subject: str, body: str) -> None:
    """Whatever characters an export holds, the mail is sent, has one subject line, and no header more."""
    sent = _message(_due(subject=subject, body=body))

    assert sorted(sent.keys()) == sorted(_message(_due()).keys())
    assert len(sent["Subject"]) <= SUBJECT_LIMIT
    assert sent["Subject"].isprintable()
    sent.get_content().encode("utf-8")


@pytest.mark.parametrize("end", ["\r\n", "\n", "\r", "\v", "\f", "\x85", "\u2028", "\0"])
def test_a_hostile_sample_adds_no_header(end: str) -> None:
    """Every character that could end a line becomes a blank in the subject."""
    sent = _message(_due(subject=f"FAIL SED-12{end}Bcc: nobody@example"))

    assert sent["Subject"] == "FAIL SED-12 Bcc: nobody@example"
    assert sent["Bcc"] is None


def test_directing_characters_do_not_hide_a_name() -> None:
    """Characters that turn the direction of writing are taken out of subject and body."""
    sent = _message(_due(subject="FAIL \u202eSED-12", body="sample \u202eSED-12\n"))

    assert sent["Subject"] == "FAIL SED-12"
    assert _text_of(sent) == "sample \N{REPLACEMENT CHARACTER}SED-12\n"


def test_every_line_is_plain_ascii() -> None:
    """No server has to promise anything for a mail with µ in it."""
    raw = compose(_due(subject="FAIL µ", body="3 µg/L\n" * 3), "bench@example", ("lead@example",), NOW)

    assert raw.isascii()
    assert b"\n" not in raw.replace(b"\r\n", b"")


def test_a_long_subject_is_capped_visibly() -> None:
    """What does not fit is marked as cut."""
    assert clean("x" * 500, 10) == "xxxxxxxxx…"


def test_a_possible_repeat_and_a_late_mail_say_so() -> None:
    """The two remarks stand above the text, and only where they are true."""
    plain = _message(_due()).get_content()
    remarked = _message(_due(possible_repeat=True, first_due_at="2026-11-28T07:30:00.000000Z")).get_content()

    assert "repeat" not in plain
    assert "late" not in plain
    first, second, blank, *rest = remarked.splitlines()
    assert first.startswith("possible repeat: ")
    assert second.startswith("late: this mail was due at 2026-11-28T07:30:00.000000Z")
    assert (blank, rest) == ("", ["DO prepare RIV-17 again"])


def test_identities_are_in_the_senders_domain_and_differ() -> None:
    """Each mail has an identity of its own, whatever the sender's address looks like."""
    made = {new_message_id("bench@skerry.example") for _ in range(50)}

    assert len(made) == 50
    assert all(each.endswith("@skerry.example>") for each in made)
    assert new_message_id("bench").endswith("@localhost>")
