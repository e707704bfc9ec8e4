"""A failing sample is described with the same words and digits wherever people meet it."""

from __future__ import annotations

import email
import email.policy
import html
import re
from typing import Any

import pytest

from watcher.letter_html import unfolded


@pytest.fixture(scope="module")
def told(make_laboratory: Any, shared_mail_server: Any) -> dict[str, str]:
    """What the terminal, the mail, the page, the CSV and the record say of a sample whose recovery failed."""
    laboratory = make_laboratory()
    laboratory.mail_to(shared_mail_server.port)
    laboratory.export("FL-1.csv", *laboratory.standards(), *laboratory.additions("RIV-17", recovery=0.6))
    once = laboratory.run("once")
    explained = laboratory.run("explain", str(laboratory.folder / "exports" / "FL-1.csv"))
    ((_, text),) = shared_mail_server.mailbox.received
    message: Any = email.message_from_string(text, policy=email.policy.default)
    (page,) = laboratory.folder.glob("results/*/*.html")
    (row,) = laboratory.csv_rows("FL-1.csv")
    plain = unfolded(message.get_body(("plain",)).get_content().replace("\r\n", "\n"))
    rich = message.get_body(("html",)).get_content()
    return {
        "terminal": _words(once.stdout + explained.stdout),
        "mail": _words(plain),
        "mail as HTML": _words(html.unescape(re.sub(r"<[^>]+>", " ", rich))),
        "page": _words(html.unescape(re.sub(r"<[^>]+>", " ", page.read_text("utf-8")))),
        "CSV": _words("; ".join(row.values())),
        "record": _words(str(laboratory.record("FL-1.csv"))),
        "plot": " ".join(part.get_content_type() for part in message.walk() if part.get_content_maintype() == "image"),
        "plot in words": _words(" ".join(re.findall(r'alt="([^"]*)"', rich))),
    }


def _words(text: str) -> str:
    return " ".join(text.split())


PLACES = ("terminal", "mail", "mail as HTML", "page", "CSV", "record")


@pytest.mark.parametrize("place", PLACES)
def test_the_reason_is_the_same(told: dict[str, str], place: str) -> None:
    """The sentence of the check that failed stands everywhere, word for word."""
    assert "slope recovery 60 %: less of the added Zn is found than was added" in told[place]


@pytest.mark.parametrize("place", PLACES)
def test_the_next_step_is_the_same(told: dict[str, str], place: str) -> None:
    """What to do stands everywhere, word for word."""
    step = "Keep the vials: check the spike volume, the stock and losses in preparation; then prepare RIV-17 again"
    assert step in told[place]


@pytest.mark.parametrize("place", [place for place in PLACES if place != "CSV"])
def test_the_result_has_the_same_digits(told: dict[str, str], place: str) -> None:
    """The rounded result with its uncertainty is written the same everywhere."""
    (result,) = set(re.findall(r"RIV-17 Zn: result (\d[\d.]* ± [\d.]+ mg/L)", told["mail"]))
    assert result in told[place]


def test_the_csv_rounds_to_the_digits_that_people_see(told: dict[str, str]) -> None:
    """The CSV has all digits; rounded, they are those of the mail."""
    value, uncertainty = re.findall(r"RIV-17 Zn: result (\d[\d.]*) ± ([\d.]+) mg/L", told["mail"])[0]
    numbers = [float(text) for text in told["CSV"].split("; ") if re.fullmatch(r"\d+\.\d+", text)]
    decimals = len(value.partition(".")[2])
    assert any(f"{number:.{decimals}f}" == value for number in numbers)
    assert any(f"{number:.{len(uncertainty.partition('.')[2])}f}" == uncertainty for number in numbers)


@pytest.mark.parametrize("place", ["mail", "mail as HTML", "page"])
def test_the_limit_is_named(told: dict[str, str], place: str) -> None:
    """Where the number stands, its limit stands too."""
    assert "75 to 125" in told[place]


def test_the_mail_shows_the_line_of_the_failing_series(told: dict[str, str]) -> None:
    """One picture travels inside the mail, and its words name the series and its result."""
    result = re.findall(r"RIV-17 Zn: result (\d[\d.]* ± [\d.]+ mg/L)", told["mail"])[0]

    assert told["plot"] == "image/png"
    assert told["plot in words"].startswith("Additions line of RIV-17 Zn: slope ")
    assert result in told["plot in words"]
