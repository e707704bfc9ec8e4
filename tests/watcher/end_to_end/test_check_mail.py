"""`check --mail` sends one test mail by the way that alerts take, and says what the server made of it."""

from __future__ import annotations

import json
from typing import Any

from click.testing import CliRunner

from watcher.commands import main


def ask(laboratory: Any, *arguments: str) -> Any:
    """Run a command of the real command line in this process."""
    return CliRunner().invoke(main, [*arguments, "--config", str(laboratory.folder / "config.yaml")])


def test_a_test_mail_arrives_and_is_told(laboratory: Any, mail_server: Any) -> None:
    """The mail says that it is a test, everybody is named with the outcome, and nothing is written."""
    laboratory.mail_to(mail_server.port)
    before = laboratory.contents()

    done = ask(laboratory, "check", "--mail")

    assert done.exit_code == 0, done.stderr
    assert "lead@example: delivered" in done.stdout
    ((recipients, text),) = mail_server.mailbox.received
    assert recipients == ("lead@example",)
    assert "Subject: TEST " in text
    assert laboratory.contents() == before


def test_a_server_that_refuses_is_told(laboratory: Any, unused_port: int) -> None:
    """Where nobody answers, the address, the reason and what to correct are named; the code is 2."""
    laboratory.mail_to(unused_port)

    done = ask(laboratory, "check", "--mail")

    assert done.exit_code == 2
    assert "lead@example: waiting" in done.stdout
    assert "Correct mail.server" in " ".join(done.stderr.split())


def test_no_mail_is_sent_where_none_is_wanted(laboratory: Any) -> None:
    """With mail: none a test mail has nowhere to go, and that is said."""
    done = ask(laboratory, "check", "--mail")

    assert done.exit_code == 2
    assert "mail: none" in done.stderr


def test_once_tells_machines_what_it_did(laboratory: Any) -> None:
    """`once --json` names exports with their series, what is undone, and the exit code that it ends with."""
    laboratory.export("FL-1.csv", *laboratory.standards(), *laboratory.additions("RIV-17", recovery=0.6))

    done = laboratory.run("once", "--json")

    told = json.loads(done.stdout)
    assert (done.returncode, told["exit"], told["undone"]) == (1, 1, [])
    (export,) = told["exports"]
    assert (export["name"], export["state"], export["counts"]) == ("FL-1.csv", "done", {"fail": 1})
    assert [(one["sample"], one["verdict"]) for one in export["series"]] == [("RIV-17", "fail")]
