"""Power cuts by replay: what one run asked of the disk is recorded, cut at every durable step, and started from.

The recording holds every write, sync, rename and removal of the service and its worker (strace). The model is the
strict one: content survives only once its file was forced to disk, a name only once its folder was; what was written
since then is gone, or torn in the middle, or has survived by luck. From each such state the service is started again
and must reach the final state of the uninterrupted run.
"""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from watcher.ledger import Ledger

#: Of the states that differ, every so many is started from; 1 takes them all.
STRIDE = int(os.environ.get("SPIKEWARDEN_POWER_STRIDE", "2"))
CALLS = "openat,write,pwrite64,fsync,fdatasync,rename,renameat,renameat2,unlink,unlinkat,ftruncate,mkdir,mkdirat"
CALL = re.compile(r"^(?P<pid>\d+)\s+(?P<rest>.*)$")
STRING = re.compile(r'"((?:\\x[0-9a-f]{2})*)"')
HANDLE = re.compile(r"^(?:AT_FDCWD|(\d+))(?:<([^>]*)>)?")

pytestmark = [
    pytest.mark.proof,
    pytest.mark.skipif(shutil.which("strace") is None, reason="calls are recorded with strace"),
]


@dataclass
class _Node:
    """A file: what is forced to disk, and what was written."""

    durable: bytes = b""
    now: bytes = b""


