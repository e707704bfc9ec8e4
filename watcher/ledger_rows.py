"""The records that go into the ledger and come out of it.

Frozen and narrow: each says just what one caller needs. Nothing here reads or writes.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import Path

    from watcher.ledger_entries import Seal


@dataclass(frozen=True, slots=True)
class AdoptedSettings:
    """The settings that are in force: their number, the hash of their text and the text (JSON) itself."""

    number: int
    sha256: str
    body: str


@dataclass(frozen=True, slots=True)
class ExportRow:
    """One content of one export.

    Attributes
    ----------
    id
        Its number in the ledger.
    name
        Path under the exports folder, with ``/``.
    sha256, size
        Hash and bytes of the content.
    state
        accepted, done, refused, unclaimed, waiting or superseded.
    revision
        1 + the number of earlier contents of this name that are done; that of the result files once it is done.
    settings_number
        The settings it was last evaluated under.
    attempts
        Evaluations that ended with the worker's death or at the deadline.
    accepted_at
        When its copy was durable.
    problem
        Why it is refused, or what is to be known about it.
    lent
        What other exports lend it, as JSON text; None where it was not evaluated before.
    """

    id: int
    name: str
    sha256: str
    size: int
    state: str
    revision: int
    settings_number: int | None
    attempts: int
    accepted_at: str
    problem: str | None
    lent: str | None = None


@dataclass(frozen=True, slots=True)
class SeriesRow:
    """One line of the index of results: what a series came to."""

    sample: str
    analyte: str
    channel: str
    attempt: int
    verdict: str
    result: float | None
    unit: str | None


@dataclass(frozen=True, slots=True)
class StagedFile:
    """A result file that is durable in the records and goes to `target`, a path under the results folder."""

    target: str
    staged: Path
    sha256: str


@dataclass(frozen=True, slots=True)
class Picture:
    """A plot that goes with a mail, where it is drawn to, and in words what it shows."""

    staged: Path
    alt: str


@dataclass(frozen=True, slots=True)
class QueuedMail:
    """A mail as it enters the outbox, with everything a repeat must repeat.

    Attributes
    ----------
    kind
        fail, incomplete, problem or cleared.
    keys
        What it is about; a mail of which every key was mailed before is not queued. Without keys it always is.
    message_id
        The same for every attempt.
    due_at
        Not before this moment.
    pictures
        Plots of what it is about.
    """

    kind: str
    subject: str
    body: str
    keys: tuple[str, ...]
    recipients: tuple[str, ...]
    message_id: str
    due_at: str
    pictures: tuple[Picture, ...] = ()


@dataclass(frozen=True, slots=True)
class Fate:
    """What became of an export: recorded in one transaction, mails and files with it.

    Attributes
    ----------
    state
        done, refused, unclaimed or waiting.
    settings_number
        The settings it was evaluated under.
    counts
        Verdict to number of series.
    lent, wants
        What other exports lend, as JSON text; whether something is missing that another one may lend.
    family
        Empty, or what tells contents apart that came under one name and have nothing to do with each other.
    """

    state: str
    settings_number: int
    layout: str | None = None
    files: tuple[StagedFile, ...] = ()
    mails: tuple[QueuedMail, ...] = ()
    series: tuple[SeriesRow, ...] = ()
    counts: Mapping[str, int] = field(default_factory=dict)
    problem: str | None = None
    lent: str = "[]"
    wants: bool = False
    family: str = ""


@dataclass(frozen=True, slots=True)
class Listed:
    """An export as the list of exports shows it.

    Attributes
    ----------
    name, revision, state, accepted_at, problem
        As the ledger has them; no revision where it has no results.
    counts
        Verdict to number of series.
    files
        Its delivered result files, paths under the results folder.
    """

    name: str
    revision: int | None
    state: str
    accepted_at: str
    problem: str | None
    counts: Mapping[str, int]
    files: Sequence[str]


@dataclass(frozen=True, slots=True)
class WantedPage:
    """A page that is still to be drawn.

    Attributes
    ----------
    id, export_id
        The numbers of the record and of the export in the ledger.
    record, staged, sha256
        The result file that it shows: its path under the results folder, where it waits until it is delivered, its
        hash.
    target
        The page's own path under the results folder.
    newer
        The page of the next revision, if there is one.
    """

    id: int
    export_id: int
    record: str
    staged: Path
    sha256: str
    target: str
    newer: str | None


@dataclass(frozen=True, slots=True)
class DueFile:
    """A result file whose delivery is due."""

    id: int
    export_name: str
    target: str
    staged: Path
    sha256: str
    attempts: int


@dataclass(frozen=True, slots=True)
class DueMail:
    """A mail and those of its recipients for whom an attempt is due.

    Attributes
    ----------
    possible_repeat
        An earlier attempt for these recipients had an unknown outcome.
    first_due_at
        When it should have gone out.
    attempts
        The most attempts made for any of the recipients.
    seal
        Number and seal of the entry that queued it.
    pictures
        Plots of what it is about.
    """

    id: int
    message_id: str
    subject: str
    body: str
    created_at: str
    first_due_at: str
    recipients: tuple[str, ...]
    possible_repeat: bool
    attempts: int
    seal: Seal | None = None
    pictures: tuple[Picture, ...] = ()


@dataclass(frozen=True, slots=True)
class RecipientOutcome:
    """How an attempt ended for one recipient.

    Attributes
    ----------
    state
        delivered, refused (for good), waiting (try again) or unknown (try again, it may be a repeat).
    error
        What the server or the system said.
    due_at
        When to try again, where that is so.
    """

    address: str
    state: str
    error: str | None = None
    due_at: str | None = None


@dataclass(frozen=True, slots=True)
class UndeliveredMail:
    """A mail that someone should have and has not."""

    subject: str
    address: str
    state: str
    first_due_at: str
    attempts: int
    last_error: str | None


@dataclass(frozen=True, slots=True)
class UndeliveredFile:
    """A result file that is not in the results folder yet."""

    target: str
    due_at: str
    attempts: int
    last_error: str | None


@dataclass(frozen=True, slots=True)
class RefusedExport:
    """An export that gave no results, and why."""

    name: str
    state: str
    problem: str | None
    attempts: int
