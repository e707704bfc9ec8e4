"""The service's side of the worker: a process that computes, is watched, and is replaced when it dies or hangs.

The worker is started when there is something to ask, prepared with the `on_start` requests, and retired after an
idle time, since only a process that ends gives its memory back. Nothing here knows what is asked.
"""

from __future__ import annotations

import os
import queue
import sys
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from watcher import kill_points
from watcher.child import Answer, Child, Ended, Stop
from watcher.clock import SystemClock
from watcher.errors import WatcherError
from watcher.worker_loop import DEADLINE_VARIABLE, MEMORY_VARIABLE

if TYPE_CHECKING:
    from collections.abc import Sequence

    from watcher.clock import Clock

#: The command of the worker that evaluates exports.
EVALUATION = (sys.executable, "-m", "watcher.evaluation")
#: Numerical libraries start a thread for each core unless told otherwise; the instrument's program needs those.
ONE_THREAD = dict.fromkeys(("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "NUMEXPR_NUM_THREADS"), "1")


class WorkerFailed(WatcherError):
    """Base of what costs an export an attempt: the worker died or was too late while the service lived."""


@dataclass(eq=False)
class WorkerDied(WorkerFailed):
    """The worker ended, or spoke nonsense, in the middle of a request."""

    reason: str

    def __str__(self) -> str:
        return f"the worker process ended during the evaluation: {self.reason}"


@dataclass(eq=False)
class WorkerLate(WorkerFailed):
    """The worker gave no answer in time and was killed."""

    deadline_seconds: float

    def __str__(self) -> str:
        return f"the evaluation did not end within {self.deadline_seconds:g} s and was stopped"


@dataclass(eq=False)
class WorkerUnfit(WatcherError):
    """No worker can be made ready; no export is to blame."""

    reason: str

    def __str__(self) -> str:
        return (
            f"No worker process can be made ready to evaluate: {self.reason}. "
            "Exports are taken in and wait. See the log; `check` reads the settings the same way."
        )


class WorkerStopped(WatcherError):
    """The service itself is stopping; the request was dropped and costs no attempt."""

    def __str__(self) -> str:
        return "the service is stopping, the evaluation was dropped and is repeated at the next start"


class Worker:
    """At most one worker process; asked by one thread, interrupted from anywhere.

    Parameters
    ----------
    command
        What to start.
    deadline_seconds
        The longest an answer may take, starting the worker included.
    memory_bytes
        Its limit of memory (address space; not on Windows).
    idle_seconds
        After how long without a question `retire_if_idle` ends it.
    clock
        For intervals.
    """

    def __init__(
        self,
        command: Sequence[str] = EVALUATION,
        *,
        deadline_seconds: float = 120.0,
        memory_bytes: int = 2048 * 1024 * 1024,
        idle_seconds: float = 300.0,
        clock: Clock | None = None,
    ) -> None:
        self.on_start: list[dict[str, Any]] = []
        self._command = tuple(command)
        self._deadline_seconds = deadline_seconds
        self._memory_bytes = memory_bytes
        self._idle_seconds = idle_seconds
        self._clock = clock or SystemClock()
        self._answers: queue.SimpleQueue[Answer | Ended | Stop] = queue.SimpleQueue()
        self._child: Child | None = None
        self._last_asked = 0.0
        self._stopping = False

    @property
    def pid(self) -> int | None:
        """The worker's process id while there is one."""
        return None if self._child is None else self._child.pid

    def ask(self, request: dict[str, Any]) -> dict[str, Any]:
        """Send a request and wait for its answer, starting a worker if there is none.

        Raises
        ------
        WorkerDied, WorkerLate
            This request's attempt failed; the next one gets a new worker.
        WorkerUnfit
            No worker could be started and prepared.
        WorkerStopped
            `interrupt` was called.
        """
        child = self._child or self._start()
        try:
            return self._exchange(child, request)
        finally:
            self._last_asked = self._clock.monotonic()

    def interrupt(self) -> None:
        """End the request under way and refuse later ones; safe to call from a signal handler."""
        self._stopping = True
        self._answers.put(Stop())

    def retire_if_idle(self) -> bool:
        """End a worker that was not asked for a while; returns whether one was ended."""
        if self._child is None or self._clock.monotonic() - self._last_asked < self._idle_seconds:
            return False
        self.close()
        return True

    def restart(self) -> None:
        """End the worker, so that the next request starts one with the present `on_start`."""
        self.close()

    def close(self) -> None:
        """End the worker: politely, then not."""
        child, self._child = self._child, None
        if child is not None:
            child.end()

    def _start(self) -> Child:
        environment = os.environ | ONE_THREAD
        environment |= {
            DEADLINE_VARIABLE: str(self._deadline_seconds),
            MEMORY_VARIABLE: str(self._memory_bytes),
        }
        if kill_points.VARIABLE in environment:
            environment[kill_points.VARIABLE] = kill_points.of_the_worker(environment[kill_points.VARIABLE])
        try:
            child = Child(self._command, environment, self._answers)
        except OSError as error:
            raise WorkerUnfit(f"{self._command[0]} does not start ({error})") from error
        self._child = child
        for request in self.on_start:
            self._prepare(child, request)
        return child

    def _prepare(self, child: Child, request: dict[str, Any]) -> None:
        try:
            answer = self._exchange(child, request)
        except WorkerFailed as error:
            raise WorkerUnfit(str(error)) from error
        if answer.get("ok") is not True:
            self._kill()
            detail = answer.get("traceback") or answer.get("problem") or answer
            raise WorkerUnfit(f"it did not take in its settings: {detail}")

    def _exchange(self, child: Child, request: dict[str, Any]) -> dict[str, Any]:
        if self._stopping:
            self._kill()
            raise WorkerStopped
        child.send(request)
        until = self._clock.monotonic() + self._deadline_seconds
        while True:
            try:
                got = self._answers.get(timeout=max(until - self._clock.monotonic(), 0.0))
            except queue.Empty:
                self._kill()
                raise WorkerLate(self._deadline_seconds) from None
            match got:
                case Stop():
                    self._kill()
                    raise WorkerStopped
                case Answer(child=sender, message=message) if sender is child:
                    return message
                case Ended(child=sender, reason=reason) if sender is child:
                    child.let_end()
                    code = self._kill()
                    raise WorkerDied(f"{reason}, {_how_it_ended(code)}")
                case _:  # from a child that was given up before
                    continue

    def _kill(self) -> int | None:
        child, self._child = self._child, None
        return None if child is None else child.kill()


def _how_it_ended(code: int | None) -> str:
    if code is None:
        return "without an exit code"
    return f"ended by signal {-code}" if code < 0 else f"exit code {code}"
