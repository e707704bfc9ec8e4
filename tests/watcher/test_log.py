"""The log: JSON lines in UTC, without secrets, and no reason to stop."""

from __future__ import annotations

import json
import logging
from logging.handlers import RotatingFileHandler
from typing import TYPE_CHECKING, Any

import pytest
import structlog

from watcher import log as module
from watcher.log import LOG_NAME, hide, set_up_log
from watcher.password import MASK, Secret

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path


@pytest.fixture
def lines(tmp_path: Path) -> Iterator[Callable[[], list[dict[str, Any]]]]:
    """Set the log up in a records folder and read its lines."""
    root = logging.getLogger()
    level = root.level
    handler = set_up_log(tmp_path)
    yield lambda: [json.loads(line) for line in (tmp_path / "log" / LOG_NAME).read_text().splitlines()]
    root.removeHandler(handler)
    root.setLevel(level)
    handler.close()
    structlog.reset_defaults()
    module._hidden.clear()


def _log_file() -> RotatingFileHandler:
    (found,) = (each for each in logging.getLogger().handlers if isinstance(each, RotatingFileHandler))
    return found


def test_a_line_is_an_object_in_utc(lines: Any) -> None:
    """Own and foreign messages come as one JSON object a line with a UTC time, whatever they contain."""
    structlog.get_logger("spikewarden.test").info("export accepted", export="SED-12\nforged line")
    logging.getLogger("other").warning("from a library: %s", "µ")

    own, foreign = lines()
    assert own["event"] == "export accepted"
    assert own["export"] == "SED-12\nforged line"
    assert own["timestamp"].endswith("Z")
    assert (foreign["event"], foreign["level"], foreign["logger"]) == ("from a library: µ", "warning", "other")


def _refuse(password: str) -> None:
    """Fail with a local variable that only a careless traceback would show."""
    local = "".join(["brack", "ish"])
    raise ValueError(f"refused {password} after {len(local)} tries")


@pytest.mark.parametrize("password", ["brine-and-roof", 'quo"te\\back', "µ-brine"])
def test_a_known_secret_is_masked_everywhere(lines: Any, tmp_path: Path, password: str) -> None:
    """In messages, values and tracebacks a secret is replaced; values of variables are not written at all."""
    hide(Secret(password))
    log = structlog.get_logger("spikewarden.test")
    log.info("signing in", text=f"with {password}", detail={"password": password})
    try:
        _refuse(password)
    except ValueError:
        log.exception("failed")

    text = (tmp_path / "log" / LOG_NAME).read_text()
    assert password not in text
    assert json.dumps(password)[1:-1] not in text
    assert text.count(MASK) >= 3
    assert "ValueError" in text
    assert "brackish" not in text


def test_a_log_that_cannot_rotate_goes_on(lines: Any, tmp_path: Path, monkeypatch: Any) -> None:
    """Where the file cannot be renamed, lines go on into the old one."""
    handler = _log_file()
    monkeypatch.setattr(handler, "maxBytes", 10)

    def held(*_: object) -> None:
        raise PermissionError(32, "held")

    monkeypatch.setattr(handler, "rotate", held)
    for number in range(3):
        structlog.get_logger("spikewarden.test").info("line", number=number)

    assert [each["number"] for each in lines()] == [0, 1, 2]


def test_a_log_that_cannot_be_written_stops_nothing(lines: Any, monkeypatch: Any, capsys: Any) -> None:
    """A full disk under the log loses lines and raises nothing."""
    handler = _log_file()

    class Full:
        def write(self, _text: str) -> None:
            raise OSError(28, "No space left on device")

        def flush(self) -> None:
            """Nothing to do."""

        def close(self) -> None:
            """Nothing to do."""

        def tell(self) -> int:
            return 0

        def seek(self, *_: int) -> None:
            """Nothing to do."""

    original = handler.stream
    monkeypatch.setattr(handler, "stream", Full())
    structlog.get_logger("spikewarden.test").info("lost")
    monkeypatch.setattr(handler, "stream", original)
    structlog.get_logger("spikewarden.test").info("kept")

    assert [each["event"] for each in lines()] == ["kept"]
    assert capsys.readouterr().err == ""
