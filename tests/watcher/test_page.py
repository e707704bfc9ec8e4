"""The page of an export: shows the record's own words and digits, and nothing in it acts or asks the network."""

from __future__ import annotations

import base64
import json
import re
from html.parser import HTMLParser
from typing import Any

import numpy as np
import pytest

from tests.watcher.test_results_files import additions, evaluated
from watcher import plots, results
from watcher.page import page

HOSTILE = "<script>alert(1)</script>"


class Elements(HTMLParser):
    """The elements of a page with their attributes, and its text."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.found: list[tuple[str, dict[str, str | None]]] = []
        self.words = ""
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Keep an element."""
        self.found.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        """Keep a text."""
        self.words += data

    def all(self, tag: str) -> list[dict[str, str | None]]:
        """Return the attributes of every element of this kind."""
        return [attributes for found, attributes in self.found if found == tag]


def record(sample: str = "RIV-17") -> dict[str, Any]:
    """Return the record of an export with a sample that passes and one without additions."""
    _, done = evaluated([*additions(sample), "BRINE-3;Zn;0.2;0.2;"])
    text = b"".join(results.json_pieces(done.outcomes, done.export, done.problems))
    loaded: dict[str, Any] = json.loads(text)
    return loaded


def test_the_page_has_the_words_and_digits_of_the_record() -> None:
    """Every result, check, next step and hash of the record stands on the page as it stands in the record."""
    shown = record()
    words = Elements(page(shown)).words
    for series in shown["series"]:
        assert series["result"]["text"] in words
        assert series["next_step"]["sentence"] is None or series["next_step"]["sentence"] in words
        for check in series["checks"]:
            assert check["sentence"] in words
    assert shown["export"]["sha256"] in words
    assert shown["export"]["accepted_at"] in words


def test_the_page_asks_for_nothing_outside_itself() -> None:
    """There is no script, and every address is an anchor of the page or data in it."""
    elements = Elements(page(record()))
    assert not elements.all("script")
    assert not elements.all("link")
    addresses = [a["src"] for a in elements.all("img")] + [a["href"] for a in elements.all("a")]
    assert addresses
    assert all(address and address.startswith(("#", "data:image/svg+xml;base64,")) for address in addresses)


def test_every_link_leads_somewhere() -> None:
    """Each cell of the grid links to a series that is there."""
    elements = Elements(page(record()))
    anchors = {a["id"] for _, a in elements.found if "id" in a}
    assert {str(a["href"])[1:] for a in elements.all("a")} <= anchors


def test_a_hostile_sample_id_is_text() -> None:
    """A sample ID that looks like an element is shown and makes none, in plots too."""
    elements = Elements(page(record(HOSTILE)))
    assert not elements.all("script")
    assert HOSTILE in elements.words


def test_a_label_with_dollar_signs_is_drawn() -> None:
    """Dollar signs in a label start no formula in the plot."""
    assert "<img" in page(record(r"$\frac$"))


def test_every_plot_says_its_numbers() -> None:
    """The alternative text of each plot names numbers, for who cannot see it."""
    images = Elements(page(record())).all("img")
    assert images
    assert all(re.search(r"\d", image["alt"] or "") for image in images)


def test_the_page_depends_on_the_record_alone() -> None:
    """The same record gives the same bytes, plots included."""
    assert page(record()) == page(record())


@pytest.mark.parametrize("slope", [None, 0.05])
def test_the_dashed_line_is_the_calibration(slope: float | None) -> None:
    """A slope of a calibration is drawn dashed, and none where there is none."""
    address = plots.additions_plot(record()["series"][0], slope)
    assert address is not None
    drawing = base64.b64decode(address.partition(",")[2]).decode()
    assert ("slope of the calibration" in drawing) == (slope is not None)


def test_the_band_is_that_of_the_fitted_line() -> None:
    """Where the line crosses zero the band over the slope is the line's uncertainty that the evaluation found."""
    series = record()["series"][0]
    fit = series["fit"]
    crossing = np.array([-fit["intercept"] / fit["slope"]])
    half = plots.confidence_band(fit, crossing, series["confidence"])
    assert half is not None
    t_of_two_degrees = 4.302652729911275  # published tables, 97.5 %
    assert half[0] / fit["slope"] / t_of_two_degrees == pytest.approx(fit["u_line"], rel=1e-9)


def test_a_large_failing_export_stays_small_and_names_every_series() -> None:
    """Thousands of series that fail stay under 5 MB, and each is still named and linked."""
    shown = record()
    series = shown["series"][0] | {"verdict": "fail"}
    shown["series"] = [series | {"sample": f"SED-{i // 70}", "analyte": f"E{i % 70}"} for i in range(4200)]
    text = page(shown)
    assert len(text.encode()) < 5_000_000
    anchors = re.findall(r'<article id="(s\d+)"', text)
    assert len(anchors) == len(set(anchors)) == 4200


def test_the_banner_is_not_at_ease_while_the_export_has_problems() -> None:
    """An export with a problem never says that all checks held, though every series passes."""
    shown = record()
    shown["series"] = [shown["series"][0] | {"verdict": "pass"}]
    assert "The stated checks held" in page(shown)
    shown["problems"] = ["line 9: expected a sample ID, got nothing"]
    assert "The stated checks held" not in page(shown)
