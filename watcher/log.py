"""The log: one JSON object a line, in UTC, rotated, without secrets; it never stops the work it describes.

Tracebacks are written without the values of variables, since those hold whatever was being read. Nothing here
decides what is logged.
"""

from __future__ import annotations

import json
import logging
from logging.handlers import RotatingFileHandler
from typing import TYPE_CHECKING, Any

import structlog

from watcher.password import MASK, Secret

if TYPE_CHECKING:
    from collections.abc import MutableMapping
    from pathlib import Path

LOG_NAME = "spikewarden.log"
#: Bytes of one file, and how many older ones are kept.
LOG_BYTES = 5 * 1024 * 1024
LOG_FILES = 5

_hidden: list[Secret] = []


def hide(secret: Secret) -> None:
    """Mask this text wherever it would come into the log from now on."""
    if all(known.reveal() != secret.reveal() for known in _hidden):
        _hidden.append(secret)


class _PatientFile(RotatingFileHandler):
    """A log file that goes on in the old one where it cannot be rotated, and stays silent where it cannot write."""

    def doRollover(self) -> None:  # noqa: N802 - the library's name
        try:
            super().doRollover()
        except OSError:
            # Held open by a viewer (Windows) or a full disk: a long log is better than none.
            if self.stream is None:
                self.stream = self._open()

    def handleError(self, record: logging.LogRecord) -> None:  # noqa: N802 - the library's name
        """Drop the line: an alert that goes out unlogged is better than none."""


def set_up_log(records: Path, *, level: int = logging.INFO) -> logging.Handler:
    """Send what structlog and the standard library log to the records folder.

    Returns
    -------
    logging.Handler
        The handler that was added to the root logger; close it to end the log.
    """
    folder = records / "log"
    folder.mkdir(parents=True, exist_ok=True)
    handler = _PatientFile(folder / LOG_NAME, maxBytes=LOG_BYTES, backupCount=LOG_FILES, encoding="utf-8")
    shared: list[Any] = [
        structlog.contextvars.merge_contextvars,
        structlog.stdlib.add_logger_name,
        structlog.stdlib.add_log_level,
        structlog.processors.TimeStamper(fmt="iso", utc=True),
        structlog.processors.ExceptionRenderer(structlog.tracebacks.ExceptionDictTransformer(show_locals=False)),
    ]
    handler.setFormatter(
        structlog.stdlib.ProcessorFormatter(
            foreign_pre_chain=shared,
            processors=[
                structlog.stdlib.ProcessorFormatter.remove_processors_meta,
                structlog.processors.JSONRenderer(default=str, ensure_ascii=True),
                _mask,
            ],
        )
    )
    structlog.configure(
        processors=[*shared, structlog.stdlib.ProcessorFormatter.wrap_for_formatter],
        logger_factory=structlog.stdlib.LoggerFactory(),
        wrapper_class=structlog.stdlib.BoundLogger,
        cache_logger_on_first_use=False,
    )
    root = logging.getLogger()
    root.addHandler(handler)
    root.setLevel(level)
    return handler


def _mask(_logger: object, _method: str, rendered: str | MutableMapping[str, Any]) -> str:
    text = str(rendered)
    for secret in _hidden:
        for shape in (secret.reveal(), json.dumps(secret.reveal())[1:-1]):
            text = text.replace(shape, MASK)
    return text
