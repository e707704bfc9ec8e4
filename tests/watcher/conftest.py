"""What the watcher's tests share: a clock that is set, a mail server with a script, a service in its own process."""

from __future__ import annotations

import ipaddress
import json
import os
import queue
import ssl
import subprocess
import sys
import time
from collections import deque
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from aiosmtpd.controller import Controller
from aiosmtpd.smtp import AuthResult
from cryptography import x509
from cryptography.hazmat.primitives import hashes, serialization
from cryptography.hazmat.primitives.asymmetric import ec
from cryptography.x509.oid import NameOID

from watcher.ledger import Ledger
from watcher.ledger_rows import Fate, QueuedMail

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

#: Set in the environment: services of these tests find exports by looking alone.
WITHOUT_EVENTS = "SPIKEWARDEN_TESTS_WITHOUT_EVENTS"
HERE = Path(__file__).parent
STUB_WORKER = HERE / "stub_worker.py"
SERVICE_PROCESS = HERE / "service_process.py"
#: Far above what anything takes here; only a failing test waits so long.
DEADLINE_SECONDS = 20.0


@pytest.fixture
def eventually() -> Callable[[Callable[[], Any], str], Any]:
    """Wait until a condition holds and return its value; fail with a sentence at the deadline."""
    pause = queue.SimpleQueue[None]()

    def wait(condition: Callable[[], Any], sentence: str, seconds: float = DEADLINE_SECONDS) -> Any:
        until = time.monotonic() + seconds
        while time.monotonic() < until:
            if value := condition():
                return value
            try:
                pause.get(timeout=0.01)
            except queue.Empty:
                continue
        pytest.fail(f"did not happen within {seconds:g} s: {sentence}")

    return wait


class _SetClock:
    """A clock that stands still until it is moved."""

    def __init__(self) -> None:
        self.wall = datetime(2026, 12, 1, 7, 30, tzinfo=UTC)
        self.seconds = 1000.0

    def now(self) -> datetime:
        return self.wall

    def monotonic(self) -> float:
        return self.seconds

    def advance(self, seconds: float) -> None:
        self.wall += timedelta(seconds=seconds)
        self.seconds += seconds


@pytest.fixture
def clock() -> _SetClock:
    """A clock that stands at a Tuesday morning."""
    return _SetClock()


@pytest.fixture
def ledger(tmp_path: Path, clock: _SetClock) -> Iterator[Ledger]:
    """An open ledger with settings number 1 adopted."""
    with Ledger(tmp_path / "records", clock) as opened:
        opened.adopt_settings('{"laboratory": "Skerry Point Water Laboratory"}', "lead", "first")
        yield opened


@pytest.fixture
def make_mail(clock: _SetClock) -> Callable[..., QueuedMail]:
    """Make a queued mail with a message identity of its own."""
    count = iter(range(1, 1000))

    def make(kind: str = "fail", *keys: str, after: float = 0, to: tuple[str, ...] = ("lead@example",)) -> QueuedMail:
        return QueuedMail(
            kind=kind,
            subject=f"{kind.upper()} RIV-17 Zn",
            body="DO prepare RIV-17 again\n",
            keys=keys,
            recipients=to,
            message_id=f"<{next(count)}@example>",
            due_at=(clock.now() + timedelta(seconds=after)).strftime("%Y-%m-%dT%H:%M:%S.%fZ"),
        )

    return make


@pytest.fixture
def done() -> Callable[..., Fate]:
    """Make the fate of an export that was evaluated under settings 1."""

    def make(**facts: Any) -> Fate:
        return Fate(**{"state": "done", "settings_number": 1, "layout": "flame bench"} | facts)

    return make


# -- a mail server with a script -----------------------------------------------------------------------------------


@dataclass
class _Mailbox:
    """What the server received, and what it answers; an empty script answers yes to everything."""

    received: list[tuple[tuple[str, ...], str]] = field(default_factory=list)
    mail: deque[str] = field(default_factory=deque)
    rcpt: dict[str, str] = field(default_factory=dict)
    data: deque[str] = field(default_factory=deque)
    #: Store the message, then drop the line without an answer, so many times.
    drops: int = 0
    #: Called after storing and before answering.
    before_answer: Callable[[], None] | None = None

    async def handle_MAIL(self, _server: Any, _session: Any, envelope: Any, address: str, options: Any) -> str:  # noqa: N802 - the library calls it so
        if self.mail:
            return self.mail.popleft()
        envelope.mail_from = address
        envelope.mail_options.extend(options)
        return "250 OK"

    async def handle_RCPT(self, _server: Any, _session: Any, envelope: Any, address: str, options: Any) -> str:  # noqa: N802 - the library calls it so
        if address in self.rcpt:
            return self.rcpt[address]
        envelope.rcpt_tos.append(address)
        envelope.rcpt_options.extend(options)
        return "250 OK"

    async def handle_DATA(self, server: Any, _session: Any, envelope: Any) -> str:  # noqa: N802 - the library calls it so
        if self.data:
            return self.data.popleft()
        self.received.append((tuple(envelope.rcpt_tos), envelope.content.decode()))
        if self.before_answer is not None:
            self.before_answer()
        if self.drops:
            self.drops -= 1
            server.transport.abort()
        return "250 stored"


