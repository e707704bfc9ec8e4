"""File events ring a bell, of the folder that is there now, and only when they are wanted."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

from watcher import events as module
from watcher.events import Events
from watcher.wake import Wake

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture
def root(tmp_path: Path) -> Path:
    """An exports folder."""
    (tmp_path / "exports").mkdir()
    return tmp_path / "exports"


def test_a_new_file_rings(root: Path) -> None:
    """A file that lands rings; listing and reading the folder does not."""
    wake = Wake()
    events = Events([root], wake, subfolders=False, enabled=True)
    events.renew()
    (root / "SED-12.csv").write_text("a")
    assert wake.wait(10.0)
    while wake.wait(0.1):
        pass

    assert [path.read_text() for path in root.iterdir()] == ["a"]

    assert not wake.wait(0.2)
    events.close()


def test_a_folder_made_anew_is_listened_to_again(root: Path) -> None:
    """After the folder was renamed away and made anew, events come from the new one."""
    wake = Wake()
    events = Events([root], wake, subfolders=False, enabled=True)
    events.renew()
    root.rename(root.with_name("away"))
    events.renew()
    root.mkdir()
    events.renew()
    while wake.wait(0.1):
        pass

    (root / "SED-12.csv").write_text("a")

    assert wake.wait(10.0)
    events.close()


@pytest.mark.parametrize("how", ["settings", "environment"])
def test_events_can_be_switched_off(root: Path, how: str, monkeypatch: Any) -> None:
    """Switched off by settings or environment, nothing is listened to."""
    if how == "environment":
        monkeypatch.setenv("SPIKEWARDEN_NO_EVENTS", "1")
    events = Events([root], Wake(), subfolders=False, enabled=how == "environment")

    events.renew()

    assert events._observer is None


def test_a_system_without_events_costs_only_the_events(root: Path, monkeypatch: Any) -> None:
    """Where the system gives no more listeners, the service goes on by looking and does not try at every look."""
    tries: list[int] = []

    class Exhausted:
        def __init__(self) -> None:
            tries.append(1)

        def schedule(self, *_: object, **__: object) -> None:
            raise OSError(24, "Too many open files")

        def stop(self) -> None:
            """Never started."""

        def join(self, _seconds: float) -> None:
            raise RuntimeError("never started")

    monkeypatch.setattr(module, "Observer", Exhausted)
    events = Events([root], Wake(), subfolders=False, enabled=True)

    events.renew()
    events.renew()

    assert len(tries) == 1


def test_rings_are_kept_as_one() -> None:
    """Many rings while nobody waits are one; without a ring, waiting ends by itself."""
    wake = Wake()
    for _ in range(100):
        wake.ring()

    assert wake.wait(0.0)
    assert not wake.wait(0.0)
