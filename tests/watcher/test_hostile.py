"""Hostile names: whatever stands in an export or its file name, no file lands outside, no header or formula lives.

The corpus is made of what has broken other programs: paths, devices of Windows, formulas, line ends, directions of
writing, half characters, markup, very long and empty texts, each alone and inside an ordinary name.
"""

from __future__ import annotations

import email
import email.policy
import itertools
import os
import re
from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

import pytest

from watcher.delivery import inside
from watcher.ledger_rows import DueMail
from watcher.letter import compose
from watcher.names import target
from watcher.results import inert

if TYPE_CHECKING:
    from pathlib import Path

PIECES = (
    *("../../x", "/etc/x", "C:\\x", "a/b", "a:b", "..", ".", "", "\\\\bench\\x", "~/x", "%2e%2e/x", "....//x", "./.x"),
    *("CON", "nul.txt", "COM1", "LPT9.csv", "aux", "prn.", "COM\u00b9", "clock$", "x.", "x ", " x", "con .csv"),
    *("=1+1", "+1", "-1", "@x", "\t=1", "\r=1", "\n=1", "\u00a0=1", "\uff1d1", "|x", "'=1", "=cmd|' /C x'!A0", "%0A=1"),
    *("S1\r\nBcc: x@example", "S1\nSubject: y", "S1\x0bX: y", "S1\x0cX: y", "S1\x85X: y", "S1\u2028X: y", "S1\u2029y"),
    *("\x00", "a\x00b", "\x1b[31m", "\x07", "\x7f", "\u202egnp.exe", "\u200b", "\ufeff", "\ud800", "\udcff", "\ue000"),
    *(
        "<script>x</script>",
        "&amp;",
        '"><img src=x>',
        "{{7*7}}",
        "${x}",
        "$(x)",
        "`x`",
        ";x",
        "'; DROP TABLE entries;--",
    ),
    *(
        "e\u0301",
        "\u00e9",
        "\u212b",
        "\U0001f9ea",
        "x" * 300,
        "\u00e4" * 200,
        "007",
        "1E5",
        "NA",
        "null",
        "True",
        "1.10",
    ),
)
AROUND = ("{}", "RIV-{}", "{}-17", "RIV {} Zn", "{}{}")
CORPUS = sorted({form.replace("{}", piece) for form, piece in itertools.product(AROUND, PIECES)})
ALIVE = re.compile(r"\s*[=+\-@\uff1d\uff0b\uff0d\uff20]|[\t\r]")


def test_the_corpus_is_large_enough() -> None:
    """More than three hundred different texts."""
    assert len(CORPUS) >= 300


@pytest.mark.parametrize("text", CORPUS, ids=lambda text: ascii(text)[:40])
def test_no_text_leaves_the_results_folder(text: str, tmp_path: Path) -> None:
    """A result file's name is plain, no device, and lies one folder below the results folder."""
    path = inside(tmp_path, target(text, 1, "2026-12-01T07:30:00.000000Z", "csv"))
    assert path.parent == tmp_path / "2026-12"
    assert re.fullmatch(r"[A-Za-z0-9_-][A-Za-z0-9._-]*\.r1\.csv", path.name)
    assert not re.match(r"(?i)(con|prn|aux|nul|com\d|lpt\d)\.", path.name)
    assert len(os.fsencode(path.name)) < 200


def test_no_two_texts_share_a_file_whatever_the_case_rules() -> None:
    """Different texts get different files, also where upper and lower case are one; only the exact same text shares."""
    names: dict[str, str] = {}
    for text in CORPUS:
        name = target(text, 1, "2026-12", "csv").casefold()
        other = names.setdefault(name, text)
        # Names that are plain already are kept; that two of those differ by case alone is found by the ledger.
        assert other == text or (other.casefold() == text.casefold())


@pytest.mark.parametrize("text", CORPUS, ids=lambda text: ascii(text)[:40])
def test_no_text_lives_in_a_header_or_a_cell(text: str) -> None:
    """The mail about it can be written, has just our headers, says the text in its body; the cell is no formula."""
    due = DueMail(1, "<1@example>", f"FAIL {text}", f"DO {text}\n", "", "2026-12-01T07:30:00.000000Z", (), False, 0)
    raw = compose(due, "bench@example", ["lead@example"], datetime(2026, 12, 1, 7, 30, tzinfo=UTC))

    message: Any = email.message_from_bytes(raw, policy=email.policy.default)
    assert sorted(key.lower() for key in message) == sorted(
        [
            "subject",
            "from",
            "to",
            "date",
            "message-id",
            "auto-submitted",
            "content-type",
            "mime-version",
        ]
    )
    assert message["To"] == "lead@example"
    assert message["Subject"].startswith("FAIL")
    assert not any(ord(char) < 32 for char in message["Subject"])
    assert all(part == inert(part) or not ALIVE.match(part) for part in [inert(text)])
    assert not any(ALIVE.match(part) for part in inert(text).split("\n")[:1])


def test_every_alert_about_a_hostile_file_name_arrives(bench: Any, mail_server: Any) -> None:
    """Exports with hostile names give their results inside the folder and one mail each, and nothing else happens."""
    bench.mail_to(mail_server)
    names = []
    for number, piece in enumerate(PIECES):
        name = f"{number:03d}{piece}.csv".replace("/", "\u2215")
        try:
            raw = os.fsencode(name)
        except UnicodeEncodeError:
            continue
        if b"\0" not in raw and len(raw) < 250 and "\udcff" not in name:
            (bench.exports / name).write_text(f"SED-{number},fail\n")
            names.append(name)
    outside = set(bench.exports.parent.iterdir())

    report = bench.once()

    assert len(names) > 60
    assert sorted(each["export"]["name"] for each in report["assessed"]) == sorted(names)
    assert {each["export"]["state"] for each in report["assessed"]} == {"done"}
    assert len(mail_server.mailbox.received) == len(names)
    assert set(bench.exports.parent.iterdir()) - outside == {bench.results, bench.records}
    assert len(bench.result_files()) == 2 * len(names)