@dataclass
class MailServer:
    """A running server."""

    mailbox: _Mailbox
    host: str
    port: int


class OnAnyPort(Controller):
    """A controller that listens on whatever port is free."""

    def _trigger_server(self) -> None:
        assert self.server is not None
        self.port = self.server.sockets[0].getsockname()[1]
        super()._trigger_server()


@pytest.fixture
def start_mail_server() -> Iterator[Callable[..., MailServer]]:
    """Start mail servers with any of the controller's options."""
    running: list[Controller] = []

    def start(**options: Any) -> MailServer:
        mailbox = _Mailbox()
        controller = OnAnyPort(mailbox, hostname="127.0.0.1", port=0, **options)
        controller.start()
        running.append(controller)
        return MailServer(mailbox, "127.0.0.1", controller.port)

    yield start
    for controller in running:
        controller.stop()


@pytest.fixture
def mail_server(start_mail_server: Callable[..., MailServer]) -> MailServer:
    """A server that says yes to everything until its script says otherwise, without TLS."""
    return start_mail_server()


@pytest.fixture(scope="module")
def shared_mail_server() -> Iterator[MailServer]:
    """A server for a whole file of tests."""
    mailbox = _Mailbox()
    controller = OnAnyPort(mailbox, hostname="127.0.0.1", port=0)
    controller.start()
    yield MailServer(mailbox, "127.0.0.1", controller.port)
    controller.stop()


@dataclass(frozen=True)
class Authority:
    """A certificate authority of the tests' own: its certificate, and a server context for 127.0.0.1."""

    ca_file: Path
    context: ssl.SSLContext


@pytest.fixture(scope="session")
def authority(tmp_path_factory: pytest.TempPathFactory) -> Authority:
    """Make a certificate authority and a server certificate for 127.0.0.1."""
    folder = tmp_path_factory.mktemp("authority")
    now = datetime.now(UTC)

    def name(text: str) -> x509.Name:
        return x509.Name([x509.NameAttribute(NameOID.COMMON_NAME, text)])

    def usage(*, signs_certificates: bool) -> x509.KeyUsage:
        return x509.KeyUsage(
            digital_signature=not signs_certificates,
            key_cert_sign=signs_certificates,
            crl_sign=signs_certificates,
            content_commitment=False,
            key_encipherment=False,
            data_encipherment=False,
            key_agreement=False,
            encipher_only=False,
            decipher_only=False,
        )

    ca_key, key = ec.generate_private_key(ec.SECP256R1()), ec.generate_private_key(ec.SECP256R1())

    def certificate(subject: str, public_key: Any, *, ca: bool) -> x509.CertificateBuilder:
        return (
            x509.CertificateBuilder()
            .subject_name(name(subject))
            .issuer_name(name("Skerry Point test authority"))
            .public_key(public_key)
            .serial_number(x509.random_serial_number())
            .not_valid_before(now - timedelta(days=1))
            .not_valid_after(now + timedelta(days=1))
            .add_extension(x509.BasicConstraints(ca=ca, path_length=None), critical=True)
            # Python 3.13 and newer refuse certificates without these (RFC 5280)
            .add_extension(x509.SubjectKeyIdentifier.from_public_key(public_key), critical=False)
            .add_extension(x509.AuthorityKeyIdentifier.from_issuer_public_key(ca_key.public_key()), critical=False)
            .add_extension(usage(signs_certificates=ca), critical=True)
        )

    ca = certificate("Skerry Point test authority", ca_key.public_key(), ca=True).sign(ca_key, hashes.SHA256())
    leaf = (
        certificate("127.0.0.1", key.public_key(), ca=False)
        .add_extension(x509.SubjectAlternativeName([x509.IPAddress(ipaddress.ip_address("127.0.0.1"))]), critical=False)
        .sign(ca_key, hashes.SHA256())
    )
    pem = serialization.Encoding.PEM
    (folder / "ca.pem").write_bytes(ca.public_bytes(pem))
    (folder / "server.pem").write_bytes(
        key.private_bytes(pem, serialization.PrivateFormat.PKCS8, serialization.NoEncryption()) + leaf.public_bytes(pem)
    )
    context = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    context.load_cert_chain(folder / "server.pem")
    return Authority(folder / "ca.pem", context)


