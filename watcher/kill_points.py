"""Named moments at which the process can be made to die, so that tests can prove what survives.

``SPIKEWARDEN_KILL_AT=name`` kills the process with SIGKILL the first time it passes that moment, ``name:3`` the
third time. Every durable step is surrounded by them:

* a file step has four: ``<step>-begins``, ``<step>-written`` (temporary file is on disk), ``<step>-replaced``
  (it has its name), ``<step>-durable`` (so does the folder). Steps: ``copy`` (our copy of an export), ``stage``
  (a result file in the records, in the worker), ``stage-page`` (a page, likewise), ``deliver`` (a result file or page
  in the results folder);
* a ledger transaction has three: ``<transaction>-begins``, ``<transaction>-commits`` (all rows written, not yet
  committed), ``<transaction>-committed``;
* ``mail-answered``: the mail server said yes and the ledger does not know it yet; ``staged-removed``: a delivered
  result file was removed from the records.

Without the variable a passing costs one comparison. Nothing here is used to stop the service properly.
"""

from __future__ import annotations

import os
import signal

VARIABLE = "SPIKEWARDEN_KILL_AT"

FILE_STEPS = ("copy", "stage", "stage-page", "deliver")
TRANSACTIONS = (
    "adopt",
    "recover",
    "accept",
    "finish",
    "attempt",
    "report",
    "delivered",
    "undelivered",
    "sending",
    "outcome",
    "recognise",
    "request",
    "page",
)
KILL_POINTS = (
    *(f"{step}-{moment}" for step in FILE_STEPS for moment in ("begins", "written", "replaced", "durable")),
    *(f"{name}-{moment}" for name in TRANSACTIONS for moment in ("begins", "commits", "committed")),
    "mail-answered",
    "staged-removed",
)


class _Armed:
    """The moment at which to die, and how many passings are left until then."""

    def __init__(self, setting: str) -> None:
        name, _, count = setting.partition(":")
        if name not in KILL_POINTS:
            raise ValueError(f"{VARIABLE}={setting}: expected one of {', '.join(KILL_POINTS)}")
        self.name = name
        self.left = int(count or 1)


_armed = _Armed(os.environ[VARIABLE]) if os.environ.get(VARIABLE) else None


def at(name: str) -> None:
    """Pass the moment `name`; die here if that was asked for."""
    if _armed is None or _armed.name != name:
        return
    _armed.left -= 1
    if _armed.left == 0:
        os.kill(os.getpid(), signal.SIGKILL)
