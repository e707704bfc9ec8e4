"""A worker for tests: an export is lines of ``sample,verdict``, and some words in it make the worker misbehave."""

from __future__ import annotations

import hashlib
import json
import os
import re
import sys
from collections import Counter
from pathlib import Path
from typing import Any

from watcher.disk import Disk
from watcher.names import safe_name
from watcher.worker_loop import serve


def _handle(request: dict[str, Any]) -> dict[str, Any]:
    if request["do"] == "adopt":
        if request["snapshot"].get("broken"):
            raise ValueError("the snapshot is broken")
        return {"ok": True}
    if request["do"] == "page":
        return _page(request)
    text = Path(request["copy"]).read_text()
    return _misbehave(text) or _wait(text, request) or _evaluate(text, request)


def _page(request: dict[str, Any]) -> dict[str, Any]:
    """Draw a page as plain as the exports are."""
    found = [path for path in map(Path, request["records"]) if path.is_file()]
    if not found:
        return {"page": None}
    record = found[0].read_text()
    _misbehave("die" if "ends the page" in record else "defect" if "spoils the page" in record else "")
    content = json.dumps({"of": request["sha256"], "newer": request["newer"]}).encode()
    staged = Path(request["staging"]) / f"{request['sha256'][:16]}-{Path(request['target']).name}"
    Disk().atomic_write(staged, content, "stage-page")
    return {"page": {"target": request["target"], "staged": str(staged), "sha256": hashlib.sha256(content).hexdigest()}}


def _misbehave(text: str) -> dict[str, Any] | None:
    if "hang" in text:
        re.match(r"^(\w+\s?)*$", "SED" * 30 + "!")  # never returns, and holds on to everything
    if "die" in text:
        print("out of flasks", file=sys.stderr, flush=True)
        os._exit(7)
    if "defect" in text:
        raise ZeroDivisionError("no blank")
    if "nonsense" in text:
        return {"fate": "perhaps"}
    if "refuse" in text:
        return {"fate": "refused", "problem": "line 1: a row without sample ID"}
    if "foreign" in text:
        return {"fate": "unclaimed", "problem": None}
    return None


def _wait(text: str, request: dict[str, Any]) -> dict[str, Any] | None:
    unfinished = "measuring" in text and "End of log" not in text
    return {"fate": "waiting"} if unfinished and not request["final"] else None


def _evaluate(text: str, request: dict[str, Any]) -> dict[str, Any]:
    rows = [line.split(",") for line in text.splitlines() if "," in line]
    name, revision = request["name"], request["revision"]
    stem = f"{safe_name(name)}.r{revision}"
    record = {
        "name": name,
        "revision": revision,
        "rows": rows,
        "alerted": request["alerted"],
        "final": request["final"],
    }
    contents = {f"{stem}.csv": [text.encode()], f"{stem}.json": [json.dumps(record, sort_keys=True).encode()]}
    staging = Path(request["staging"])
    Disk().write_all(staging, contents, "stage")
    return {
        "fate": "done",
        "layout": "flame bench",
        "files": [
            {
                "target": f"2026-12/{each}",
                "staged": str(staging / each),
                "sha256": hashlib.sha256(b"".join(content)).hexdigest(),
            }
            for each, content in contents.items()
        ],
        "mails": [_mail(name, row[0], row[1]) for row in rows if row[1] in ("fail", "incomplete")],
        "series": [
            {
                "sample": row[0],
                "analyte": "Zn",
                "channel": "",
                "attempt": 1,
                "verdict": row[1],
                "value": 1.5,
                "unit": "mg/L",
            }
            for row in rows
        ],
        "verdicts": dict(Counter(row[1] for row in rows)),
        "problem": None,
        "problems": [],
    }


def _mail(name: str, sample: str, verdict: str) -> dict[str, Any]:
    return {
        "kind": verdict,
        "subject": f"{verdict.upper()} {sample} Zn",
        "body": f"DO prepare {sample} again\n",
        "keys": [f"{verdict}:{name}:{sample}"],
        "after_seconds": 3600 if verdict == "incomplete" else 0,
    }


if __name__ == "__main__":
    serve(_handle)
