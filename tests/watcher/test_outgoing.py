"""The queue of mails and files: what is due, what is never sent twice, what is never dropped."""

from __future__ import annotations

from datetime import timedelta
from typing import TYPE_CHECKING, Any

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from watcher.ledger import Ledger
from watcher.ledger_rows import QueuedMail, RecipientOutcome, StagedFile

if TYPE_CHECKING:
    from pathlib import Path


def _accepted(ledger: Ledger, content: int = 1, name: str = "FL-1.csv") -> Any:
    export = ledger.accept(name, f"{content:064x}", 60)
    assert export is not None
    return export


def _due(ledger: Ledger, clock: Any) -> list[tuple[str, tuple[str, ...], bool]]:
    return [(each.subject, each.recipients, each.possible_repeat) for each in ledger.outgoing.due_mails(clock.now())]


def test_a_mail_of_known_keys_is_not_queued(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """Keys never expire: the same thing is not mailed again, something more is."""
    assert ledger.report(make_mail("fail", "a"))
    clock.advance(400 * 86400)
    assert not ledger.report(make_mail("fail", "a"))
    assert ledger.report(make_mail("fail", "a", "b"))
    assert ledger.report(make_mail("fail"))

    assert len(_due(ledger, clock)) == 3


@settings(max_examples=30, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.sets(st.sampled_from("abcdef"), min_size=1), max_size=8))
def test_every_key_is_mailed_and_no_mail_brings_only_old_news(tmp_path_factory: Any, batches: list[set[str]]) -> None:
    """Whatever the batches, each key is in a queued mail, and each queued mail has a key that was new."""
    with Ledger(tmp_path_factory.mktemp("records")) as ledger:
        known: set[str] = set()
        for number, keys in enumerate(batches):
            mail = QueuedMail("fail", "s", "b", tuple(sorted(keys)), ("lead@example",), f"<{number}@x>", "2026")
            assert ledger.report(mail) == (not keys <= known)
            known |= keys
        assert {row["key"] for row in ledger._database.rows("SELECT key FROM alerts")} == known


