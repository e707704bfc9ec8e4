"""Looking through an exports folder: what has settled, what is odd, what is left alone."""

from __future__ import annotations

import os
import socket
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from watcher.folder import Folder


@pytest.fixture
def root(tmp_path: Path) -> Path:
    """An empty exports folder."""
    folder = tmp_path / "exports"
    folder.mkdir()
    return folder


def settled(folder: Folder, *moments: float) -> list[str]:
    """Names that have settled at the last of these looks."""
    look = None
    for now in moments:
        look = folder.look(now)
    assert look is not None
    return [each.name for each in look.settled]


def test_a_file_settles_after_two_looks_far_enough_apart(root: Path) -> None:
    """One look never settles a file, and two that are too close do not either."""
    (root / "SED-12.csv").write_text("a")
    folder = Folder(root, settle_seconds=5.0)

    assert settled(folder, 100.0) == []
    assert folder.look(104.9).unsettled == ("SED-12.csv",)
    assert folder.look(104.9).settles_at == 105.0
    assert settled(folder, 105.0) == ["SED-12.csv"]


def test_without_settling_time_two_looks_are_still_needed(root: Path) -> None:
    """A settling time of nothing still asks for a second look."""
    (root / "SED-12.csv").write_text("a")
    folder = Folder(root, settle_seconds=0.0)

    assert settled(folder, 100.0) == []
    assert settled(folder, 100.001) == ["SED-12.csv"]


@pytest.mark.parametrize("change", ["grows", "same size", "new identity"])
def test_any_change_starts_the_wait_anew(root: Path, change: str) -> None:
    """A file that changed in size, time or identity between looks is not settled."""
    path = root / "SED-12.csv"
    path.write_text("12.5")
    folder = Folder(root, settle_seconds=5.0)
    folder.look(100.0)
    if change == "grows":
        path.write_text("12.55")
    elif change == "same size":
        os.utime(path, ns=(1, 1))
    else:
        old = path.stat()
        (root / "other").write_text("13.5")
        os.utime(root / "other", ns=(old.st_atime_ns, old.st_mtime_ns))
        (root / "other").replace(path)

    assert settled(folder, 105.0) == []
    assert settled(folder, 110.0) == ["SED-12.csv"]


def test_what_was_taken_is_skipped_until_it_changes(root: Path) -> None:
    """A file that was taken in does not come again; changed, it settles anew."""
    path = root / "SED-12.csv"
    path.write_text("a")
    folder = Folder(root, settle_seconds=1.0)
    folder.look(0.0)
    (candidate,) = folder.look(1.0).settled
    folder.taken(candidate)
    assert folder.look(2.0).settled == folder.look(2.0).unsettled == ()

    path.write_text("ab")

    assert settled(folder, 3.0, 4.0) == ["SED-12.csv"]


def test_a_change_after_the_look_is_not_skipped(root: Path) -> None:
    """A file that changed between look and copy comes again, although its old state was marked as taken."""
    path = root / "SED-12.csv"
    path.write_text("a")
    folder = Folder(root, settle_seconds=1.0)
    folder.look(0.0)
    (candidate,) = folder.look(1.0).settled
    path.write_text("ab")
    folder.look(1.5)

    folder.taken(candidate)

    assert settled(folder, 2.5) == ["SED-12.csv"]


@pytest.mark.parametrize(
    "name", ["~$FL-1.csv", ".FL-1.csv", "FL-1.csv.tmp", "FL-1.PART", "FL-1.csv.crdownload", "FL-1.csv~", "Thumbs.db"]
)
def test_unfinished_and_accompanying_files_are_left_alone(root: Path, name: str) -> None:
    """Names of temporary files are neither taken in nor complained about."""
    (root / name).write_text("a")
    folder = Folder(root, settle_seconds=0.0)

    look = folder.look(1.0) and folder.look(2.0)

    assert (look.settled, look.unsettled, look.troubles) == ((), (), ())


def _odd_pipe(path: Path) -> None:
    os.mkfifo(path)


def _odd_link(path: Path) -> None:
    path.symlink_to("/etc/hostname")


def _odd_directory(path: Path) -> None:
    path.mkdir()


