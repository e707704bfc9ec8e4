"""Requests of people through files: done once, refused in words, and nothing else taken for one."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import pytest

from watcher.ledger_rows import SeriesRow
from watcher.requests import Request, RequestRefused, new_request, submit, waiting

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger


def test_a_request_is_read_as_it_was_made(tmp_path: Path) -> None:
    """What a command writes is what the service reads, the oldest first."""
    made = [new_request("note", "FL-1.csv", "M. Quay", f"vial {number}") for number in (1, 2)]
    for request in made:
        submit(tmp_path, request)
    assert [request for _, request in waiting(tmp_path)] == made


@pytest.mark.parametrize(
    "content",
    [
        b"",
        b"\xff",
        b"[]",
        b'{"id": "1"}',
        b"x" * 70_000,
        json.dumps(asdict(Request("1", "delete", "FL-1.csv", "x", "y"))).encode(),
        json.dumps(asdict(Request("1", "note", "FL-1.csv", "x", "y")) | {"why": 5}).encode(),
    ],
)
def test_anything_else_is_no_request(tmp_path: Path, content: bytes) -> None:
    """A file of another form, size or kind is told apart and never acted on."""
    (tmp_path / "requests").mkdir()
    (tmp_path / "requests" / "a.json").write_bytes(content)
    assert [request for _, request in waiting(tmp_path)] == [None]


@pytest.mark.parametrize(("by", "why"), [("", "words"), (" ", "words"), ("M. Quay", ""), ("M. Quay", "\n")])
def test_a_request_needs_name_and_words(by: str, why: str) -> None:
    """Nobody's request, and one without reason, are refused."""
    with pytest.raises(RequestRefused, match="Expected a name after --by and words that say why"):
        new_request("note", "FL-1.csv", by, why)


def test_a_request_is_done_once(ledger: Ledger, done: Any) -> None:
    """Found again after a kill between ledger and file, a request is not done a second time."""
    export = ledger.accept("FL-1.csv", "ab", 6)
    assert export is not None
    ledger.finish(export, done(series=(SeriesRow("RIV-17", "Zn", "", 1, "fail", 1.5, "mg/L"),)))
    assert [each.title for each in ledger.open_failures()] == ["RIV-17 Zn"]
    request = new_request("again", "FL-1.csv", "M. Quay", "second look")

    assert ledger.do(request)
    assert not ledger.do(request)

    rows = ledger._database.rows("SELECT kind FROM entries WHERE kind = 'again'")
    assert len(rows) == 1
    assert ledger.export(export.id).state == "accepted"
    assert ledger.export(export.id).revision == 2


def test_a_request_about_nothing_is_refused_and_leaves_nothing(ledger: Ledger) -> None:
    """An export that never came in is named, and a corrected request may bear the same identity."""
    request = new_request("note", "FL-9.csv", "M. Quay", "words")
    with pytest.raises(RequestRefused, match=r"got 'FL-9.csv', which never came in"):
        ledger.do(request)
    assert ledger._database.rows("SELECT * FROM requests") == []
