"""What mails say: the subject for a phone, then what to do, what is held, where, why, the numbers, the record."""

from __future__ import annotations

import email
import email.policy
from datetime import UTC, datetime
from typing import TYPE_CHECKING

import pytest
from hypothesis import given
from hypothesis import strategies as st

from watcher import letter, mail
from watcher.evaluation import Evaluated, Job, evaluate_job
from watcher.ledger_rows import DueMail
from watcher.letter_html import unfolded
from watcher.pictures import pictures
from watcher.settings import File, Snapshot, compile_snapshot

if TYPE_CHECKING:
    from email.message import EmailMessage
    from pathlib import Path

    from watcher.mail import Mail

ACCEPTED = "2026-12-01T04:30:00.000000Z"
CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {exports: ./exports, results: ./results}
layouts: [plain.yaml]
report: additions
blank: none
units: {export: mg/L, result: mg/L}
limits: {recovery: 75 to 125 %, bracket: off}
mail: none
"""
LAYOUT = """\
layout: plain bench
claims: {file: '*.csv'}
separator: ';'
columns:
  position: Run
  label: Label
  analyte: Element
  signal: [R1, R2]
  added: {from: Added, optional: yes}
  analyst: {from: By, optional: yes}
labels:
  - {like: 'STD {nominal}', role: standard}
  - {like: 'CHK {nominal}', role: check_standard}
  - {like: 'BLK *', role: blank}
  - {pattern: '(?P<sample>.+) spiked$', role: spiked}
  - {like: '{sample}', role: unspiked}
