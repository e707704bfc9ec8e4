"""Named moments at which the process can be made to die, so that tests can prove what survives.

``SPIKEWARDEN_KILL_AT=name`` kills the process with SIGKILL the first time it passes that moment, ``name:3`` the
third time; ``name:3:both`` in the worker kills the service first. Several are separated by commas. Every durable step
is surrounded by them:

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


def of_the_worker(setting: str) -> str:
    """Return the moments of a setting that lie in the worker; those of the service are not its own."""
    return ",".join(each for each in setting.split(",") if each.startswith("stage-"))


class _Armed:
    """The moment at which to die, how many passings are left until then, and whether the service dies too."""

    def __init__(self, setting: str) -> None:
        name, _, rest = setting.partition(":")
        count, _, both = rest.partition(":")
        if name not in KILL_POINTS:
            raise ValueError(f"{VARIABLE}={setting}: expected one of {', '.join(KILL_POINTS)}")
        self.name = name
        self.left = int(count or 1)
        #: Only the worker's parent is the service.
        self.both = both == "both" and bool(of_the_worker(name))


_armed = [_Armed(setting) for setting in os.environ.get(VARIABLE, "").split(",") if setting]


def at(name: str) -> None:
    """Pass the moment `name`; die here if that was asked for."""
    for armed in _armed:
        if armed.name != name:
            continue
        armed.left -= 1
        if armed.left == 0:
            if armed.both:
                os.kill(os.getppid(), signal.SIGKILL)
            os.kill(os.getpid(), signal.SIGKILL)
