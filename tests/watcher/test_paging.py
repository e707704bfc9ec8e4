"""Pages are drawn after results, survive a kill, and cost nothing where they cannot be drawn."""

from __future__ import annotations

import json
from typing import Any

import pytest

from watcher.ledger import Ledger


def _shown(bench: Any) -> dict[str, dict[str, Any]]:
    return {name: json.loads(content) for name, content in bench.pages().items()}


def test_every_finished_export_gets_its_page(bench: Any) -> None:
    """Each record has a page beside it; an export without results has none."""
    bench.export("FL-1.csv", "SED-12,pass")
    bench.export("FL-2.csv", "refuse")

    bench.once()

    assert sorted(_shown(bench)) == ["FL-1.csv.r1.html"]


def test_an_older_page_names_the_newer_revision(bench: Any) -> None:
    """When an export has grown, the page of what it was before is drawn anew and says where to look."""
    bench.export("FL-1.csv", "SED-12,pass")
    bench.once()
    before = _shown(bench)["FL-1.csv.r1.html"]
    with (bench.exports / "FL-1.csv").open("a") as file:
        file.write("RIV-17,pass\n")

    bench.once()

    after = _shown(bench)
    assert before["newer"] is None
    assert after["FL-1.csv.r1.html"]["newer"].endswith("/FL-1.csv.r2.html")
    assert after["FL-1.csv.r1.html"]["of"] == before["of"]
    assert after["FL-1.csv.r2.html"]["newer"] is None


@pytest.mark.parametrize("moment", ["stage-page-begins", "stage-page-durable", "page-begins", "page-committed"])
def test_a_page_is_drawn_after_a_kill(bench: Any, moment: str) -> None:
    """Whenever the program dies over a page, the next run has it drawn and delivered, and nothing else again."""
    bench.export("FL-1.csv", "SED-12,pass")
    died = bench.start("once", SPIKEWARDEN_KILL_AT=moment)
    died.communicate(timeout=20)
    results = bench.result_files()

    report = bench.once()

    assert len(results) == 2
    assert bench.result_files() == results
    assert sorted(bench.pages()) == ["FL-1.csv.r1.html"]
    assert report["undelivered_files"] == []
    with Ledger(bench.records) as ledger:
        assert ledger.wanted_pages() == []


@pytest.mark.parametrize("fault", ["ends the page", "spoils the page"])
def test_a_page_that_cannot_be_drawn_costs_no_result(bench: Any, mail_server: Any, fault: str) -> None:
    """After three attempts a page is given up; results, mails and other pages are there all the same."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", f"{fault},fail")
    bench.export("FL-2.csv", "SED-12,pass")

    report = bench.once()

    assert sorted(name for name in bench.delivered()) == [
        f"FL-{number}.csv.r1.{ending}" for number in (1, 2) for ending in ("csv", "json")
    ]
    assert sorted(bench.pages()) == ["FL-2.csv.r1.html"]
    assert report["undelivered_mails"] == []
    assert sum("FAIL" in text for _, text in mail_server.mailbox.received) == 1


def test_a_page_waits_until_its_record_can_be_read(bench: Any) -> None:
    """Where the share with the delivered record is gone, the page stays wanted, and is drawn once the share is back."""
    bench.export("FL-1.csv", "SED-12,pass")
    died = bench.start("once", SPIKEWARDEN_KILL_AT="stage-page-begins")
    died.communicate(timeout=20)
    bench.results.rename(bench.results.with_name("away"))
    bench.once()
    with Ledger(bench.records) as ledger:
        assert len(ledger.wanted_pages()) == 1
    bench.results.with_name("away").rename(bench.results)

    bench.once()

    assert sorted(bench.pages()) == ["FL-1.csv.r1.html"]
