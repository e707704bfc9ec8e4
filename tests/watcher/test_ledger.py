"""What the ledger records about settings and exports, and in which order it gives them out."""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING, Any

import pytest

from watcher.ledger_rows import SeriesRow, StagedFile
from watcher.letter import compose
from watcher.queueing import TargetTaken

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger
    from watcher.ledger_rows import ExportRow


def _accept(ledger: Ledger, name: str = "FL-1.csv", content: int = 1) -> ExportRow:
    accepted = ledger.accept(name, f"{content:064x}", 60)
    assert accepted is not None
    return accepted


def _pending(ledger: Ledger, settings: int = 1, after: float = 7200.0) -> list[tuple[str, int]]:
    return [(each.name, each.revision) for each in ledger.pending(settings, complete_after_seconds=after)]


def _entries(ledger: Ledger) -> list[tuple[str, dict[str, Any]]]:
    rows = ledger._database.rows("SELECT kind, body FROM entries ORDER BY number")
    return [(row["kind"], json.loads(row["body"])) for row in rows]


def test_the_same_settings_keep_their_number(ledger: Ledger) -> None:
    """Adopting what is in force changes nothing; anything else gets the next number."""
    same = ledger.adopt_settings('{"laboratory": "Skerry Point Water Laboratory"}', "lead", "again")
    other = ledger.adopt_settings("{}", "lead", "less", "laboratory: removed")

    assert (same, other) == (1, 2)
    current = ledger.current_settings()
    assert current is not None
    assert (current.number, current.body) == (2, "{}")
    assert [kind for kind, _ in _entries(ledger)] == ["adopt", "adopt"]


def test_a_known_content_is_not_accepted_again(ledger: Ledger) -> None:
    """Name and content together identify an export: another name or another content is another export."""
    _accept(ledger, "FL-1.csv", 1)

    assert ledger.accept("FL-1.csv", f"{1:064x}", 60) is None
    assert ledger.knows("FL-1.csv", f"{1:064x}")
    assert not ledger.knows("FL-2.csv", f"{1:064x}")
    assert _accept(ledger, "FL-2.csv", 1).revision == 1


def test_revisions_count_done_contents_of_a_name(ledger: Ledger, done: Any) -> None:
    """A content that was done makes the next one a revision; one that was refused does not."""
    ledger.finish(_accept(ledger, content=1), done())
    ledger.finish(_accept(ledger, content=2), done(state="refused", problem="line 3"))

    assert _accept(ledger, content=3).revision == 2
    assert _accept(ledger, "other.csv", content=3).revision == 1


def test_contents_of_a_name_are_evaluated_in_their_order(ledger: Ledger) -> None:
    """A newer content is not pending while an older one of its name is, even after failed attempts."""
    first = _accept(ledger, content=1)
    _accept(ledger, content=2)
    _accept(ledger, "B.csv", content=3)
    ledger.failed_attempt(first, 1, "died", None)

    assert _pending(ledger) == [("B.csv", 1), ("FL-1.csv", 1)]


def test_a_waiting_content_is_superseded_by_the_next(ledger: Ledger, done: Any) -> None:
    """A content without its last line gives way to the next one in the same transaction that accepts it."""
    first = _accept(ledger, content=1)
    ledger.finish(first, done(state="waiting"))
    assert _pending(ledger) == []

    _accept(ledger, content=2)

    assert ledger.export(first.id).state == "superseded"
    assert _pending(ledger) == [("FL-1.csv", 1)]


def test_a_waiting_content_is_pending_when_its_time_has_passed(ledger: Ledger, clock: Any, done: Any) -> None:
    """After the time for completing, or under other settings, a waiting content is evaluated."""
    ledger.finish(_accept(ledger), done(state="waiting"))
    clock.advance(7199)
    assert _pending(ledger) == []
    assert _pending(ledger, settings=2) == [("FL-1.csv", 1)]

    clock.advance(1)

    assert _pending(ledger) == [("FL-1.csv", 1)]


