"""One worker process, with the threads that speak and listen to it.

What it says arrives in a queue, marked with the child that said it, so that nothing a given-up child still says can
be taken for another's answer. When it is started, given up or replaced is decided in `watcher.worker`.
"""

from __future__ import annotations

import contextlib
import os
import queue
import subprocess
import threading
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import structlog

from watcher.frames import FrameBroken, read_frame, write_frame

if TYPE_CHECKING:
    from collections.abc import Sequence

#: Seconds a worker that was told to end may take before it is killed.
GOODBYE_SECONDS = 2.0

_log = structlog.get_logger("spikewarden.worker")


class Stop:
    """What an interruption puts among the answers."""


@dataclass(frozen=True, slots=True)
class Ended:
    """What a child's reader puts among the answers when no more will come."""

    child: Child
    reason: str


@dataclass(frozen=True, slots=True)
class Answer:
    """A message from a child."""

    child: Child
    message: dict[str, Any]


class Child:
    """One worker process with the threads that speak and listen to it.

    Writing has its own thread too: a child that does not read would block the service, which must stop when told.
    """

    def __init__(
        self,
        command: Sequence[str],
        environment: dict[str, str],
        answers: queue.SimpleQueue[Answer | Ended | Stop],
    ) -> None:
        # A session of its own: Ctrl-C at the terminal is for the service, which then ends the worker in order.
        self._process = subprocess.Popen(  # noqa: S603 - the command is ours, none of it comes from an export
            command,
            env=environment,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            start_new_session=os.name != "nt",
        )
        self._answers = answers
        self._requests: queue.SimpleQueue[dict[str, Any] | None] = queue.SimpleQueue()
        self._threads = [
            threading.Thread(target=work, name=f"worker {name}", daemon=True)
            for name, work in (("requests", self._write), ("answers", self._read), ("log", self._listen))
        ]
        for thread in self._threads:
            thread.start()

    @property
    def pid(self) -> int:
        """The process id."""
        return self._process.pid

    def send(self, request: dict[str, Any]) -> None:
        """Hand over a request; never blocks."""
        self._requests.put(request)

    def end(self) -> None:
        """End it politely, then not."""
        self._requests.put(None)
        try:
            self._process.wait(GOODBYE_SECONDS)
        except subprocess.TimeoutExpired:
            self._process.kill()
        self._tidy()

    def let_end(self) -> None:
        """Give a child that closed its output the moment to end by itself: its exit code tells why."""
        with contextlib.suppress(subprocess.TimeoutExpired):
            self._process.wait(GOODBYE_SECONDS)

    def kill(self) -> int:
        """End it at once and return its exit code."""
        if self._process.poll() is None:
            self._process.kill()
        self._requests.put(None)
        code = self._process.wait()
        self._tidy()
        return code

    def _tidy(self) -> None:
        self._process.wait()
        for thread in self._threads:
            thread.join(GOODBYE_SECONDS)

    def _write(self) -> None:
        stream = self._process.stdin
        if stream is None:
            return
        while (request := self._requests.get()) is not None:
            try:
                write_frame(stream, request)  # type: ignore[arg-type]
            except OSError:
                break  # the child has ended; the reader says so
        try:
            stream.close()
        except OSError:
            return  # nothing is lost: what could not be flushed had no reader

    def _read(self) -> None:
        stream = self._process.stdout
        if stream is None:
            return
        reason = "it closed its output"
        with stream:
            try:
                while (message := read_frame(stream)) is not None:  # type: ignore[arg-type]
                    self._answers.put(Answer(self, message))
            except (FrameBroken, OSError) as error:
                reason = str(error)
        self._answers.put(Ended(self, reason))

    def _listen(self) -> None:
        stream = self._process.stderr
        if stream is None:
            return
        with stream:
            for line in stream:
                _log.warning(
                    "worker says",
                    worker=self.pid,
                    text=line.decode(errors="backslashreplace").rstrip()[:2000],
                )
