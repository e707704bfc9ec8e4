"""What becomes of an alert for each thing a mail server may do: delivered, kept, said."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from pathlib import Path

pytestmark = pytest.mark.proof

#: Fault, recipients delivered at once, states kept in the queue, what is said.
TABLE = [
    ("refused connection", 0, {"waiting"}, "ConnectionRefusedError"),
    ("421 at MAIL", 0, {"waiting"}, "421"),
    ("451 at DATA", 0, {"waiting"}, "451"),
    ("550 at RCPT", 0, {"refused"}, "550"),
    ("554 at DATA", 0, {"refused"}, "554"),
    ("one of two refused", 1, {"refused"}, "550"),
    ("drop after storing", 2, {"unknown"}, "SMTPServerDisconnected"),
    ("no STARTTLS", 0, {"waiting"}, "STARTTLS"),
    ("bad certificate", 0, {"waiting"}, "CERTIFICATE_VERIFY_FAILED"),
    ("wrong password", 0, {"waiting"}, "535"),
]


@pytest.mark.parametrize(("fault", "delivered", "kept", "said"), TABLE, ids=[row[0] for row in TABLE])
def test_what_a_server_does(
    bench: Any,
    mail_server: Any,
    start_mail_server: Any,
    authority: Any,
    sign_in_as: Any,
    fault: str,
    delivered: int,
    kept: set[str],
    said: str,
) -> None:
    """Nothing is dropped: what is not delivered stays in the queue with the server's words, and goes out afterwards."""
    server = _server_for(fault, mail_server, start_mail_server, authority, sign_in_as)
    bench.mail_to(server, "lead@example", "deputy@example")
    box = server.mailbox
    _break(fault, box, bench.settings["mail"], authority, bench.records.parent)
    bench.export("FL-1.csv", "RIV-17,fail")

    report = bench.once()

    assert sum(len(to) for to, _ in box.received) == delivered
    assert {each["state"] for each in report["undelivered_mails"]} == kept
    assert all(said in each["last_error"] for each in report["undelivered_mails"])
    assert bench.counts() == {"done": 1}
    assert "hunter-of-brine" not in json.dumps(report)
    assert all(b"hunter-of-brine" not in path.read_bytes() for path in bench.records.rglob("*") if path.is_file())
    if kept == {"unknown"}:
        bench.once()
        assert "possible repeat: " in box.received[1][1]


def _server_for(fault: str, plain: Any, start: Any, authority: Any, sign_in_as: Any) -> Any:
    """The server that has the fault; most are faults of the conversation."""
    if fault == "bad certificate":
        return start(tls_context=authority.context)
    if fault == "wrong password":
        sign_in = sign_in_as("bench", "right")
        return start(tls_context=authority.context, authenticator=sign_in, auth_required=True)
    return plain


def _break(fault: str, box: Any, mail: dict[str, Any], authority: Any, folder: Path) -> None:
    """Write the fault into the server's script or the settings."""
    if fault in ("421 at MAIL", "451 at DATA", "554 at DATA"):
        (box.mail if "MAIL" in fault else box.data).append(f"{fault[:3]} not now")
    elif fault in ("550 at RCPT", "one of two refused"):
        addresses = ["lead@example", "deputy@example"]
        box.rcpt |= dict.fromkeys(addresses[: 2 if "RCPT" in fault else 1], "550 unknown")
    elif fault == "refused connection":
        mail["port"] = 1
    elif fault == "drop after storing":
        box.drops = 1
    else:
        mail["security"] = "starttls"
    if fault == "wrong password":
        (folder / "secret").write_text("hunter-of-brine\n")
        mail |= {"ca_file": str(authority.ca_file), "user": "bench", "password_file": str(folder / "secret")}
