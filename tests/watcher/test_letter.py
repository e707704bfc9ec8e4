"""A queued mail as a message: nothing in an export may break it or steer it."""

from __future__ import annotations

import email
import email.policy
import re
from collections import Counter
from datetime import UTC, datetime
from html.parser import HTMLParser
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from watcher.ledger_rows import DueMail, Picture
from watcher.letter import COLUMNS, PNG, SUBJECT_LIMIT, clean, compose, new_message_id
from watcher.letter_html import unfolded

if TYPE_CHECKING:
    from pathlib import Path

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
    return str(sent.get_body(("plain",)).get_content()).replace("\r\n", "\n")


def _html_of(sent: Any) -> str:
    return str(sent.get_body(("html",)).get_content())


def test_the_headers_of_a_mail() -> None:
    """Sender, recipients, date, identity, and that no person wrote it."""
    sent = _message(_due(recipients=("lead@example", "deputy@example")))

    assert dict(sent.items()) | {"Content-Type": "", "MIME-Version": ""} == {
        "Subject": "FAIL RIV-17 Zn",
        "From": "bench@example",
        "To": "lead@example, deputy@example",
        "Date": "Tue, 01 Dec 2026 07:30:00 +0000",
        "Message-ID": "<1@example>",
        "Auto-Submitted": "auto-generated",
        "Content-Type": "",
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
    _text_of(sent).encode("utf-8")
    _html_of(sent).encode("utf-8")


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
    plain = _text_of(_message(_due()))
    late = _message(_due(possible_repeat=True, first_due_at="2026-11-28T07:30:00.000000Z"))
    remarked = unfolded(_text_of(late))

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


def _picture(folder: Path, content: bytes = PNG + b"plot", alt: str = "Additions line of SED-12 Zn") -> Picture:
    path = folder / "plot.png"
    path.write_bytes(content)
    return Picture(path, alt)


@given(st.lists(st.text(alphabet="ab >-\tF", max_size=200), max_size=8))
def test_text_is_broken_at_72_columns_and_can_be_joined_again(paragraphs: list[str]) -> None:
    """Every line fits 72 columns unless a word does not, and a phone gets the paragraphs back (RFC 3676)."""
    paragraphs = [" ".join(each.split()) for each in paragraphs]

    sent = _text_of(_message(_due(body="\n".join(["first", *paragraphs]) + "\n")))

    assert all(len(line) <= COLUMNS or " " not in line.strip() for line in sent.split("\n"))
    unstuffed = "\n".join(line.removeprefix(" ") for line in sent.split("\n"))
    assert unfolded(unstuffed) == "\n".join(["first", *paragraphs]) + "\n"
    assert "format=flowed" in str(_message(_due()).get_body(("plain",))["Content-Type"]).replace('"', "")


@given(st.text(), st.lists(st.text(min_size=1), min_size=1, max_size=4))
def test_nothing_in_a_mail_is_markup(headline: str, paragraphs: list[str]) -> None:
    """Whatever a text holds, the HTML part has the tags that the program writes, and no others."""
    tags: Counter[str] = Counter()

    class Reader(HTMLParser):
        def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
            tags[tag] += 1
            assert {name for name, _ in attrs} <= {"style", "lang", "charset", "name", "content"}

    Reader().feed(_html_of(_message(_due(subject="s", body="\n".join([headline, "", "DO", *paragraphs])))))

    assert tags.keys() <= {"html", "head", "meta", "body", "p", "h1", "h2", "div", "ul", "li", "em"}


def test_the_html_part_says_what_the_text_says() -> None:
    """Headline, sections and sentences are the same words, for people who read the one or the other."""
    body = "FAIL RIV-17 Zn: recovery 61 %\n\nDO\nPrepare RIV-17 again.\n\nHOLD\n- RIV-17\n- nothing else\n"

    html = _html_of(_message(_due(body=body)))

    words = re.sub(r"<[^>]+>", " ", html.partition("<body")[2].partition(">")[2]).split()
    assert words == body.replace("- ", "").split()


def test_a_plot_stands_in_the_mail_with_its_words(tmp_path: Path) -> None:
    """The picture travels inside the mail, is referred to by its identity, and has an alternative text."""
    sent = _message(_due(pictures=(_picture(tmp_path, alt='line of "SED-12" <b>'),)))

    (picture,) = [part for part in sent.walk() if part.get_content_type() == "image/png"]
    assert picture.get_content() == PNG + b"plot"
    (source,) = re.findall(r'src="cid:([^"]+)"', _html_of(sent))
    assert picture["Content-ID"] == f"<{source}>"
    assert 'alt="line of &quot;SED-12&quot; &lt;b&gt;"' in _html_of(sent)
    assert sent["Message-ID"] == "<1@example>"


@pytest.mark.parametrize("fate", ["gone", "altered"])
def test_a_mail_goes_out_without_a_plot_that_is_gone(tmp_path: Path, fate: str) -> None:
    """A picture that a power cut took or someone changed keeps no alert back."""
    picture = _picture(tmp_path)
    if fate == "gone":
        picture.staged.unlink()
    else:
        picture.staged.write_bytes(b"other")

    sent = _message(_due(pictures=(picture,)))

    assert "img" not in _html_of(sent)
    assert _text_of(sent) == "DO prepare RIV-17 again\n"
