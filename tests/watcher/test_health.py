"""The heartbeat: written by the service, read by anyone, calm when nothing changes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

from watcher import pulse as module
from watcher.addressing import Addressing
from watcher.folder import Trouble
from watcher.health import read_status
from watcher.instance import Instance
from watcher.intake import Taken
from watcher.pulse import Pulse
from watcher.service_settings import ServiceSettings
from watcher.troubles import Troubles

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger


@pytest.fixture
def troubles(ledger: Ledger, clock: Any) -> Troubles:
    """No troubles yet."""
    return Troubles(ledger, Addressing(None, clock), clock)


@pytest.fixture
def pulse(ledger: Ledger, clock: Any, troubles: Troubles, tmp_path: Path) -> Pulse:
    """The pulse of a service over the ledger."""
    settings = ServiceSettings(
        laboratory="Skerry Point Water Laboratory",
        exports=(tmp_path / "exports",),
        results=tmp_path / "results",
        records=tmp_path / "records",
    )
    return Pulse(settings, ledger, troubles, clock, version="1", settings_number=1)


def test_what_a_heartbeat_tells(
    pulse: Pulse, ledger: Ledger, clock: Any, done: Any, make_mail: Any, troubles: Troubles, tmp_path: Path
) -> None:
    """Counts, refusals with reasons, undelivered mails with the oldest, and what is wrong now."""
    export = ledger.accept("FL-1.csv", "1" * 64, 12)
    assert export is not None
    ledger.finish(export, done(state="refused", problem="line 3: 9 fields", mails=(make_mail("problem", "p"),)))
    troubles.set("folders", [Trouble("folder:x", "Exports folder x is away.")])
    pulse.looked(Taken((export,), (), (), None))

    pulse.beat(running=True)

    heartbeat = read_status(tmp_path / "records").heartbeat
    assert heartbeat is not None
    assert heartbeat["running"] is True
    assert heartbeat["counts"] == {"refused": 1}
    assert heartbeat["refused"] == [
        {"name": "FL-1.csv", "state": "refused", "problem": "line 3: 9 fields", "attempts": 0}
    ]
    assert heartbeat["undelivered_mails"] == {
        "count": 1,
        "oldest": "2026-12-01T07:30:00.000000Z",
        "last_error": None,
    }
    assert heartbeat["problems"] == ["Exports folder x is away."]
    assert heartbeat["last_export"] == "FL-1.csv"
    assert heartbeat["last_scan_at"] == heartbeat["written_at"] == "2026-12-01T07:30:00.000000Z"


def test_an_idle_service_writes_seldom(pulse: Pulse, clock: Any, monkeypatch: Any) -> None:
    """While only time passes, the heartbeat is written every half minute; a change is written at once."""
    written: list[str] = []
    monkeypatch.setattr(module, "write_heartbeat", lambda _records, beat: written.append(beat.written_at))
    pulse.beat(running=True)
    for _ in range(29):
        clock.advance(1)
        pulse.beat(running=True)
    assert len(written) == 1
    clock.advance(1)
    pulse.beat(running=True)
    assert len(written) == 2

    pulse.beat(running=False)

    assert len(written) == 3


def test_a_status_without_a_service(tmp_path: Path) -> None:
    """Nothing there, half a file, no lock: each is told as it is."""
    assert read_status(tmp_path) == read_status(tmp_path / "gone")
    (tmp_path / "status.json").write_text("{")
    status = read_status(tmp_path)
    assert (status.held, status.heartbeat) == (False, None)

    with Instance(tmp_path):
        assert read_status(tmp_path).held