def _odd_socket(path: Path) -> None:
    with socket.socket(socket.AF_UNIX) as made:
        made.bind(str(path))


@pytest.mark.parametrize(
    ("make", "said"),
    [
        (_odd_pipe, "is no regular file"),
        (_odd_link, "is a symbolic link"),
        (_odd_directory, "is a directory with the name of an export"),
        (_odd_socket, "is no regular file"),
    ],
)
def test_what_is_no_file_is_refused_with_a_reason(root: Path, make: Any, said: str) -> None:
    """Pipes, links, sockets and directories named like exports are named, every time with the same key."""
    make(root / "RIV-17.csv")
    (root / "SED-12.csv").write_text("a")
    folder = Folder(root, settle_seconds=0.0)

    first, second = folder.look(1.0), folder.look(2.0)

    assert [each.name for each in second.settled] == ["SED-12.csv"]
    assert f"RIV-17.csv in {root} {said}" in second.troubles[0].sentence
    assert [each.key for each in first.troubles] == [each.key for each in second.troubles]


def test_a_name_that_is_no_text_is_refused(root: Path) -> None:
    """A file name that is not valid UTF-8 is shown with its bytes and not taken in."""
    Path(os.fsdecode(os.fsencode(root) + b"/SED-\xff.csv")).write_text("a")
    folder = Folder(root, settle_seconds=0.0)

    look = folder.look(1.0) and folder.look(2.0)

    assert look.settled == ()
    assert r"SED-\xff.csv" in look.troubles[0].sentence
    assert "not valid UTF-8" in look.troubles[0].sentence


def test_subfolders_only_where_asked_for(root: Path) -> None:
    """Subfolders are passed over in silence or looked into; names then have slashes and the folder's prefix."""
    (root / "batch" / "am").mkdir(parents=True)
    (root / "batch" / "am" / "SED-12.csv").write_text("a")
    flat, deep = Folder(root), Folder(root, subfolders=True, prefix="flame/", settle_seconds=0.0)

    assert flat.look(1.0).troubles == ()
    assert settled(deep, 1.0, 2.0) == ["flame/batch/am/SED-12.csv"]


def test_a_folder_that_is_away_is_a_trouble_and_forgets_nothing(root: Path) -> None:
    """A folder that vanishes gives one trouble; back again, what was taken stays taken."""
    (root / "SED-12.csv").write_text("a")
    folder = Folder(root, settle_seconds=0.0)
    folder.look(1.0)
    folder.taken(folder.look(2.0).settled[0])
    root.rename(root.with_name("away"))

    look = folder.look(3.0)

    assert look.settled == ()
    assert [each.key for each in look.troubles] == [f"folder:{root}"]
    root.with_name("away").rename(root)
    (root / "BRN-3.csv").write_text("a")
    assert settled(folder, 4.0, 5.0) == ["BRN-3.csv"]


@settings(max_examples=40, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.tuples(st.sampled_from(["write", "look"]), st.floats(0.1, 3.0)), max_size=20))
def test_nothing_settles_within_the_settling_time_of_a_change(tmp_path_factory: Any, steps: list[Any]) -> None:
    """However writing and looking alternate, what is reported has been the same for the settling time."""
    root = tmp_path_factory.mktemp("exports")
    folder = Folder(root, settle_seconds=2.0)
    now, written, size = 0.0, None, 0
    for step, seconds in steps:
        now += seconds
        if step == "write":
            size += 1
            (root / "SED-12.csv").write_text("x" * size)
            written = now
        elif folder.look(now).settled:
            assert written is not None
            assert now - written >= 2.0


def test_what_is_gone_is_forgotten_and_what_is_there_is_not(root: Path) -> None:
    """Of thousands of files that were taken in and removed no memory is kept; those still there are not taken again."""
    folder = Folder(root, settle_seconds=1.0)
    for number in range(1500):
        (root / f"FL-{number}.csv").write_text("12.5")
    folder.look(100.0)
    for candidate in folder.look(102.0).settled:
        folder.taken(candidate)
    assert len(folder._taken) == 1500
    for number in range(1400):
        (root / f"FL-{number}.csv").unlink()

    assert [folder.look(second).settled for second in (103.0, 104.0, 105.0)] == [(), (), ()]
    assert len(folder._taken) == 100