"""
SECTIONS = ["DO", "HOLD", "WHERE", "WHY", "NUMBERS", "RECORD"]
ELEMENTS = ("Zn", "Cu", "Pb", "Cd")


def row(label: str, signal: float, added: float = 0, analyte: str = "Zn") -> str:
    """Return a row with two readings."""
    return f"{label};{analyte};{signal - 0.001:.4f};{signal + 0.001:.4f};{added or ''};bench 2"


def additions(sample: str, recovery: float = 1.0, analyte: str = "Zn") -> list[str]:
    """Rows of a sample with 2 mg/L of its own and additions of 1, 2 and 3 mg/L."""
    scatter = (0.002, -0.003, -0.001, 0.002)
    return [
        row(sample + (" spiked" if n else ""), 0.1 * recovery * (2 + n) + s, n, analyte) for n, s in enumerate(scatter)
    ]


def batch(drift: float = 1.0, analyte: str = "Zn") -> list[str]:
    """Rows of a calibration with blank and check standard, which reads `drift` of what it should."""
    standards = [row(f"STD {c}", 0.1 * c + 0.001, analyte=analyte) for c in (0, 1, 2, 4, 6)]
    return [*standards, row("BLK 1", 0.0012, analyte=analyte), row("CHK 2", 0.2 * drift, analyte=analyte)]


def evaluated(*rows: str, name: str = "PL-0901.csv", more: str = "", layout: str = LAYOUT) -> Evaluated:
    """Evaluate an export of these rows."""
    settings = compile_snapshot(
        Snapshot("/laboratory", File("config.yaml", CONFIG + more), (File("plain.yaml", layout),))
    )
    numbered = [f"{number};{text}" for number, text in enumerate(rows, start=1)]
    data = "\n".join(["Run;Label;Element;R1;R2;Added;By", *numbered]).encode()
    return evaluate_job(settings, Job(name, data, 1, ACCEPTED), final=True)


def mails(found: Evaluated, known: tuple[str, ...] = ()) -> list[Mail]:
    """Return the mails that it gives rise to."""
    return mail.mails(found.outcomes, found.export, found.problems, 7200.0, known)


def sections(body: str) -> dict[str, str]:
    """The sections of a body by their titles, in order; the first is the headline."""
    parts = [part.partition("\n") for part in body.rstrip("\n").split("\n\n")]
    return {title: " ".join(text.split()) for title, _, text in parts}


def sent(what: Mail) -> EmailMessage:
    """The mail as it goes over the line, read back as a mail program reads it."""
    due = DueMail(
        id=1,
        message_id="<1@example>",
        subject=what.subject,
        body=what.body,
        created_at=ACCEPTED,
        first_due_at=ACCEPTED,
        recipients=("lead@example",),
        possible_repeat=False,
        attempts=0,
    )
    data = letter.compose(due, "bench@example", ["lead@example"], datetime(2026, 12, 1, 4, 30, 5, tzinfo=UTC))
    return email.message_from_bytes(data, policy=email.policy.default)  # type: ignore[return-value]


# -- failures ------------------------------------------------------------------------------------------------------


def test_a_single_failure() -> None:
    """One failing sample: its recovery and limits in the subject, and every section in its order."""
    (one,) = mails(evaluated(*batch(), *additions("SED-12"), *additions("RIV-17", recovery=0.61)))

    assert (one.kind, one.after_seconds) == ("fail", 0.0)
    assert one.subject == "FAIL RIV-17 Zn: recovery 61 % (limits 75 to 125)"
    told = sections(one.body)
    assert list(told) == [one.subject, *SECTIONS]
    assert told["DO"].startswith("Keep the vials: check the spike volume, the stock and losses in preparation;")
    assert told["HOLD"] == ("- Do not release RIV-17 Zn. - The rest of this export is not affected by it: 1 pass.")
    assert told["WHERE"] == "- RIV-17 Zn, position 12-15, lines 13-16 - analyst bench 2"
    assert told["WHY"] == "RIV-17 Zn: slope recovery 61 %: less of the added Zn is found than was added"
    assert told["NUMBERS"].startswith("- RIV-17 Zn: recovery 61 % (limits 75 to 125) - RIV-17 Zn: result 1.99 ± ")
    assert "export PL-0901.csv, revision 1, sha256 " in told["RECORD"]
    assert "results 2026-12/PL-0901.csv.r1.csv" in told["RECORD"]


def test_several_failures_make_one_mail() -> None:
    """Failures of several samples make one mail, which names the first and counts the rest, and tells of each."""
    failing = [line for n in (17, 18, 19) for line in additions(f"RIV-{n}", recovery=0.6)]
    (one,) = mails(evaluated(*batch(), *additions("SED-12"), *failing))

    assert one.subject == "FAIL RIV-17 Zn and 2 more: recovery 60 % (limits 75 to 125)"
    told = sections(one.body)
    assert told["HOLD"].startswith("- Do not release RIV-17 Zn, RIV-18 Zn")
    for sample in ("RIV-17", "RIV-18", "RIV-19"):
        assert f"{sample} Zn: slope recovery 60 %" in told["WHY"]
        assert f"then prepare {sample} again" in told["DO"]
    assert len(one.keys) == 3


def test_many_failures_are_capped_and_counted() -> None:
    """A mail spells out twelve causes and counts the rest, so that it can be read on a phone; it has every key."""
    failing = [line for n in range(40) for line in additions(f"RIV-{n}", recovery=0.6)]
    (one,) = mails(evaluated(*batch(), *failing))

    assert one.subject.startswith("FAIL RIV-0 Zn and 39 more: ")
    assert "and 28 more: see the result files" in " ".join(one.body.split())
    assert sections(one.body)["WHY"].count("slope recovery") == 12
    assert len(set(one.keys)) == 40


def test_a_failed_check_standard_is_one_cause() -> None:
    """A check standard that does not hold fails all samples of its analyte as one cause, with one thing to do."""
    rows = [*additions("SED-12"), *additions("SED-13"), *additions("SED-14")]
    (one,) = mails(evaluated(*batch(drift=0.8), *rows, *batch(analyte="Cu"), *additions("SED-12", analyte="Cu")))

    told = sections(one.body)
    assert one.subject == "FAIL SED-12 Zn and 2 more: check standard 80 % (limits 90 to 110)"
    assert told["DO"].startswith("Calibrate again")
    assert told["DO"].count("Calibrate again") == told["WHY"].count("check standard CHK 2 reads") == 1
    assert "then measure SED-12, SED-13, SED-14 and" in " ".join(told["DO"].split())
    assert "not affected by it: 1 pass" in told["HOLD"]
    assert len(one.keys) == 3


def test_an_incomplete_sample_waits() -> None:
    """A sample without its unspiked run gives a mail of its own kind, which waits for what may still come."""
    (one,) = mails(evaluated(*batch(), *additions("BRN-3")[1:]))

    assert (one.kind, one.after_seconds) == ("incomplete", 7200.0)
    assert one.subject == "INCOMPLETE BRN-3 Zn: the unspiked solution is missing"
    assert sections(one.body)["DO"].startswith("Measure BRN-3 unspiked now")


def test_an_open_bracket_is_one_cause_with_one_step() -> None:
    """Samples that wait for the next check standard are one line, whatever their number and analytes."""
    rows = [*additions("SED-12"), *additions("SED-13"), *additions("BRN-3")]
    bracketed = CONFIG.replace(", bracket: off", "")
    settings = compile_snapshot(Snapshot("/laboratory", File("config.yaml", bracketed), (File("plain.yaml", LAYOUT),)))
    numbered = [f"{number};{text}" for number, text in enumerate([*batch(), *rows], start=1)]
    data = "\n".join(["Run;Label;Element;R1;R2;Added;By", *numbered]).encode()

    (one,) = mails(evaluate_job(settings, Job("PL-0901.csv", data, 1, ACCEPTED), final=True))

    told = sections(one.body)
    assert one.kind == "incomplete"
    assert told["DO"] == (
        "Measure a check standard now; until it holds, release nothing that was measured since the last one."
    )
    assert told["WHY"] == (
        "SED-12 Zn, SED-13 Zn, BRN-3 Zn: no check standard was measured after it, the last one is on line 8"
    )


def test_a_second_attempt_is_named() -> None:
    """A sample that fails when measured again is named with its attempt."""
    rows = [*additions("RIV-17"), *additions("RIV-17", recovery=0.6)]
    (one,) = mails(evaluated(*batch(), *rows))

    assert one.subject == "FAIL RIV-17 Zn (attempt 2): recovery 60 % (limits 75 to 125)"


def test_a_faulty_cell_is_named_with_its_place() -> None:
    """A cell that cannot be read fails its sample by mail, with line, column and what stands there."""
    (one,) = mails(evaluated(*batch(), *additions("SED-12"), *additions("RIV-17"), "RIV-17 spiked;Zn;lost;0.6;4;"))

    assert one.subject.startswith("FAIL RIV-17 Zn: inputs")
    assert "line 17, column 'R1': expected a number with decimal point, got 'lost'" in sections(one.body)["WHY"]


def test_samples_that_pass_or_warn_are_not_mailed() -> None:
    """What passes, warns or was not spiked gives no mail."""
    found = evaluated(*batch(), *additions("SED-12"), *additions("SED-13")[::3], row("ROOF-7", 0.15))

    assert {found.outcomes.verdict_of(i).word for i in range(len(found.outcomes.case))} == {
        "pass",
        "warn",
        "not spiked",
    }
    assert mails(found) == []


# -- problems ------------------------------------------------------------------------------------------------------


def test_a_refused_export() -> None:
    """A refused export: named once in the subject, with its reason, and what to do."""
    sentence = "PL-0901.csv, line 7: expected 7 fields as in the header, got 3. Nothing of this export is read."
    one = mail.refusal("PL-0901.csv", sentence, "Correct the row.", "ab" * 32)

    assert one.kind == "problem"
    assert one.subject.startswith("PROBLEM PL-0901.csv, line 7: expected 7 fields")
    assert one.subject.count("PL-0901.csv") == 1
    told = sections(one.body)
    assert list(told)[1:] == ["DO", "HOLD", "WHY", "RECORD"]
    assert told["WHY"] == sentence
    assert "it has no results. Other exports are not affected." in told["HOLD"]


def test_rows_without_sample() -> None:
    """Rows that belong to no sample make one PROBLEM mail that quotes them; the failing sample has its own."""
    found = evaluated(*batch(), *additions("RIV-17", recovery=0.6), row("", 0.3), row("", 0.4))
    failure, problem = mails(found)

    assert failure.kind == "fail"
    assert problem.subject.startswith("PROBLEM PL-0901.csv: line 13, column 'Label': expected a sample ID")
    assert [f"line {n}, column 'Label'" in sections(problem.body)["WHY"] for n in (13, 14)] == [True, True]
    assert len(problem.keys) == 2


# -- repeats -------------------------------------------------------------------------------------------------------


def test_what_was_mailed_is_not_mailed_again() -> None:
    """Keys that are known keep a failure, an incomplete sample and a problem from being mailed a second time."""
    found = evaluated(*batch(), *additions("RIV-17", recovery=0.6), *additions("BRN-3")[1:], row("", 0.3))
    first = mails(found)

    assert [one.kind for one in first] == ["fail", "incomplete", "problem"]
    assert mails(found, known=tuple(key for one in first for key in one.keys)) == []


def test_a_growing_export_mails_only_what_is_new() -> None:
    """When an export grows by another failing sample, the mail is about that one."""
    rows = [*batch(), *additions("RIV-17", recovery=0.6)]
    (first,) = mails(evaluated(*rows))

    (second,) = mails(evaluated(*rows, *additions("RIV-18", recovery=0.6)), known=first.keys)

    assert second.subject == "FAIL RIV-18 Zn: recovery 60 % (limits 75 to 125)"
    assert not set(first.keys) & set(second.keys)


def test_another_failed_check_is_news() -> None:
    """When the same sample fails another check than the one that was mailed, it is mailed again."""
    rows = [*batch(), *additions("RIV-17", recovery=0.6)]
    (first,) = mails(evaluated(*rows))

    (second,) = mails(evaluated(*batch(drift=0.8), *additions("RIV-17", recovery=0.6)), known=first.keys)

    assert "check standard" in second.subject


def test_one_vessel_off_in_every_analyte_is_one_line() -> None:
    """A vessel that was made up wrongly is one thing to do and one reason, with all its analytes."""
    rows = [line for analyte in ELEMENTS for line in batch(analyte=analyte)]
    for number, share in enumerate((1.0, 1.0, 1.4, 1.0)):
        label = f"RIV-17 A{number} spiked" if number else "RIV-17"
        rows += [row(label, 0.1 * (2 + number) * share + 0.001 * number, number, analyte) for analyte in ELEMENTS]
    layout = LAYOUT.replace("(?P<sample>.+) spiked$", r"(?P<sample>\S+) A\d spiked$")

    (one,) = mails(evaluated(*rows, layout=layout))

    told = sections(one.body)
    assert told["DO"].count("prepare it again") == 1
    assert "- " not in told["DO"]
    assert "Vessel 'RIV-17 A2 spiked' reads 1.4 times what the line of the other vessels says" in told["DO"]
    assert told["WHY"].startswith("RIV-17 Zn, RIV-17 Cu, RIV-17 Pb")


def test_a_stock_out_of_its_dates_is_one_line() -> None:
    """All samples that were spiked from it are named together."""
    stock = "stocks: [{name: ZN-5, contains: {Zn: 5 mg/L}, until: 2026-01-31}]\n"
    stock += "bench: {aliquot: 10 mL, made_up_to: 50 mL}\n"
    layout = LAYOUT.replace(
        "added: {from: Added, optional: yes}", "spike_volume: {from: Added, unit: mL, optional: yes}"
    )
    samples = [line for sample in ("RIV-17", "RIV-18", "SED-12") for line in additions(sample)]

    (one,) = mails(evaluated(*batch(), *samples, more=stock, layout=layout))

    told = sections(one.body)
    assert "Prepare the additions of RIV-17, RIV-18, SED-12 again from a stock within" in told["DO"]
    assert "- " not in told["DO"]


def test_two_mails_of_one_export_have_plots_of_their_own(tmp_path: Path) -> None:
    """A mail about a failing and one about an incomplete sample never share a picture's place."""
    found = evaluated(*batch(), *additions("RIV-17", recovery=0.6))

    places = [
        [one.path for one in pictures(found.outcomes, found.export, kind, (0,), tmp_path)]
        for kind in ("fail", "incomplete")
    ]

    assert all(places)
    assert set(places[0]).isdisjoint(places[1])


