"""The worker's answer is checked before anything of it is recorded."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from watcher.ledger_rows import SeriesRow, StagedFile
from watcher.replies import ReplyBroken, WantedMail, read_reply

STAGING = Path("/bench/records/outgoing")
SERIES = {
    "sample": "RIV-17",
    "analyte": "Zn",
    "channel": "213.9",
    "attempt": 1,
    "verdict": "fail",
    "value": 1.5,
    "unit": "mg/L",
}
MAIL = {"kind": "fail", "subject": "FAIL RIV-17", "body": "DO", "keys": ["k"], "after_seconds": 0}
FILE = {"target": "2026-12/x.r1.csv", "staged": "/bench/records/outgoing/x.r1.csv", "sha256": "0" * 64}
DONE = {
    "fate": "done",
    "layout": "flame bench",
    "files": [FILE],
    "mails": [MAIL],
    "series": [SERIES],
    "verdicts": {"fail": 1},
    "problem": None,
    "problems": [],
}


def test_a_whole_answer_is_read() -> None:
    """Every part of a full answer comes through."""
    reply = read_reply(DONE, STAGING)

    assert reply.fate == "done"
    assert reply.files == (StagedFile("2026-12/x.r1.csv", STAGING / "x.r1.csv", "0" * 64),)
    assert reply.mails == (WantedMail("fail", "FAIL RIV-17", "DO", ("k",), 0.0),)
    assert reply.series == (SeriesRow("RIV-17", "Zn", "213.9", 1, "fail", 1.5, "mg/L"),)
    assert reply.counts == {"fail": 1}
    assert reply.problem is None


def test_problems_of_a_done_export_become_its_problem() -> None:
    """What is to be known about a done export is kept with it."""
    assert read_reply(DONE | {"problems": ["line 3", "line 9"]}, STAGING).problem == "line 3\nline 9"
    assert read_reply({"fate": "refused", "problem": "line 3"}, STAGING).problem == "line 3"


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"fate": "good"}, "fate: expected one of done, unchanged, refused, unclaimed, waiting, bug, got 'good'"),
        ({"fate": None}, "fate: expected a str, got None"),
        ({"files": [FILE | {"staged": "/etc/passwd"}]}, "files.staged: expected a file in /bench/records/outgoing"),
        ({"files": {}}, "files: expected a list"),
        ({"series": [SERIES | {"value": float("nan")}]}, "value: expected a finite number or null, got nan"),
        ({"series": [SERIES | {"attempt": True}]}, "attempt: expected a int, got True"),
        ({"series": [SERIES | {"sample": None}]}, "sample: expected a str, got None"),
        ({"mails": [MAIL | {"keys": [1]}]}, "keys: expected a str, got 1"),
        ({"verdicts": {"pass": "1"}}, "pass: expected a int, got '1'"),
        ({"fate": "bug"}, "error: expected a str, got None"),
    ],
)
def test_an_answer_of_another_form_is_broken(change: dict[str, Any], said: str) -> None:
    """Whatever is not as agreed is named with its place."""
    with pytest.raises(ReplyBroken, match=f"the worker's answer is malformed: {said}"):
        read_reply(DONE | change, STAGING)
