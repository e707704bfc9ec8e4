"""Names of result files: whatever an export is called, its results stay in their folder under a name of their own."""

from __future__ import annotations

import re
from pathlib import PurePosixPath, PureWindowsPath

import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st

from watcher.names import HASH_CHARACTERS, LONGEST, safe_name, target

#: Names that Windows keeps for devices, as its documentation lists them; with any extension, in any case.
DEVICES = {"CON", "PRN", "AUX", "NUL", *(f"{port}{digit}" for port in ("COM", "LPT") for digit in "0123456789¹²³")}
#: Foreign names: anything, and things made of what is dangerous.
NAMES = st.one_of(
    st.text(max_size=300),
    st.lists(
        st.sampled_from(["..", "/", "\\", ".", "con", "NUL", "a", "A", " ", "-", ":", "\0", "\n", "ä", "~", ".csv"]),
        max_size=8,
    ).map("".join),
)
ACCEPTED = "2026-12-01T04:30:00.000000Z"


@given(NAMES)
@example("../../x")
@example("/etc/x")
@example("C:\\x")
@example("..")
@example("")
@example("nul.txt")
@example("COM¹")
@example("\udcff.csv")
def test_a_name_never_leaves_its_folder(name: str) -> None:
    """A result file lies directly in its month's folder, under POSIX and under Windows rules."""
    path = target(name, 1, ACCEPTED, "csv")

    for rules in (PurePosixPath, PureWindowsPath):
        parts = rules(path).parts
        assert (len(parts), parts[0]) == (2, "2026-12")
        assert not rules(path).is_absolute()
    assert re.fullmatch(r"[A-Za-z0-9._-]+", safe_name(name))
    assert not safe_name(name).startswith(".")


@given(NAMES)
@example("con")
@example("con .csv")
@example("aux.h.csv")
@example("COM¹.csv")
def test_a_name_is_never_a_device(name: str) -> None:
    """No result file has a name that Windows keeps for a device, and none is longer than a file system takes."""
    file = PurePosixPath(target(name, 999, ACCEPTED, "json")).name

    assert file.partition(".")[0].upper() not in DEVICES
    assert not file.endswith((".", " "))
    assert len(file.encode()) <= LONGEST + HASH_CHARACTERS + len("_-.r999.json")


@given(NAMES, NAMES)
@example("a/b.csv", "a-b.csv")
@example("a b.csv", "a  b.csv")
@example("é.csv", "e\u0301.csv")
@example("x" * 200 + "1", "x" * 200 + "2")
def test_distinct_names_stay_distinct(one: str, other: str) -> None:
    """Two exports whose names differ have result files whose names differ."""
    assume(one != other)

    assert safe_name(one) != safe_name(other)


@pytest.mark.parametrize("name", ["FL-0412.csv", "BR_0221.txt", "x" * LONGEST, "report.r1.csv"])
def test_a_plain_name_is_kept(name: str) -> None:
    """A name of plain letters, digits, points and dashes is kept, so that people find their export again."""
    assert safe_name(name) == name


def test_month_and_revision_stand_in_the_path() -> None:
    """The month is the one of acceptance in UTC, and each revision has files of its own."""
    assert target("FL-0412.csv", 1, ACCEPTED, "csv") == "2026-12/FL-0412.csv.r1.csv"
    assert target("FL-0412.csv", 2, "2027-01-01T00:00:00.000000Z", "json") == "2027-01/FL-0412.csv.r2.json"
