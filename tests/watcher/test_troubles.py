"""What is wrong is told once while it lasts, and a round that fails stops nothing."""

from __future__ import annotations

import sqlite3
from typing import TYPE_CHECKING, Any

import pytest

from watcher.addressing import Addressing
from watcher.folder import Trouble
from watcher.service_settings import MailSettings
from watcher.troubles import Troubles

if TYPE_CHECKING:
    from watcher.ledger import Ledger

AWAY = Trouble("folder:/bench/exports", "Exports folder /bench/exports is away. Look for it.")
ODD = Trouble("odd:SED-12.csv:a link", "SED-12.csv is a link. It was not taken in.")


@pytest.fixture
def troubles(ledger: Ledger, clock: Any) -> Troubles:
    """No troubles yet, mailed to the lead."""
    mail = MailSettings("mail.example", "bench@example", ("lead@example",))
    return Troubles(ledger, Addressing(mail, clock), clock)


def _subjects(ledger: Ledger) -> list[str]:
    return [row["subject"] for row in ledger._database.rows("SELECT subject FROM mails ORDER BY id")]


def test_a_trouble_is_mailed_once_while_it_lasts(troubles: Troubles, ledger: Ledger) -> None:
    """Seen at every look, it is mailed once and shown until it is gone."""
    for _ in range(3):
        troubles.set("folders", [AWAY])
        troubles.report_new()
    assert troubles.sentences() == [AWAY.sentence]

    troubles.set("folders", [])
    troubles.report_new()

    assert troubles.sentences() == []
    assert _subjects(ledger) == ["PROBLEM Exports folder /bench/exports is away"]


def test_a_trouble_that_comes_back_is_mailed_again_another_day(troubles: Troubles, ledger: Ledger, clock: Any) -> None:
    """Coming and going on one day gives one mail; on the next day another; an odd file is told once for ever."""
    for hours in (0, 1, 24):
        clock.advance(hours * 3600)
        for present in ([AWAY], [], [ODD], []):
            troubles.set("folders", present)
            troubles.report_new()

    assert _subjects(ledger) == [
        "PROBLEM Exports folder /bench/exports is away",
        "PROBLEM SED-12.csv is a link",
        "PROBLEM Exports folder /bench/exports is away",
    ]


def test_after_a_restart_only_what_is_new_is_mailed(troubles: Troubles, ledger: Ledger, clock: Any) -> None:
    """What was mailed before a restart and still lasts is not said again beside a new trouble."""
    troubles.set("folders", [ODD])
    troubles.report_new()
    mail = MailSettings("mail.example", "bench@example", ("lead@example",))
    restarted = Troubles(ledger, Addressing(mail, clock), clock)

    restarted.set("folders", [ODD, AWAY])
    restarted.report_new()

    assert _subjects(ledger) == ["PROBLEM SED-12.csv is a link", "PROBLEM Exports folder /bench/exports is away"]
    bodies = [row["body"] for row in ledger._database.rows("SELECT body FROM mails ORDER BY id")]
    assert ODD.sentence not in bodies[1]


def test_what_could_not_be_queued_is_told_later(troubles: Troubles, ledger: Ledger, monkeypatch: Any) -> None:
    """Where the ledger's disk is full when troubles and a defect are to be mailed, they are mailed when it is not."""
    troubles.set("folders", [ODD])
    troubles.defect("ZeroDivisionError in mean (line 3)", "Traceback")

    def full(_mail: Any) -> bool:
        raise sqlite3.OperationalError("database or disk is full")

    with monkeypatch.context() as patched:
        patched.setattr(ledger, "report", full)
        with pytest.raises(sqlite3.OperationalError):
            troubles.report_new()
    troubles.report_new()
    troubles.report_new()

    assert _subjects(ledger) == [
        "PROBLEM defect of the program: ZeroDivisionError in mean (line 3)",
        "PROBLEM SED-12.csv is a link",
    ]


def test_many_troubles_at_once_are_one_mail(troubles: Troubles, ledger: Ledger) -> None:
    """A hundred odd files are one mail that names twenty and counts the rest."""
    troubles.set("folders", [Trouble(f"odd:{n}", f"ROOF-{n}.csv is a link. Nothing.") for n in range(100)])
    troubles.report_new()

    (body,) = (row["body"] for row in ledger._database.rows("SELECT body FROM mails"))
    assert _subjects(ledger) == ["PROBLEM ROOF-0.csv is a link (and 99 more)"]
    assert body.count("is a link") == 20
    assert body.endswith("- and 80 more\n")


@pytest.mark.parametrize("fault", [OSError(28, "No space left"), sqlite3.OperationalError("database or disk is full")])
def test_a_passing_fault_is_waited_out(troubles: Troubles, ledger: Ledger, fault: Exception) -> None:
    """A full disk is told once, and gone with the next round that works."""

    def fail() -> float:
        raise fault

    for _ in range(2):
        assert troubles.survive("mailing", fail) is None
        troubles.report_new()
    assert str(fault) in troubles.sentences()[0]
    assert len(_subjects(ledger)) == 1

    assert troubles.survive("mailing", lambda: 7.0) == 7.0
    assert troubles.sentences() == []


def test_a_defect_is_mailed_once_for_each_distinct_one(troubles: Troubles, ledger: Ledger) -> None:
    """The same exception from the same line is one mail with its traceback; another one is another mail."""

    def divide() -> float:
        return 1 / 0

    def look_up() -> float:
        return {}[1]

    for work in (divide, divide, look_up):
        assert troubles.survive("mailing", work) is None
        troubles.report_new()

    assert [each.partition(" (")[0] for each in _subjects(ledger)] == [
        "PROBLEM defect of the program: ZeroDivisionError in divide",
        "PROBLEM defect of the program: KeyError in look_up",
    ]