@pytest.fixture
def sign_in_as() -> Callable[[str, str], Callable[..., AuthResult]]:
    """Make authenticators that know one user."""

    def make(user: str, password: str) -> Callable[..., AuthResult]:
        def check(_server: Any, _session: Any, _envelope: Any, _mechanism: str, data: Any) -> AuthResult:
            known = (data.login, data.password) == (user.encode(), password.encode())
            return AuthResult(success=known, handled=False)

        return check

    return make


# -- a service in its own process -----------------------------------------------------------------------------------


class _Bench:
    """A place with exports, results and records, and the real service over it with the stub worker."""

    stub_worker = STUB_WORKER

    def __init__(self, folder: Path) -> None:
        self.exports = folder / "exports"
        self.results = folder / "results"
        self.records = folder / "records"
        self.exports.mkdir()
        self.settings: dict[str, Any] = {
            "laboratory": "Skerry Point Water Laboratory",
            "exports": [str(self.exports)],
            "results": str(self.results),
            "records": str(self.records),
            "settle_seconds": 0.05,
            "scan_seconds": 0.2,
            "deadline_seconds": 20.0,
            "reserve_bytes": 0,
        }
        self.environment = {"SPIKEWARDEN_NO_EVENTS": "1"} if os.environ.get(WITHOUT_EVENTS) else {}
        self.processes: list[subprocess.Popen[str]] = []

    def mail_to(self, server: MailServer, *to: str) -> None:
        self.settings["mail"] = {
            "server": server.host,
            "port": server.port,
            "security": "none",
            "sender": "bench@example",
            "to": list(to or ("lead@example",)),
        }

    def export(self, name: str, *lines: str) -> Path:
        """Put an export into the folder the way careful programs do: under another name first."""
        path = self.exports / name
        temporary = path.with_name(f".{name}")
        temporary.write_text("".join(f"{line}\n" for line in lines))
        return temporary.replace(path)

    def start(self, mode: str = "run", body: str = "{}", **environment: str) -> subprocess.Popen[str]:
        """Start the service; ``run`` or ``once``, over settings whose text is `body`."""
        process = subprocess.Popen(
            [sys.executable, str(SERVICE_PROCESS), mode, json.dumps(self.settings), body],
            env=os.environ | {"PYTHONPATH": str(HERE.parent.parent)} | self.environment | environment,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        self.processes.append(process)
        return process

    def once(self, body: str = "{}", **environment: str) -> dict[str, Any]:
        """Run `once` to its end and return its report."""
        process = self.start("once", body, **environment)
        out, err = process.communicate(timeout=DEADLINE_SECONDS)
        assert process.returncode == 0, err
        return json.loads(out)

    def status(self) -> dict[str, Any]:
        try:
            return json.loads((self.records / "status.json").read_text())
        except FileNotFoundError:
            return {}

    def counts(self) -> dict[str, int]:
        return self.status().get("counts", {})

    def delivered(self) -> list[str]:
        """Names of result files that have their name; pages and those still being written are left out."""
        found = (path.name for path in self.results.rglob("*.r*.*"))
        return [name for name in found if not name.startswith(".") and not name.endswith(".html")]

    def result_files(self) -> dict[str, bytes]:
        """Every file under the results folder but pages, temporary ones included."""
        found = (path for path in self.results.rglob("*") if path.is_file() and not _is_view(path))
        return {str(path.relative_to(self.results)): path.read_bytes() for path in found}

    def pages(self) -> dict[str, bytes]:
        """The pages of exports."""
        return {path.name: path.read_bytes() for path in self.results.rglob("*.r*.html") if path.name[0] != "."}

    def stop(self, process: subprocess.Popen[str]) -> int:
        process.terminate()
        process.communicate(timeout=DEADLINE_SECONDS)
        return process.returncode


def _is_view(path: Path) -> bool:
    """Tell whether a file is a page or the list of exports, finished or not."""
    return ".html" in path.name or path.read_bytes().startswith((b"<!DOCTYPE html", b'{"of": '))


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[_Bench]:
    """A bench whose processes end with the test."""
    made = _Bench(tmp_path)
    yield made
    for process in made.processes:
        if process.poll() is None:
            process.kill()
        process.communicate(timeout=DEADLINE_SECONDS)
