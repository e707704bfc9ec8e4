"""The worker process: asked, watched, replaced, interrupted, retired."""

from __future__ import annotations

import subprocess
import sys
import threading
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from watcher.worker import Worker, WorkerDied, WorkerLate, WorkerStopped, WorkerUnfit

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

REPOSITORY = Path(__file__).parent.parent.parent

SCRIPT = """
import os, re, signal, sys, threading
sys.path.insert(0, {repository!r})
from watcher.worker_loop import serve

def handle(request):
    match request["do"]:
        case "pid":
            return {{"pid": os.getpid(), "threads": os.environ["OMP_NUM_THREADS"], "nice": os.nice(0)}}
        case "print":
            print("a stray line")
            os.write(1, b"and raw bytes")
            return {{"ok": True}}
        case "exit":
            os._exit(3)
        case "hang":
            threading.Event().wait(600)
        case "seize":
            re.match(r"^(\\w+\\s?)*$", "SED" * 30 + "!")  # never returns, and lets no other thread run
        case "memory":
            return {{"bytes": len(bytearray(10**10))}}
        case "echo":
            return {{"echo": request["text"]}}
        case "adopt":
            return {{"ok": request["good"]}}
        case "kill parent":
            os.kill(os.getppid(), signal.SIGKILL)
    raise LookupError("no such wish")

serve(handle)
"""


@pytest.fixture
def make_worker(tmp_path: Path) -> Iterator[Callable[..., Worker]]:
    """Make workers over a small script; they end with the test."""
    script = tmp_path / "little_worker.py"
    script.write_text(SCRIPT.format(repository=str(REPOSITORY)))
    made: list[Worker] = []

    def make(**options: Any) -> Worker:
        worker = Worker([sys.executable, str(script)], **({"deadline_seconds": 20.0} | options))
        made.append(worker)
        return worker

    yield make
    for worker in made:
        worker.close()


def test_one_process_answers_many_requests(make_worker: Any) -> None:
    """The same child answers until there is a reason to end it; it has one thread and gives way to others."""
    worker = make_worker()
    first, second = worker.ask({"do": "pid"}), worker.ask({"do": "pid"})

    assert first == second
    assert first["pid"] == worker.pid
    assert first["threads"] == "1"
    assert first["nice"] >= 5


def test_what_is_printed_disturbs_no_answer(make_worker: Any) -> None:
    """Lines that a library prints do not get among the messages."""
    worker = make_worker()

    assert worker.ask({"do": "print"}) == {"ok": True}
    assert worker.ask({"do": "echo", "text": "µg/L ↯ " * 50_000}) == {"echo": "µg/L ↯ " * 50_000}


def test_a_defect_is_an_answer(make_worker: Any) -> None:
    """An exception in the handler comes back with its traceback, and the child goes on."""
    worker = make_worker()
    answer = worker.ask({"do": "dance"})

    assert answer["fate"] == "bug"
    assert answer["error"].startswith("LookupError in handle (line ")
    assert "LookupError: no such wish" in answer["traceback"]
    assert worker.ask({"do": "echo", "text": "still here"}) == {"echo": "still here"}


def test_a_child_that_dies_is_named_and_replaced(make_worker: Any) -> None:
    """The exit code is told, and the next request has a new child."""
    worker = make_worker()
    before = worker.ask({"do": "pid"})["pid"]

    with pytest.raises(WorkerDied, match="ended during the evaluation: it closed its output, exit code 3"):
        worker.ask({"do": "exit"})

    assert worker.ask({"do": "pid"})["pid"] != before


def test_a_child_that_is_late_is_killed_and_replaced(make_worker: Any) -> None:
    """No answer by the deadline ends the child; nothing of it is left to answer later."""
    worker = make_worker(deadline_seconds=0.5)

    with pytest.raises(WorkerLate, match=r"did not end within 0\.5 s"):
        worker.ask({"do": "hang"})

    assert worker.pid is None
    assert worker.ask({"do": "echo", "text": "new"}) == {"echo": "new"}