def test_recipients_fare_differently(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """One delivered, one refused for good, one put off, one unknown: each comes back as what it is."""
    ledger.report(make_mail("fail", to=("a@x", "b@x", "c@x", "d@x")))
    (mail,) = ledger.outgoing.due_mails(clock.now())
    assert ledger.outgoing.sending(mail)
    assert _due(ledger, clock) == []
    again = "2026-12-01T07:30:10.000000Z"
    ledger.outgoing.outcome(
        mail,
        [
            RecipientOutcome("a@x", "delivered"),
            RecipientOutcome("b@x", "refused", "550 unknown"),
            RecipientOutcome("c@x", "waiting", "451 later", again),
            RecipientOutcome("d@x", "unknown", "line broke", again),
        ],
    )
    assert _due(ledger, clock) == []

    clock.advance(10)

    assert _due(ledger, clock) == [("FAIL RIV-17 Zn", ("c@x",), False), ("FAIL RIV-17 Zn", ("d@x",), True)]
    assert [(each.address, each.state) for each in ledger.outgoing.undelivered_mails()] == [
        ("b@x", "refused"),
        ("c@x", "waiting"),
        ("d@x", "unknown"),
    ]


def test_an_unknown_outcome_stays_unknown(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """A later "not now" does not turn a possible repeat into a certain first."""
    ledger.report(make_mail("fail"))
    for state in ("unknown", "waiting"):
        (mail,) = ledger.outgoing.due_mails(clock.now())
        ledger.outgoing.sending(mail)
        now = clock.now().strftime("%Y-%m-%dT%H:%M:%S.%fZ")
        ledger.outgoing.outcome(mail, [RecipientOutcome("lead@example", state, "…", now)])

    (mail,) = ledger.outgoing.due_mails(clock.now())
    assert mail.possible_repeat
    assert mail.attempts == 2


def test_a_start_makes_attempts_under_way_unknown_and_due(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """What was being sent when the service ended is due at once as a possible repeat; other plans stay."""
    ledger.report(make_mail("fail"))
    ledger.report(make_mail("incomplete", after=3600))
    ledger.outgoing.sending(ledger.outgoing.due_mails(clock.now())[0])

    assert ledger.outgoing.recover() == 1

    assert _due(ledger, clock) == [("FAIL RIV-17 Zn", ("lead@example",), True)]


def test_a_clock_set_back_stops_no_retry(ledger: Ledger, clock: Any, make_mail: Any) -> None:
    """A retry that seems a day away is due at once; a mail that was meant to wait is not."""
    ledger.report(make_mail("fail"))
    ledger.report(make_mail("incomplete", after=3600))
    (mail,) = ledger.outgoing.due_mails(clock.now())
    ledger.outgoing.sending(mail)
    later = (clock.now() + timedelta(seconds=60)).strftime("%Y-%m-%dT%H:%M:%S.%fZ")
    ledger.outgoing.outcome(mail, [RecipientOutcome("lead@example", "waiting", "451", later)])

    clock.wall -= timedelta(days=1)

    assert [subject for subject, _, _ in _due(ledger, clock)] == ["FAIL RIV-17 Zn"]


def test_newer_content_withdraws_what_nobody_has(ledger: Ledger, clock: Any, done: Any, make_mail: Any) -> None:
    """A held-back mail is withdrawn with its key; one that had an outcome is not, and failures never are."""
    first = done(mails=(make_mail("incomplete", "i", after=3600), make_mail("fail", "f")))
    ledger.finish(_accepted(ledger, 1), first)

    ledger.finish(_accepted(ledger, 2), done(mails=(make_mail("incomplete", "i", after=7200),)))

    clock.advance(3600)
    assert [subject for subject, _, _ in _due(ledger, clock)] == ["FAIL RIV-17 Zn"]
    clock.advance(3600)
    assert [subject for subject, _, _ in _due(ledger, clock)] == ["FAIL RIV-17 Zn", "INCOMPLETE RIV-17 Zn"]


def test_a_mail_that_is_being_sent_is_not_withdrawn(ledger: Ledger, clock: Any, done: Any, make_mail: Any) -> None:
    """Once an attempt began, a mail about an incomplete sample stays, and newer content does not repeat it."""
    ledger.finish(_accepted(ledger, 1), done(mails=(make_mail("incomplete", "i"),)))
    (mail,) = ledger.outgoing.due_mails(clock.now())
    ledger.outgoing.sending(mail)

    ledger.finish(_accepted(ledger, 2), done(mails=(make_mail("incomplete", "i"),)))
    ledger.outgoing.outcome(mail, [RecipientOutcome("lead@example", "delivered")])

    assert _due(ledger, clock) == []
    assert ledger.outgoing.undelivered_mails() == []


def test_a_withdrawn_mail_is_not_sent_by_who_read_it_before(
    ledger: Ledger, clock: Any, done: Any, make_mail: Any
) -> None:
    """A mail read as due and withdrawn in the meantime is not begun."""
    ledger.finish(_accepted(ledger, 1), done(mails=(make_mail("incomplete", "i"),)))
    (mail,) = ledger.outgoing.due_mails(clock.now())
    ledger.finish(_accepted(ledger, 2), done())

    assert not ledger.outgoing.sending(mail)


def test_files_wait_until_they_are_delivered(ledger: Ledger, clock: Any, done: Any, tmp_path: Path) -> None:
    """A file that failed comes back when it is due, one that was delivered never."""
    staged = tuple(StagedFile(f"2026-12/{name}", tmp_path / name, "0" * 64) for name in ("a.csv", "a.json"))
    ledger.finish(_accepted(ledger), done(files=staged))
    first, second = ledger.outgoing.due_files(clock.now())
    ledger.outgoing.file_delivered(first)
    ledger.outgoing.file_failed(second, "held open", clock.now() + timedelta(seconds=5))
    assert ledger.outgoing.due_files(clock.now()) == []
    assert ledger.outgoing.next_due("files") == clock.now() + timedelta(seconds=5)

    clock.advance(5)

    assert [each.target for each in ledger.outgoing.due_files(clock.now())] == ["2026-12/a.json"]
    assert [(each.target, each.last_error) for each in ledger.outgoing.undelivered_files()] == [
        ("2026-12/a.json", "held open")
    ]
    assert ledger.outgoing.staged_files() == {tmp_path / "a.json"}
    assert ledger.outgoing.any_file_delivered()
