"""`audit` and `replay` beside a running service: they see what it recorded, and it notices nothing of them."""

from __future__ import annotations

import json
from typing import Any

import pytest


def is_done(laboratory: Any, number: int) -> bool:
    """Tell whether exports and their pages are done and delivered."""
    pages = list(laboratory.folder.glob("results/*/*.html"))
    return laboratory.status().get("counts") == {"done": number} and len(pages) == number


@pytest.mark.proof
def test_audit_and_replay_answer_while_the_service_runs(laboratory: Any, eventually: Any, squeezed: Any) -> None:
    """The story, the whole audit and a replay are right beside a service that goes on; what is altered is found."""
    service = laboratory.start("watch")
    for number in (1, 2):
        laboratory.export(f"FL-{number}.csv", *laboratory.standards(), *laboratory.additions(f"SED-{number}"))
        eventually(lambda number=number: is_done(laboratory, number), "the export is done", 60.0)
    ledger = laboratory.folder / "records" / "ledger.sqlite"
    before = ledger.read_bytes(), ledger.with_name("ledger.sqlite-wal").read_bytes()

    story, everything = laboratory.run("audit", "FL-1.csv"), laboratory.run("audit", "--all")
    again, unknown = laboratory.run("replay", "--last", "5"), laboratory.run("replay", "FL-9.csv")

    assert (ledger.read_bytes(), ledger.with_name("ledger.sqlite-wal").read_bytes()) == before
    assert story.returncode == 0
    assert "FL-1.csv: done, revision 1" in story.stdout
    assert everything.stdout == "Every entry, copy and delivered result file is as it was recorded.\n"
    assert (again.returncode, again.stdout) == (0, "2 computed again, equal to 1e-9.\n")
    assert unknown.returncode == 1
    assert "No result and no export is called 'FL-9.csv'. Name it as in the results folder." in squeezed(unknown.stderr)
    (path,) = laboratory.folder.glob("results/*/FL-2.csv.r1.json")
    record = json.loads(path.read_bytes())
    record["series"][0]["result"]["value"] *= 1.0001
    path.write_text(json.dumps(record))

    altered, replayed = laboratory.run("audit", "--all"), laboratory.run("replay", "FL-2.csv")

    assert (altered.returncode, replayed.returncode) == (1, 1)
    assert "FL-2.csv.r1.json: the result file is missing or not the one" in squeezed(altered.stderr)
    assert "series[0].result.value: recorded" in squeezed(replayed.stderr)
    laboratory.export("FL-3.csv", *laboratory.standards(), *laboratory.additions("SED-3"))
    eventually(lambda: is_done(laboratory, 3), "the service goes on", 60.0)
    assert service.poll() is None