def test_a_child_over_its_memory_dies_alone(make_worker: Any) -> None:
    """A request that needs more memory than is allowed ends the child, not this process."""
    worker = make_worker(memory_bytes=1024 * 1024 * 1024)

    with pytest.raises(WorkerDied, match="exit code 1"):
        worker.ask({"do": "memory"})


def test_an_interrupt_ends_a_request_at_once(make_worker: Any) -> None:
    """Interrupted from elsewhere, a request ends long before its deadline, and no later one begins."""
    worker = make_worker()
    worker.ask({"do": "pid"})
    timer = threading.Timer(0.05, worker.interrupt)
    timer.start()
    begun = time.monotonic()

    with pytest.raises(WorkerStopped, match="repeated at the next start"):
        worker.ask({"do": "hang"})

    assert time.monotonic() - begun < 5.0
    timer.join()
    with pytest.raises(WorkerStopped):
        worker.ask({"do": "pid"})
    assert worker.pid is None


def test_every_child_is_prepared_first(make_worker: Any) -> None:
    """A new child is given its settings before any request; one that does not take them is unfit."""
    worker = make_worker()
    worker.on_start = [{"do": "adopt", "good": True}]
    assert worker.ask({"do": "echo", "text": "a"}) == {"echo": "a"}

    worker.on_start = [{"do": "adopt", "good": False}]
    worker.restart()

    with pytest.raises(WorkerUnfit, match=r"it did not take in its settings: \{'ok': False\}\. Exports are taken in"):
        worker.ask({"do": "echo", "text": "b"})


@pytest.mark.parametrize("command", [["/no/such/program"], [sys.executable, "-c", "raise SystemExit(4)"]])
def test_a_command_that_does_not_work_blames_no_request(command: list[str]) -> None:
    """A child that cannot be started or ends before it is prepared is unfit, which costs no export an attempt."""
    worker = Worker(command, deadline_seconds=20.0)
    worker.on_start = [{"do": "adopt"}]

    with pytest.raises(WorkerUnfit, match=r"does not start|exit code 4"):
        worker.ask({"do": "pid"})


def test_an_idle_child_is_retired(make_worker: Any, clock: Any) -> None:
    """After its idle time, and not before, the child ends; the next request starts another."""
    worker = make_worker(idle_seconds=60.0, clock=clock)
    before = worker.ask({"do": "pid"})["pid"]
    clock.advance(59.0)
    assert not worker.retire_if_idle()

    clock.advance(1.0)

    assert worker.retire_if_idle()
    assert not worker.retire_if_idle()
    assert worker.ask({"do": "pid"})["pid"] != before


@pytest.mark.parametrize(("wish", "alarmed"), [("hang", False), ("seize", True)])
def test_a_worker_does_not_outlive_its_service(tmp_path: Path, eventually: Any, wish: str, alarmed: bool) -> None:
    """A child whose service is killed ends in the middle of its work; where no code runs any more, by its alarm."""
    script = tmp_path / "little_worker.py"
    text = SCRIPT.format(repository=str(REPOSITORY))
    script.write_text(text.replace("serve(handle)", ALARMED) if alarmed else text)
    service = (
        f"import sys; sys.path.insert(0, {str(REPOSITORY)!r})\n"
        "from watcher.worker import Worker\n"
        f"worker = Worker([sys.executable, {str(script)!r}], deadline_seconds=60.0)\n"
        "print(worker.ask({'do': 'pid'})['pid'], flush=True)\n"
        f"worker.ask({{'do': {wish!r}}})\n"
    )
    process = subprocess.Popen([sys.executable, "-c", service], stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    pid = int(process.stdout.readline())
    process.kill()
    process.communicate(timeout=20)

    eventually(lambda: not _is_alive(pid), "the orphan ends")


#: The same loop with its alarm a moment away instead of a minute.
ALARMED = """
from watcher import worker_loop
worker_loop.GRACE_SECONDS = 0.3 - 60.0
serve(handle)
"""


def _is_alive(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()[0] != "Z"
    except FileNotFoundError:
        return False