@pytest.mark.parametrize("state", ["refused", "unclaimed"])
def test_new_settings_take_in_again_only_the_newest_content(ledger: Ledger, done: Any, state: str) -> None:
    """A refused or unclaimed content comes back under other settings unless its name has a newer content."""
    ledger.finish(_accept(ledger, "A.csv", 1), done(state=state))
    ledger.finish(_accept(ledger, "B.csv", 2), done(state=state))
    ledger.finish(_accept(ledger, "B.csv", 3), done())

    assert _pending(ledger, settings=1) == []
    assert _pending(ledger, settings=2) == [("A.csv", 1)]


def test_the_third_failed_attempt_refuses_and_new_settings_count_anew(ledger: Ledger, make_mail: Any) -> None:
    """Three deaths refuse an export with one mail; taken in again it has three attempts once more."""
    export = _accept(ledger)
    for attempt in (1, 2, 3):
        export = ledger.failed_attempt(export, 1, f"death {attempt}", make_mail("problem", "poison"))
        assert (export.state, export.attempts) == ("accepted" if attempt < 3 else "refused", attempt)
    assert _kinds_of_mails(ledger) == ["problem"]

    ledger.adopt_settings("{}", "lead", "other patterns")
    again = ledger.failed_attempt(ledger.pending(2, complete_after_seconds=0)[0], 2, "death 1", None)

    assert (again.state, again.attempts, again.settings_number) == ("accepted", 1, 2)


def _kinds_of_mails(ledger: Ledger) -> list[str]:
    return [row["kind"] for row in ledger._database.rows("SELECT kind FROM mails")]


def test_finishing_is_all_or_nothing(ledger: Ledger, done: Any, make_mail: Any, tmp_path: Path) -> None:
    """An export whose result file is another one's leaves no state, series, file, mail or entry behind."""
    staged = StagedFile("2026-12/FL.r1.csv", tmp_path / "FL.r1.csv", "0" * 64)
    ledger.finish(_accept(ledger, "FL.csv", 1), done(files=(staged,)))
    second = _accept(ledger, "fl.csv", 2)
    before = _entries(ledger)
    row = SeriesRow("RIV-17", "Zn", "213.9", 1, "fail", 1.5, "mg/L")
    fate = done(files=(StagedFile("2026-12/fl.R1.csv", tmp_path / "x", "1" * 64),), mails=(make_mail(),), series=(row,))

    with pytest.raises(TargetTaken, match=r"2026-12/fl.R1.csv belongs to export FL.csv"):
        ledger.finish(second, fate)

    assert ledger.export(second.id).state == "accepted"
    assert ledger.outgoing.due_mails(ledger._clock.now()) == []
    assert ledger._database.rows("SELECT * FROM series") == []
    assert _entries(ledger) == before


def test_series_of_an_export_are_replaced_not_added(ledger: Ledger, done: Any) -> None:
    """Evaluated again, an export has the series of the last evaluation only."""
    export = _accept(ledger)
    for sample in ("RIV-17", "SED-12"):
        ledger.finish(export, done(series=(SeriesRow(sample, "Zn", "", 1, "pass", None, None),)))

    assert [row["sample"] for row in ledger._database.rows("SELECT sample FROM series")] == ["SED-12"]


def test_every_transaction_leaves_an_entry(ledger: Ledger, done: Any, make_mail: Any) -> None:
    """Entries tell what happened in the order in which it happened."""
    export = _accept(ledger)
    ledger.failed_attempt(export, 1, "died", None)
    number = ledger.finish(ledger.export(export.id), done(counts={"fail": 1}, mails=(make_mail("fail", "k"),)))
    ledger.report(make_mail("problem", "folder"))

    told = _entries(ledger)
    assert [kind for kind, _ in told] == ["adopt", "accept", "attempt failed", "done", "report"]
    assert number == 4
    assert told[3][1]["counts"] == {"fail": 1}
    assert told[3][1]["mails"] == ["<1@example>"]


