"""Exit codes that scripts rely on, from the real program; none of them may be quieter than what happened."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

from watcher.instance import Instance

if TYPE_CHECKING:
    from collections.abc import Callable

#: Exports by what becomes of them, each with rows that lead there.
CASES: dict[str, Callable[[Any], dict[str, list[str]]]] = {
    "pass": lambda lab: {"FL-0501.csv": [*lab.standards(), *lab.additions("SED-12")]},
    "warn": lambda lab: {"FL-0502.csv": [*lab.standards(), *lab.additions("SED-13", only="02")]},
    "not spiked": lambda lab: {"FL-0503.csv": [*lab.standards(), *lab.additions("ROOF-7", only="0")]},
    "fail": lambda lab: {"FL-0504.csv": [*lab.standards(), *lab.additions("RIV-17", recovery=0.6)]},
    "incomplete": lambda lab: {"FL-0505.csv": [*lab.standards(), *lab.additions("BRN-3", only="123")]},
    "refused": lambda lab: {"FL-0506.csv": [*lab.additions("RIV-18"), "RIV-19;Zn;0.1"]},
    "unclaimed": lambda lab: {"XR-0507.csv": lab.additions("RIV-18")},
    "row without sample": lambda lab: {"FL-0508.csv": [*lab.standards(), *lab.additions("SED-14"), lab.row("", 0.2)]},
}


def put(laboratory: Any, *cases: str) -> None:
    """Let exports land."""
    for case in cases:
        for name, rows in CASES[case](laboratory).items():
            laboratory.export(name, *rows)


@pytest.mark.parametrize(
    ("cases", "code"),
    [
        (("pass", "warn", "not spiked"), 0),
        (("pass", "fail"), 1),
        (("pass", "incomplete"), 1),
        (("pass", "fail", "refused"), 2),
        (("pass", "unclaimed"), 2),
        (("row without sample",), 2),
    ],
)
def test_once_ends_with_the_gravest(laboratory: Any, cases: tuple[str, ...], code: int) -> None:
    """`once` ends with 0 where all is well, 1 where a sample is not, 2 where something was not done; 2 before 1."""
    put(laboratory, *cases)

    done = laboratory.run("once")

    assert done.returncode == code, done.stdout + done.stderr
    verdicts = {one["verdict"] for record in laboratory.records().values() for one in record["series"]}
    assert verdicts == set(cases) - {"refused", "unclaimed", "row without sample"} | (
        {"pass"} if "row without sample" in cases else set()
    )
    assert bool(done.stderr) == (code == 2)


def test_once_judges_only_what_it_took_in(laboratory: Any) -> None:
    """A second `once` finds nothing new and ends with 0, although a sample failed before."""
    put(laboratory, "fail")
    first = laboratory.run("once")

    second = laboratory.run("once")

    assert (first.returncode, second.returncode) == (1, 0)
    assert second.stdout == "Nothing new.\n"


def test_an_export_without_its_last_line_is_not_done(laboratory: Any, squeezed: Any) -> None:
    """Where a layout says how an export ends, one that does not end so waits, and gives 2 with the reason."""
    laboratory.change("flame.yaml", "columns:", "finished: '^End of log'\nuntil: '^End of log'\ncolumns:")
    put(laboratory, "pass")

    done = laboratory.run("once")

    assert done.returncode == 2
    told = squeezed(done.stderr)
    assert "waiting: FL-0501.csv: expected a line that matches '^End of log' (finished)" in told
    assert "It is evaluated when that line is there" in told
    assert laboratory.records() == {}


def test_an_undelivered_mail_is_not_done(laboratory: Any, squeezed: Any, unused_port: int) -> None:
    """A mail that could not leave is named on standard error, stays queued, and gives 2."""
    laboratory.mail_to(unused_port)
    put(laboratory, "fail")

    done = laboratory.run("once")

    assert done.returncode == 2
    told = squeezed(done.stderr)
    assert "undelivered: mail to lead@example: FAIL RIV-17 Zn: recovery 60 % (limits 75 to 125)" in told
    assert "It stays queued." in told


@pytest.mark.parametrize("command", ["once", "watch", "check", "status"])
def test_bad_settings_are_not_done(laboratory: Any, squeezed: Any, command: str) -> None:
    """Each command ends with 2 on settings with a fault, and says file, line, key and remedy."""
    laboratory.change("config.yaml", "report: additions", "report: additons")

    done = laboratory.run(command)

    assert done.returncode == 2
    assert (
        "config.yaml, line 10, report: expected one of 'additions', 'calibration', 'automatic', got 'additons'. "
        "Nothing is evaluated with these settings. Did you mean 'additions'?" in squeezed(done.stderr)
    )
    assert not (laboratory.folder / "records").exists()


def test_a_held_lock_is_not_done(laboratory: Any) -> None:
    """While another process holds the records, `once` ends with 2, names it and takes nothing in."""
    put(laboratory, "pass")
    with Instance(laboratory.folder / "records"):
        done = laboratory.run("once")

    assert done.returncode == 2
    assert str(laboratory.folder / "records") in done.stderr
    assert laboratory.records() == {}


@pytest.mark.parametrize("case", ["pass", "fail", "refused", "unclaimed", "row without sample"])
def test_explain_ends_as_once_and_writes_nothing(laboratory: Any, run_here: Any, case: str) -> None:
    """`explain` gives the code that `once` would give, and leaves every byte of the laboratory as it was."""
    put(laboratory, case)
    before = laboratory.contents()
    (export,) = (laboratory.folder / "exports").iterdir()

    done = run_here("explain", str(export), laboratory)

    assert done.exit_code == {"pass": 0, "fail": 1}.get(case, 2), done.output
    assert laboratory.contents() == before


def test_explain_shows_the_mail_that_would_go(laboratory: Any, run_here: Any) -> None:
    """`explain` shows labels as they were understood, results, and mails with their subjects."""
    put(laboratory, "fail")

    done = run_here("explain", str(laboratory.folder / "exports" / "FL-0504.csv"), laboratory)

    assert "Subject: FAIL RIV-17 Zn: recovery 60 % (limits 75 to 125)" in done.stdout
    assert ["RIV-17", "+A1", "spiked", "RIV-17", "A1", "1", "{sample}", "+{level}"] in [
        line.split() for line in done.stdout.splitlines()
    ]


def test_explain_names_an_export_that_is_not_there(laboratory: Any, run_here: Any) -> None:
    """A path that leads nowhere gives 2 and is named."""
    done = run_here("explain", str(laboratory.folder / "exports" / "FL-9999.csv"), laboratory)

    assert done.exit_code == 2
    assert "FL-9999.csv: no such file or directory" in " ".join(done.stderr.split())


def test_check_ends_with_0_and_names_defaults(laboratory: Any, run_here: Any, squeezed: Any) -> None:
    """`check` of sound settings ends with 0 and lists what the laboratory has not decided."""
    done = run_here("check", None, laboratory)

    assert done.exit_code == 0
    assert "no fault found" in squeezed(done.stdout)
    assert "recovery: fail unless 75 to 125 %" in done.stdout
    assert "Not the laboratory's decision yet, defaults hold: levels," in done.stdout


def test_check_names_a_missing_exports_folder(laboratory: Any, run_here: Any) -> None:
    """`check` ends with 2 where the exports folder is not there."""
    (laboratory.folder / "exports").rmdir()

    done = run_here("check", None, laboratory)

    assert done.exit_code == 2
    assert "exports: expected the exports folder. Nothing can be taken in." in " ".join(done.stderr.split())


def test_status_tells_a_service_from_none(laboratory: Any, run_here: Any, eventually: Any) -> None:
    """`status` ends with 2 before and after a service, 0 while one is well, 1 while something needs attention."""

    def status() -> Any:
        return run_here("status", None, laboratory)

    assert status().exit_code == 2
    service = laboratory.start("watch")
    eventually(lambda: laboratory.status().get("running"), "the service shows that it runs")
    well = status()
    put(laboratory, "refused")
    eventually(lambda: laboratory.status().get("refused"), "the refused export is shown")
    attention = status()
    service.terminate()
    service.wait(timeout=20)
    ended = status()

    assert (well.exit_code, attention.exit_code, ended.exit_code) == (0, 1, 2)
    assert "refused: FL-0506.csv, line 6" in attention.stdout
    assert "Not running." in ended.stdout


@pytest.mark.parametrize("command", ["once", "check", "status", "explain"])
def test_no_line_is_wider_than_80_columns(laboratory: Any, run_here: Any, command: str) -> None:
    """What a command prints fits a terminal of 80 columns."""
    put(laboratory, "fail")
    export = laboratory.folder / "exports" / "FL-0504.csv"

    done = run_here(command, str(export) if command == "explain" else None, laboratory)

    words = [word for line in (done.stdout + done.stderr).splitlines() if len(line) > 80 for word in line.split()]
    assert [word for word in words if len(word) <= 80] == []
