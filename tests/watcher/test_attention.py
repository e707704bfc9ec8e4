"""ATTENTION.txt: there while mails do not go out, gone when they have."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

from watcher.attention import Attention
from watcher.clock import stamp
from watcher.disk import Disk
from watcher.ledger_rows import UndeliveredMail

if TYPE_CHECKING:
    from pathlib import Path


def _mail(clock: Any, state: str = "waiting", error: str | None = "ConnectionRefusedError: refused") -> UndeliveredMail:
    return UndeliveredMail("FAIL RIV-17 Zn", "lead@example", state, stamp(clock.now()), 3, error)


def test_a_mail_that_waits_too_long_is_shown_and_taken_back(tmp_path: Path, clock: Any) -> None:
    """After five minutes the file names server, error, remedy and every alert; once they are out it is removed."""
    attention, path = Attention(Disk(), clock), tmp_path / "ATTENTION.txt"
    mail = _mail(clock)
    assert attention.show(tmp_path, "mail.example:587", [mail]) is None
    assert not path.exists()
    clock.advance(301)

    sentence = attention.show(tmp_path, "mail.example:587", [mail])

    text = path.read_text()
    assert sentence is not None
    assert sentence.startswith("1 mails could not be sent by mail.example:587 (ConnectionRefusedError: refused).")
    assert "password_file" in sentence
    assert "- FAIL RIV-17 Zn (to lead@example, since 2026-12-01T07:30" in text
    assert attention.show(tmp_path, "mail.example:587", []) is None
    assert not path.exists()


def test_a_mail_refused_for_good_is_shown_at_once(tmp_path: Path, clock: Any) -> None:
    """What a server will never take is shown at once, and the text says that it is not tried again."""
    Attention(Disk(), clock).show(tmp_path, "mail.example:587", [_mail(clock, "refused", "550 unknown")])
    assert "refused for good by mail.example:587 (550 unknown)" in (tmp_path / "ATTENTION.txt").read_text()


def test_a_file_left_by_the_last_run_is_removed(tmp_path: Path, clock: Any) -> None:
    """A service that starts with nothing undelivered removes what the last run wrote."""
    (tmp_path / "ATTENTION.txt").write_text("old")
    Attention(Disk(), clock).show(tmp_path, "mail.example:587", [])
    assert not (tmp_path / "ATTENTION.txt").exists()


def test_it_is_written_only_when_it_changes(tmp_path: Path, clock: Any) -> None:
    """A service that looks every few seconds does not write the share as often."""
    mail, attention = _mail(clock, "refused"), Attention(Disk(), clock)
    attention.show(tmp_path, "mail.example:587", [mail])
    first = (tmp_path / "ATTENTION.txt").stat().st_ino
    attention.show(tmp_path, "mail.example:587", [mail])
    assert (tmp_path / "ATTENTION.txt").stat().st_ino == first


def test_a_missing_results_folder_is_not_made(tmp_path: Path, clock: Any) -> None:
    """Under the mount point of a share that is gone nothing is written; the sentence is given all the same."""
    assert Attention(Disk(), clock).show(tmp_path / "gone", "mail.example:587", [_mail(clock, "refused")])
    assert not (tmp_path / "gone").exists()


@pytest.mark.parametrize("text", ["FAIL \x1b[31m", "FAIL\r\nx: y"])
def test_foreign_texts_do_not_steer_what_shows_them(tmp_path: Path, clock: Any, text: str) -> None:
    """Control characters of a sample's name do not come into the file."""
    mail = UndeliveredMail(text, "lead@example", "refused", stamp(clock.now()), 1, "550")
    Attention(Disk(), clock).show(tmp_path, "mail.example:587", [mail])
    assert all(char.isprintable() or char == "\n" for char in (tmp_path / "ATTENTION.txt").read_text())