def test_alerted_keys_are_those_of_the_name(ledger: Ledger, done: Any, make_mail: Any) -> None:
    """What was mailed is known by export name, except what newer content will withdraw."""
    first = _accept(ledger, "A.csv", 1)
    ledger.finish(first, done(mails=(make_mail("fail", "f1"), make_mail("incomplete", "i1", after=3600))))
    ledger.finish(_accept(ledger, "B.csv", 2), done(mails=(make_mail("fail", "f2"),)))

    assert ledger.alerted_keys("A.csv") == {"f1"}
    assert ledger.mailed("i1")
    assert not ledger.mailed("i2")


def test_counts_and_refusals_show_how_things_stand(ledger: Ledger, done: Any) -> None:
    """Refusals are listed with their reasons, newest first, without contents that newer ones replaced."""
    ledger.finish(_accept(ledger, "A.csv", 1), done(state="refused", problem="line 3"))
    ledger.finish(_accept(ledger, "B.csv", 2), done(state="refused", problem="old"))
    ledger.finish(_accept(ledger, "B.csv", 3), done())
    ledger.finish(_accept(ledger, "C.csv", 4), done(state="unclaimed"))

    assert ledger.counts() == {"done": 1, "refused": 2, "unclaimed": 1}
    assert [(each.name, each.problem) for each in ledger.refused()] == [("C.csv", None), ("A.csv", "line 3")]
    assert [each.name for each in ledger.unclaimed()] == ["C.csv"]


def test_each_entry_is_chained_to_the_one_before(ledger: Ledger) -> None:
    """The seal is the SHA-256 of the seal before and the entry's own facts, so anyone can compute it again."""
    before = "0" * 64
    _accept(ledger)
    rows = ledger._database.rows("SELECT number, kind, export_id, at, body, seal FROM entries ORDER BY number")
    for row in rows:
        text = json.dumps([before, *tuple(row)[:5]], ensure_ascii=False, separators=(",", ":"))
        assert row["seal"] == hashlib.sha256(text.encode()).hexdigest()
        before = row["seal"]
    assert len(rows) == 2
    assert ledger.broken_at() is None


@pytest.mark.parametrize(
    ("alteration", "found"),
    [
        ("UPDATE entries SET body = replace(body, '60', '61') WHERE number = 3", 3),
        ("UPDATE entries SET at = '2026-11-30T07:30:00.000000Z' WHERE number = 2", 2),
        ("DELETE FROM entries WHERE number = 3", 3),
        ("UPDATE entries SET export_id = 1 WHERE number = 4", 4),
        ("UPDATE entries SET seal = upper(seal) WHERE number = 1", 1),
    ],
)
def test_an_altered_entry_is_found(ledger: Ledger, alteration: str, found: int) -> None:
    """Whatever is changed or removed in the running record, the first place that does not fit is named."""
    for content in (1, 2, 3):
        _accept(ledger, content=content)

    with ledger._database.transaction("accept") as txn:
        txn.execute(alteration)

    assert ledger.broken_at() == found


def test_a_mail_bears_number_and_seal_of_the_entry_that_queued_it(ledger: Ledger, done: Any, make_mail: Any) -> None:
    """The mailbox can bear witness: what queued a mail stands in it, and the entry holds the hash of its text."""
    mail = make_mail("fail", "k")
    number = ledger.finish(_accept(ledger), done(mails=(mail,)))

    (due,) = ledger.outgoing.due_mails(ledger._clock.now())

    (row,) = ledger._database.rows("SELECT body, seal FROM entries WHERE number = ?", (number,))
    assert due.seal is not None
    assert (due.seal.number, due.seal.seal) == (number, row["seal"])
    text = f"{mail.subject}\n{mail.body}"
    assert json.loads(row["body"])["mail_sha256"] == [hashlib.sha256(text.encode()).hexdigest()]
    assert f"Ledger entry {number}, seal {row['seal']}".encode() in b"".join(
        compose(due, "bench@example", ["lead@example"], ledger._clock.now()).split(b"=\r\n")
    )
