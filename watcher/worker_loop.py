"""The worker's side: answer requests one after the other until the service closes the line.

The process bounds itself, since it must not outlive a service that was killed: it ends in the middle of whatever it
does when the line is closed, so that nothing it still writes can meet the files of the next service's worker; an alarm
whose default action ends it where no Python code runs any more; and a limit of memory. It also gives way to other
programs. Nothing here knows what is asked.
"""

from __future__ import annotations

import contextlib
import os
import queue
import signal
import sys
import threading
import traceback
from typing import TYPE_CHECKING, Any

from watcher.frames import FrameBroken, read_frame, write_frame

if TYPE_CHECKING:
    from collections.abc import Callable
    from typing import BinaryIO

DEADLINE_VARIABLE = "SPIKEWARDEN_WORKER_DEADLINE"
MEMORY_VARIABLE = "SPIKEWARDEN_WORKER_MEMORY"
#: Seconds past the deadline at which the worker ends itself; the service is expected to have killed it by then.
GRACE_SECONDS = 5.0
#: How far the worker steps back behind programs of ordinary priority.
NICENESS = 5


def serve(handle: Callable[[dict[str, Any]], dict[str, Any]]) -> None:
    """Answer requests from standard input on standard output until the input ends.

    Parameters
    ----------
    handle
        Request to answer. An exception in it is a defect: the answer is then
        ``{"fate": "bug", "error": …, "traceback": …}``, and the worker goes on.
    """
    _bound_memory()
    stream, answers = _take_over_streams()
    deadline_seconds = float(os.environ.get(DEADLINE_VARIABLE, "0"))
    requests: queue.SimpleQueue[dict[str, Any]] = queue.SimpleQueue()
    threading.Thread(target=_listen, args=(stream, requests), name="requests", daemon=True).start()
    while True:
        request = requests.get()
        _set_alarm(deadline_seconds)
        answer = _answer(handle, request)
        _set_alarm(0.0)
        write_frame(answers, answer)


def _listen(stream: BinaryIO, requests: queue.SimpleQueue[dict[str, Any]]) -> None:
    """Take in requests until the service closes the line or is killed; then end the process, whatever it does."""
    code = 1
    try:
        while (request := read_frame(stream)) is not None:
            requests.put(request)
        code = 0
    except (FrameBroken, OSError) as error:
        print(f"the service cannot be understood: {error}", file=sys.stderr, flush=True)  # noqa: T201 - for its log
    finally:
        os._exit(code)


def _answer(handle: Callable[[dict[str, Any]], dict[str, Any]], request: dict[str, Any]) -> dict[str, Any]:
    try:
        return handle(request)
    except MemoryError:
        raise  # the limit was reached: what is left of this process is not to be trusted
    except Exception as error:  # noqa: BLE001 - the worker's edge: the service decides what a defect means
        where = traceback.extract_tb(error.__traceback__)[-1]
        return {
            "fate": "bug",
            "error": f"{type(error).__name__} in {where.name} (line {where.lineno})",
            "traceback": "".join(traceback.format_exception(error)),
        }


def _set_alarm(deadline_seconds: float) -> None:
    """Let the system end this process after the deadline; no Python code has to run for that."""
    if not hasattr(signal, "setitimer"):
        return
    signal.signal(signal.SIGALRM, signal.SIG_DFL)
    signal.setitimer(signal.ITIMER_REAL, deadline_seconds + GRACE_SECONDS if deadline_seconds else 0.0)


def _bound_memory() -> None:
    if os.name == "nt":
        return
    import resource  # noqa: PLC0415 - there is none on Windows

    limit = int(os.environ.get(MEMORY_VARIABLE, "0"))
    if limit:
        resource.setrlimit(resource.RLIMIT_AS, (limit, limit))
    with contextlib.suppress(OSError):
        os.nice(NICENESS)


def _take_over_streams() -> tuple[BinaryIO, BinaryIO]:
    """Keep the two streams for messages; what any library prints goes to standard error instead."""
    requests = os.fdopen(os.dup(0), "rb")
    answers = os.fdopen(os.dup(1), "wb")
    null = os.open(os.devnull, os.O_RDONLY)
    os.dup2(null, 0)
    os.close(null)
    os.dup2(2, 1)
    sys.stdout = sys.stderr
    return requests, answers