@dataclass
class _Model:
    """A disk that forgets: names and contents, as they are and as they would survive."""

    root: str
    now: dict[str, _Node | None] = field(default_factory=dict)
    durable: dict[str, _Node | None] = field(default_factory=dict)

    def sync_file(self, path: str) -> None:
        node = self.now.get(path)
        if isinstance(node, _Node):
            node.durable = node.now

    def sync_folder(self, path: str) -> None:
        for names, others in ((self.now, self.durable), (self.durable, self.now)):
            for name in [each for each in names if _folder_of(each) == path]:
                if name not in self.now:
                    self.durable.pop(name, None)
                elif others is self.durable:
                    self.durable[name] = self.now[name]

    def survives(self, *, torn: bool) -> dict[str, bytes | None]:
        """What is there after the power comes back; torn: names have survived, and half of what was written."""
        names = self.now if torn else self.durable
        kept: dict[str, bytes | None] = {}
        for name, node in sorted(names.items()):
            parent = _folder_of(name)
            if parent != self.root and parent not in kept:
                continue
            if node is None:
                kept[name] = None
            elif torn and node.now != node.durable:
                pairs = zip(node.now, node.durable, strict=False)
                same = next((i for i, (a, b) in enumerate(pairs) if a != b), min(len(node.now), len(node.durable)))
                kept[name] = node.now[: same + (len(node.now) - same) // 2]
                if len(node.durable) > len(node.now):
                    kept[name] = node.durable
            else:
                kept[name] = node.durable
        return kept


def _folder_of(name: str) -> str:
    return name.rpartition("/")[0]


def _text(escaped: str) -> bytes:
    return bytes.fromhex(escaped.replace("\\x", ""))


def _path(text: str) -> str:
    return _text(text).decode() if text.startswith("\\x") else text


def _calls(trace: Path) -> list[tuple[str, str]]:
    """Pid and call of every line, those that were interrupted by another thread put together again."""
    begun: dict[str, str] = {}
    calls = []
    for line in trace.read_text("ascii", "replace").splitlines():
        pid, rest = CALL.match(line).groups()
        if rest.endswith("<unfinished ...>"):
            begun[pid] = rest.removesuffix("<unfinished ...>").rstrip()
            continue
        if rest.startswith("<..."):
            rest = begun.pop(pid) + rest.partition("resumed>")[2]
        calls.append((pid, rest))
    return calls


def _apply(model: _Model, call: str) -> bool:
    """Do what a call did; returns whether something may have become durable."""
    name, _, arguments = call.partition("(")
    result = call.rpartition("= ")[2]
    if result.startswith(("-1", "?")):
        return False
    texts = [_text(each) for each in STRING.findall(arguments)]
    handle = HANDLE.match(arguments)
    path = _path(handle[2]) if handle and handle[2] else ""
    if name == "openat":
        _open(model, _path(result.partition("<")[2].rpartition(">")[0]), arguments)
    elif name.startswith(("mkdir", "rename", "unlink")):
        inside = [each.decode() for each in texts if each.decode().startswith(f"{model.root}/")]
        if inside:
            _name(model, name, inside)
    elif path.startswith(model.root):
        node = model.now.get(path)
        if name in ("fsync", "fdatasync"):
            (model.sync_file if isinstance(node, _Node) else model.sync_folder)(path)
            return True
        if isinstance(node, _Node):
            _write(node, name, arguments, texts)
    return False


def _open(model: _Model, opened: str, arguments: str) -> None:
    node = model.now.get(opened)
    if "O_CREAT" in arguments and opened.startswith(f"{model.root}/") and opened not in model.now:
        model.now[opened] = _Node()
    elif "O_TRUNC" in arguments and isinstance(node, _Node):
        node.now = b""


def _name(model: _Model, call: str, inside: list[str]) -> None:
    if call.startswith("mkdir"):
        model.now[inside[0]] = None
        return
    node = model.now.pop(inside[0], None)
    if call.startswith("rename"):
        model.now[inside[1]] = node


def _write(node: _Node, call: str, arguments: str, texts: list[bytes]) -> None:
    if call == "ftruncate":
        size = int(arguments.split(",")[1].split(")", maxsplit=1)[0])
        node.now = node.now[:size].ljust(size, b"\0")
        return
    numbers = re.findall(r", (\d+)(?:, (\d+))?\)", arguments)[-1]
    at = int(numbers[1]) if call == "pwrite64" else len(node.now)
    node.now = node.now[:at].ljust(at, b"\0") + texts[-1] + node.now[at + len(texts[-1]) :]


def _lay_out(root: Path, state: dict[str, bytes | None]) -> None:
    for name in ("records", "results"):
        shutil.rmtree(root / name, ignore_errors=True)
    for name, content in sorted(state.items()):
        if content is None:
            Path(name).mkdir()
        else:
            Path(name).write_bytes(content)


def test_a_power_cut_at_any_step_ends_in_the_same_state(bench: Any, mail_server: Any, tmp_path: Path) -> None:
    """Whatever had not reached the disk, the ledger opens, and results and mails are those of an uninterrupted run."""
    bench.mail_to(mail_server)
    bench.export("FL-1.csv", "SED-12,pass", "RIV-17,fail")
    trace = tmp_path.parent / f"{tmp_path.name}.trace"
    process = bench.start("once", SPIKEWARDEN_NO_EVENTS="1")
    process.communicate(timeout=20)
    expected = bench.result_files()
    assert len(expected) == 2
    _lay_out(tmp_path, {})
    command = [sys.executable, *process.args[1:]]
    recorded = subprocess.run(
        ["strace", "-f", "-y", "-xx", "-s", "4000000", "-o", str(trace), "-e", f"trace={CALLS}", *command],
        env=os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])},
        capture_output=True,
        text=True,
        check=False,
        timeout=120,
    )
    if recorded.returncode and "PTRACE" in recorded.stderr:
        pytest.skip("processes may not be traced here")
    assert recorded.returncode == 0, recorded.stderr
    month_masked = {name.partition("/")[2]: content for name, content in expected.items()}

    states: list[dict[str, bytes | None]] = []
    model = _Model(str(tmp_path))
    for _, call in _calls(trace):
        if _apply(model, call):
            for torn in (False, True):
                state = model.survives(torn=torn)
                if state not in states[-2:]:
                    states.append(state)
    assert len(states) > 40

    for number, state in enumerate(states[::STRIDE]):
        _lay_out(tmp_path, state)
        bench.once()
        report = bench.once()
        assert report["undelivered_mails"] == report["undelivered_files"] == [], number
        assert bench.counts() == {"done": 1}, number
        found = {name.partition("/")[2]: content for name, content in bench.result_files().items()}
        assert found == month_masked, number
        with Ledger(bench.records) as ledger:
            assert ledger.broken_at() is None
            assert len(ledger.open_failures()) == 1
            assert ledger._database.rows("PRAGMA integrity_check")[0][0] == "ok"
    print(f"{len(states[::STRIDE])} of {len(states)} states of the disk were started from")