# -- form ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "sample",
    ["RIV-17\x07\x1b[31m", "RIV-17\u202e71", "=1+1", "RIV-17\x85Bcc: nobody@example", "RIV-17\u2028DO", "R" * 5000],
    ids=["bell and colour", "direction", "formula", "next line", "line separator", "very long"],
)
def test_a_hostile_sample_cannot_break_its_own_mail(sample: str) -> None:
    """Whatever a sample is called, its mail goes out with one clean subject line and its sections."""
    (one,) = mails(evaluated(*batch(), *additions(sample, recovery=0.6)))

    message = sent(one)

    assert message["Subject"].startswith("FAIL ")
    assert len(message["Subject"]) <= letter.SUBJECT_LIMIT
    assert message["Subject"].isprintable()
    assert message["Bcc"] is None
    text = unfolded(message.get_body(("plain",)).get_content().replace("\r\n", "\n"))
    assert [line for line in text.splitlines() if line in SECTIONS] == SECTIONS
    assert not any(c in text for c in "\x07\x1b\u202e\x85\u2028")


@given(st.text(min_size=1, max_size=40), st.text(max_size=200))
def test_any_refusal_can_be_sent(name: str, sentence: str) -> None:
    """A refusal about any name with any sentence becomes a message with one subject line."""
    message = sent(mail.refusal(name, sentence, "Correct it.", "ab" * 32))

    assert message["Subject"].startswith("PROBLEM")
    assert "\n" not in message["Subject"]
    assert message["To"] == "lead@example"
