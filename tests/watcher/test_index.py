"""index.html says whether the service is well, what is open, and which exports there are."""

from __future__ import annotations

import re
from datetime import UTC, datetime
from html.parser import HTMLParser
from typing import Any

from hypothesis import given
from hypothesis import strategies as st

from watcher.failures import Failure
from watcher.index import index
from watcher.ledger_rows import Listed

NOW = datetime(2026, 12, 1, 7, 30, tzinfo=UTC)
AT = "2026-12-01T07:29:00.000000Z"


def _page(*, running: bool = True, troubles: Any = (), failures: Any = (), exports: Any = ()) -> str:
    return index("Skerry Point", NOW, running=running, troubles=troubles, failures=failures, exports=exports)


def _failure(sample: str = "RIV-17") -> Failure:
    return Failure(1, 1, "FL-1.csv", sample, "Zn", "", 1, "fail", AT)


def _listed(name: str = "FL-1.csv", state: str = "done", **facts: Any) -> Listed:
    values: dict[str, Any] = {"revision": 1, "problem": None, "counts": {"fail": 1, "pass": 3}, "files": ()}
    return Listed(name=name, state=state, accepted_at=AT, **values | facts)


def _text(page: str) -> str:
    return " ".join(re.sub(r"<[^>]+>", " ", page.partition("<body>")[2]).split())


def test_a_page_of_a_quiet_day() -> None:
    """It says when the service was at work, what an older time means, and that nothing is open."""
    text = _text(_page())

    assert "No failure is open." in text
    assert NOW.astimezone().strftime("at work at %d %b %Y %H:%M %z") in text
    assert "more than 10 minutes ago, it does not run" in text


def test_troubles_and_a_stop_stand_in_the_banner() -> None:
    """Whatever is wrong is the first thing on the page, in the words of the mails."""
    text = _text(_page(running=False, troubles=["3 mails could not be sent by mail.example."]))

    assert "spikewarden was stopped at" in text
    assert "Something is wrong: 3 mails could not be sent by mail.example." in text


def test_a_failure_leads_to_its_page() -> None:
    """An open failure is named with its export and linked to the page that shows it."""
    page = _page(failures=[(_failure(), "2026-12/FL-1.csv.r1.html")])

    assert "1 open failure." in _text(page)
    assert '<a href="2026-12/FL-1.csv.r1.html">RIV-17 Zn</a>' in page


def test_exports_are_listed_with_what_came_of_them() -> None:
    """Counts for a finished export, the reason for a refused one, and links to what was delivered."""
    files = ("2026-12/FL-1.csv.r2.csv", "2026-12/FL-1.csv.r2.json", "2026-12/FL-1.csv.r2.html")
    page = _page(
        exports=[
            _listed("FL-3.csv", "accepted", counts={}, revision=None),
            _listed("FL-2.csv", "refused", problem="line 15: expected 8 fields", counts={}, revision=None),
            _listed(revision=2, files=files),
        ]
    )

    text = _text(page)
    assert "FL-3.csv" in text
    assert "waits for evaluation" in text
    assert "refused: line 15: expected 8 fields" in text
    assert "FL-1.csv, revision 2" in text
    assert "1 fail, 3 pass" in text
    assert re.findall(r'href="([^"]+)"', page) == [files[2], files[0], files[1]]


@given(st.text(), st.text(), st.text())
def test_nothing_in_a_name_is_markup(name: str, sample: str, sentence: str) -> None:
    """Names, samples and problems that hold markup show as they are and make no tag."""
    tags: list[str] = []

    class Reader(HTMLParser):
        def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
            tags.append(tag)
            assert not {key for key, _ in attrs if key.startswith("on")}

    Reader().feed(
        _page(
            troubles=[sentence],
            failures=[(_failure(sample), f"2026-12/{name}.html")],
            exports=[_listed(name, problem=sentence, state="refused", counts={})],
        )
    )

    known = "html head meta title style body header h1 p strong ul li main h2 div table tr th td a code footer"
    assert set(tags) <= set(known.split())


def test_the_list_is_kept_current(bench: Any, eventually: Any) -> None:
    """While the service runs the page shows what came; when it stops, it says so."""
    process = bench.start()
    path = bench.results / "index.html"
    eventually(path.is_file, "the page is there")
    bench.export("FL-1.csv", "SED-12,pass")
    bench.export("FL-2.csv", "RIV-17,fail")

    eventually(lambda: len(bench.pages()) == 2, "the pages are there")
    eventually(lambda: "FL-2.csv.r1.html" in path.read_text("utf-8"), "the list shows them")
    assert "1 open failure." in _text(path.read_text("utf-8"))
    assert bench.stop(process) == 0
    assert "was stopped at" in path.read_text("utf-8")
