"""Pages in a real browser: what people see, click and print, on a desk and on a phone; nothing acts by itself."""

from __future__ import annotations

import json
import os
import re
import shutil
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from tests.watcher.test_results_files import BATCH, evaluated
from watcher import results
from watcher.clock import moment
from watcher.failures import Failure
from watcher.index import index
from watcher.ledger_rows import Listed
from watcher.page import page as page_of

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from playwright.sync_api import Browser, Page

playwright = pytest.importorskip("playwright.sync_api", reason="Playwright is not installed")

DESK, PHONE = {"width": 1280, "height": 900}, {"width": 390, "height": 844}
HOSTILE = "<img src=x onerror=alert(1)>\"'><script>alert(2)</script>"
TOP, CHECK = "STD 6;Zn;0.601;0.602;", "CHK 2;Zn;0.2;0.201;"
AT = "2026-12-01T07:29:00.000000Z"
#: Where systems put a browser that Playwright can drive.
BROWSERS = ("chromium", "chromium-browser", "google-chrome")


def _rows(sample: str, off: float = 1.0) -> list[str]:
    """Rows of a sample with three additions, of which the second reads `off` times what it should."""
    signals = [0.2004, 0.2994, 0.4003 * off, 0.5002]
    label = [sample, *[f"{sample} spiked"] * 3]
    return [f"{label[n]};Zn;{y - 0.001:.4f};{y + 0.001:.4f};{n or ''}" for n, y in enumerate(signals)]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Pages of a failing, a passing and a hostile export, and the list of them."""
    made = tmp_path_factory.mktemp("results")
    exports = {
        "failing": [
            *BATCH,
            TOP,
            *_rows("RIV-17", off=1.2),
            *_rows("SED-12"),
            *_rows("SED-13"),
            "ROOF-7;Zn;0.2;0.2;",
            CHECK,
        ],
        "passing": [*BATCH, TOP, *_rows("SED-14"), CHECK],
        "hostile": [*BATCH, TOP, *_rows(HOSTILE, off=1.2), CHECK],
    }
    for name, rows in exports.items():
        _, done = evaluated(rows)
        record = json.loads(b"".join(results.json_pieces(done.outcomes, done.export, done.problems)))
        (made / f"{name}.html").write_text(page_of(record, f"{name}.r2.html" if name == "passing" else None), "utf-8")
        (made / f"{name}.json").write_text(json.dumps(record), "utf-8")
    listed = [
        Listed("FL-1.csv", 1, "done", AT, None, {"fail": 1, "pass": 2}, ("failing.html", "failing.json")),
        Listed(HOSTILE, None, "refused", AT, f"{HOSTILE}: line 3: expected 8 fields", {}, ()),
    ]
    failures = [(Failure(1, 1, "FL-1.csv", "RIV-17", "Zn", "", 1, "fail", AT), "failing.html")]
    text = index(
        "Skerry Point", moment(AT), running=True, troubles=["3 mails wait."], failures=failures, exports=listed
    )
    (made / "index.html").write_text(text, "utf-8")
    return made


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    """A headless browser: Playwright's own, else the system's; without either these tests are skipped."""
    system = next(filter(None, map(shutil.which, BROWSERS)), None)
    arguments = ["--no-sandbox"] if hasattr(os, "geteuid") and os.geteuid() == 0 else []
    with playwright.sync_playwright() as driver:
        own = Path(driver.chromium.executable_path).exists()
        if not own and system is None:
            pytest.skip("no browser: neither Playwright's chromium nor one of the system's is installed")
        launched = driver.chromium.launch(executable_path=None if own else system, args=arguments)
        yield launched
        launched.close()


@pytest.fixture
def show(browser: Browser, folder: Path) -> Iterator[Callable[..., Page]]:
    """Open a page; requests that would leave it fail the test, and so do scripts that speak."""
    contexts = []
    asked: list[str] = []

    def opened(name: str, size: dict[str, int] = DESK, **options: Any) -> Page:
        context = browser.new_context(viewport=size, **options)
        contexts.append(context)
        shown: Page = context.new_page()
        address = (folder / name).as_uri()
        shown.on(
            "request", lambda request: asked.append(request.url) if request.url.partition("#")[0] != address else 0
        )
        shown.on("dialog", lambda dialog: (asked.append(f"dialog {dialog.message}"), dialog.dismiss()))
        shown.goto(address)
        return shown

    yield opened
    for context in contexts:
        context.close()
    assert [url for url in asked if not url.startswith("data:")] == []


PAGES = ("failing.html", "passing.html", "hostile.html", "index.html")


@pytest.mark.parametrize("name", PAGES)
@pytest.mark.parametrize("size", [PHONE, DESK], ids=["phone", "desk"])
def test_nothing_is_wider_than_the_screen(show: Any, name: str, size: dict[str, int]) -> None:
    """On a phone and on a desk a page scrolls up and down only, and every picture is there."""
    shown = show(name, size)

    width = shown.evaluate("document.documentElement.scrollWidth")
    assert width <= size["width"]
    loaded = shown.evaluate("[...document.images].map(i => i.complete && i.naturalWidth > 0)")
    assert all(loaded)


def test_the_numbers_are_those_of_the_record(show: Any, folder: Path) -> None:
    """What a person reads is the record's: results, checks, and the plot's alternative text."""
    record = json.loads((folder / "failing.json").read_text("utf-8"))
    shown = show("failing.html")

    text = " ".join(shown.inner_text("body").split())
    (failing,) = [s for s in record["series"] if s["verdict"] == "fail"]
    assert failing["result"]["text"] in text
    for check in failing["checks"]:
        if check["outcome"] == "fail":
            assert check["sentence"] in text
    words = " ".join(filter(None, shown.eval_on_selector_all("article img", "found => found.map(i => i.alt)")))
    assert f"slope {failing['fit']['slope']:.3g}" in words


def test_the_plot_has_line_band_interval_and_calibration_slope(show: Any) -> None:
    """The drawing of a failing series is there with its parts, as the browser has it."""
    shown = show("failing.html")

    source = shown.get_attribute("article img", "src")
    drawing = shown.evaluate("s => atob(s.split(',')[1])", source)
    for part in ("band of the line", "additions", "slope of the calibration", "solutions", "interval of the result"):
        assert f"<!-- {part}" in drawing or part in drawing


def test_a_cell_leads_to_its_series(show: Any) -> None:
    """A click in the grid shows the series, and a closed one opens by a click of its own."""
    shown = show("failing.html")

    shown.click("td.fail a")
    assert shown.evaluate("document.querySelector(':target h3').textContent").startswith("✗ RIV-17")
    shown.click("summary:has-text('SED-12')")
    assert shown.is_visible("details[open] caption:has-text('Checks')")


def test_the_filter_leaves_what_does_not_pass(show: Any) -> None:
    """The box hides samples that pass from the grid, without script, by mouse and by keyboard."""
    shown = show("failing.html", java_script_enabled=False)
    row = shown.locator("tr:has(th:text-is('SED-12'))").first
    assert row.is_visible()

    shown.check("#only")
    assert not row.is_visible()
    assert shown.locator("tr:has(th:text-is('RIV-17'))").first.is_visible()
    shown.focus("#only")
    shown.keyboard.press("Space")
    assert row.is_visible()


def test_a_hostile_sample_does_nothing(show: Any) -> None:
    """A sample ID that is markup is read as it stands; no element of it exists."""
    shown = show("hostile.html")

    assert HOSTILE in shown.inner_text("h3 >> nth=0") or HOSTILE in shown.inner_text("body")
    assert shown.locator("script").count() == 0
    assert shown.locator("img[src='x']").count() == 0


def test_a_page_prints_on_a4(show: Any) -> None:
    """Printed, the page has no box to tick, and its text fits the paper."""
    shown = show("failing.html", {"width": 680, "height": 900})
    shown.emulate_media(media="print")

    assert not shown.is_visible("#only")
    printed = shown.pdf(format="A4")
    assert printed.startswith(b"%PDF")
    assert len(re.findall(rb"/Type\s*/Page\b", printed)) >= 1
    assert shown.evaluate("document.documentElement.scrollWidth") <= 680


def test_the_list_leads_to_pages(show: Any, folder: Path) -> None:
    """index.html says what is wrong and open, and its links lead to pages that are there."""
    shown = show("index.html")

    assert "3 mails wait." in shown.inner_text("header")
    links = shown.eval_on_selector_all("a", "found => found.map(a => a.getAttribute('href'))")
    assert links
    assert all((folder / link).is_file() for link in links)


def test_an_older_page_names_the_newer_one(show: Any) -> None:
    """The banner of an older revision links to the newer one."""
    assert show("passing.html").get_attribute("header a", "href") == "passing.r2.html"


@pytest.mark.parametrize("name", PAGES)
@pytest.mark.parametrize("size", [PHONE, DESK], ids=["phone", "desk"])
def test_nothing_keeps_people_out(show: Any, name: str, size: dict[str, int]) -> None:
    """An engine for accessibility finds nothing serious or critical (WCAG 2.2 AA rules included)."""
    axe = pytest.importorskip("axe_playwright_python.sync_playwright").Axe()
    shown = show(name, size, bypass_csp=True)
    shown.eval_on_selector_all("details", "found => found.forEach(d => d.open = true)")

    found = axe.run(shown, options={"runOnly": ["wcag2a", "wcag2aa", "wcag21aa", "wcag22aa", "best-practice"]})

    grave = [
        (v["id"], v["help"], [n["html"][:120] for n in v["nodes"][:3]])
        for v in found.response["violations"]
        if v["impact"] in ("serious", "critical")
    ]
    assert grave == []
