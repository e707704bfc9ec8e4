"""The worker's answer to an evaluation, checked for its form before anything of it is recorded.

The worker is our own program, but a process that may have been fed a hostile export: nothing of what it says is
taken on trust where the ledger or the results folder would suffer. Nothing here judges a result.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from watcher.errors import WatcherError
from watcher.ledger_rows import Picture, SeriesRow, StagedFile

if TYPE_CHECKING:
    from collections.abc import Mapping

FATES = ("done", "unchanged", "refused", "unclaimed", "waiting", "bug")


@dataclass(eq=False)
class ReplyBroken(WatcherError):
    """The worker's answer does not have the agreed form."""

    where: str
    expected: str
    got: object

    def __str__(self) -> str:
        return f"the worker's answer is malformed: {self.where}: expected {self.expected}, got {self.got!r:.200}"


@dataclass(frozen=True, slots=True)
class WantedMail:
    """A mail as the worker wants it, not addressed yet."""

    kind: str
    subject: str
    body: str
    keys: tuple[str, ...]
    after_seconds: float
    pictures: tuple[Picture, ...] = ()


@dataclass(frozen=True, slots=True)
class Reply:
    """What the worker says became of an export.

    Attributes
    ----------
    fate
        One of `FATES`.
    lent
        What other exports lend, as JSON text.
    wants
        Whether something is missing that another export may lend.
    family
        Empty, or what tells apart contents of one name that have nothing to do with each other.
    error, traceback
        Of a defect, where `fate` is ``bug``.
    """

    fate: str
    layout: str | None = None
    files: tuple[StagedFile, ...] = ()
    mails: tuple[WantedMail, ...] = ()
    series: tuple[SeriesRow, ...] = ()
    counts: Mapping[str, int] = field(default_factory=dict)
    problem: str | None = None
    lent: str = "[]"
    wants: bool = False
    family: str = ""
    error: str | None = None
    traceback: str | None = None


def read_reply(message: Mapping[str, Any], staging: Path) -> Reply:
    """Check an answer and make a record of it.

    Parameters
    ----------
    message
        The answer as it came.
    staging
        Where its result files must lie.

    Raises
    ------
    ReplyBroken
        It is not of the agreed form.
    """
    fate = _get(message, "fate", str)
    if fate not in FATES:
        raise ReplyBroken("fate", "one of " + ", ".join(FATES), fate)
    if fate == "bug":
        return Reply(fate, error=_get(message, "error", str), traceback=_get(message, "traceback", str))
    problems = [_get({"problem": each}, "problem", str) for each in _get(message, "problems", list, default=[])]
    return Reply(
        fate=fate,
        layout=_get(message, "layout", str, optional=True),
        files=tuple(_file(each, staging) for each in _maps(message, "files")),
        mails=tuple(_mail(each, staging) for each in _maps(message, "mails")),
        series=tuple(_series(each) for each in _maps(message, "series")),
        counts=_counts(message),
        problem=_get(message, "problem", str, optional=True) or "\n".join(problems) or None,
        lent=_get(message, "lent", str, default="[]"),
        wants=_get(message, "wants", bool, default=False),
        family=_get(message, "family", str, default=""),
    )


@dataclass(frozen=True, slots=True)
class Drawn:
    """What the worker says of a page: where it is; or nothing, where its record cannot be read now; or a defect."""

    file: StagedFile | None = None
    error: str | None = None
    traceback: str | None = None


def read_page(message: Mapping[str, Any], staging: Path) -> Drawn:
    """Check an answer about a page and make a record of it.

    Raises
    ------
    ReplyBroken
        It is not of the agreed form.
    """
    if message.get("fate") == "bug":
        return Drawn(error=_get(message, "error", str), traceback=_get(message, "traceback", str))
    file = _get(message, "page", dict, optional=True)
    return Drawn() if file is None else Drawn(_file(file, staging))


def _file(item: Mapping[str, Any], staging: Path) -> StagedFile:
    return StagedFile(_get(item, "target", str), _staged(item, staging), _get(item, "sha256", str))


def _picture(item: Mapping[str, Any], staging: Path) -> Picture:
    return Picture(_staged(item, staging), _get(item, "alt", str))


def _staged(item: Mapping[str, Any], staging: Path) -> Path:
    staged = Path(_get(item, "staged", str))
    if staged.parent != staging:
        raise ReplyBroken("files.staged", f"a file in {staging}", str(staged))
    return staged


def _mail(item: Mapping[str, Any], staging: Path) -> WantedMail:
    keys = _get(item, "keys", list, default=[])
    return WantedMail(
        kind=_get(item, "kind", str),
        subject=_get(item, "subject", str),
        body=_get(item, "body", str),
        keys=tuple(_get({"keys": key}, "keys", str) for key in keys),
        after_seconds=_number(item, "after_seconds") or 0.0,
        pictures=tuple(_picture(each, staging) for each in _maps(item, "pictures")),
    )


def _series(item: Mapping[str, Any]) -> SeriesRow:
    return SeriesRow(
        sample=_get(item, "sample", str),
        analyte=_get(item, "analyte", str),
        channel=_get(item, "channel", str, default=""),
        attempt=_get(item, "attempt", int, default=1),
        verdict=_get(item, "verdict", str),
        result=_number(item, "value"),
        unit=_get(item, "unit", str, optional=True),
    )


def _counts(message: Mapping[str, Any]) -> dict[str, int]:
    counts = _get(message, "verdicts", dict, default={})
    return {str(verdict): _get(counts, verdict, int) for verdict in counts}


def _maps(message: Mapping[str, Any], key: str) -> list[Mapping[str, Any]]:
    return [_get({key: each}, key, dict) for each in _get(message, key, list, default=[])]


def _number(item: Mapping[str, Any], key: str) -> float | None:
    value = item.get(key)
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, int | float) or not math.isfinite(value):
        raise ReplyBroken(key, "a finite number or null", value)
    return float(value)


def _get(item: Mapping[str, Any], key: str, kind: type[Any], *, default: Any = None, optional: bool = False) -> Any:
    value = item.get(key)
    if value is None and (optional or default is not None):
        return default
    if not isinstance(value, kind) or (kind is int and isinstance(value, bool)):
        raise ReplyBroken(key, f"a {kind.__name__}", value)
    return value
