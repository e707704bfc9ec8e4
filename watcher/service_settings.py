"""The settings of the service process as plain, light records.

They were read from YAML and validated elsewhere, by libraries too heavy for a process that idles for months;
here they arrive as plain values and are only checked for their form. No YAML, no defaults for what is scientific.
"""

from __future__ import annotations

from dataclasses import MISSING, dataclass, fields
from pathlib import Path
from typing import TYPE_CHECKING, get_args, get_type_hints

from watcher.errors import WatcherError

if TYPE_CHECKING:
    from collections.abc import Mapping

#: Kinds of mail that may be asked for.
MAIL_KINDS = ("fail", "incomplete", "problem", "cleared")
#: How changed settings come into force.
ADOPTIONS = ("automatic", "signed")
#: How the conversation with the mail server is protected.
SECURITIES = ("starttls", "tls", "none")

MEBIBYTE = 1024 * 1024


@dataclass(eq=False)
class ServiceSettingsBroken(WatcherError):
    """A plain setting is missing, unknown or of the wrong form.

    Attributes
    ----------
    key
        The setting, dotted: ``mail.port``.
    expected, got
        What was wanted, what was found.
    """

    key: str
    expected: str
    got: object

    def __str__(self) -> str:
        return (
            f"Setting {self.key}: expected {self.expected}, got {self.got!r}. "
            "The service does not start. Correct the configuration and let `check` read it."
        )


@dataclass(frozen=True, slots=True)
class MailSettings:
    """Where mails go and how.

    Attributes
    ----------
    server, port, security
        The mail server; `security` is ``starttls``, ``tls`` or ``none``.
    sender, to
        The address mails come from and those they go to.
    user, password_file
        Sign-in, only over TLS; without `password_file` the password comes from the environment.
    ca_file
        A private certificate authority, added to the system's.
    about
        The kinds of mail that are wanted.
    daily
        When a mail is sent that says the service is alive, such as ``07:30 Mon-Fri``; None: never.
    """

    server: str
    sender: str
    to: tuple[str, ...]
    port: int = 587
    security: str = "starttls"
    user: str | None = None
    password_file: Path | None = None
    ca_file: Path | None = None
    about: tuple[str, ...] = MAIL_KINDS
    daily: str | None = None

    @classmethod
    def from_plain(cls, values: Mapping[str, object]) -> MailSettings:
        """Make the record from plain values; see `ServiceSettings.from_plain`."""
        settings = cls(**_typed(cls, values, "mail."))  # type: ignore[arg-type]
        _one_of("mail.security", settings.security, SECURITIES)
        for kind in settings.about:
            _one_of("mail.about", kind, MAIL_KINDS)
        if not settings.to:
            raise ServiceSettingsBroken("mail.to", "at least one address", list(settings.to))
        if settings.user is not None and settings.security == "none":
            raise ServiceSettingsBroken("mail.security", "starttls or tls where there is a user", "none")
        return settings


@dataclass(frozen=True, slots=True)
class ServiceSettings:
    """What the service needs to know to wait, accept, evaluate, record and deliver.

    Attributes
    ----------
    laboratory
        The laboratory's name.
    exports
        Absolute paths of the folders that are watched; only ever read.
    results, records
        Absolute paths: where result files go, and where ledger, copies and log live (a local disk).
    settle_seconds, scan_seconds
        How long a file must stay unchanged; how often the folders are looked through.
    subfolders, events
        Whether to look into subfolders; whether to listen for file events between scans.
    deadline_seconds, memory_bytes, idle_seconds
        Limits of one evaluation, and how long an idle worker is kept.
    size_limit_bytes, reserve_bytes
        The largest export; the space that must stay free on the disk of the records.
    complete_after_seconds
        After how long without change an export counts as complete.
    span_seconds
        How far exports may lie apart that lend each other something; 0 where each stands alone.
    adoption
        Whether changed settings are adopted by themselves or only with a person's name.
    silence_seconds, silence_hours
        After how long without a new export that is told, counted in these hours such as ``Mon-Fri 07:00-19:00``;
        0: never.
    backup
        Where ledger and copies are backed up daily; None: nowhere.
    mail
        None: no mail is sent.
    """

    laboratory: str
    exports: tuple[Path, ...]
    results: Path
    records: Path
    settle_seconds: float = 5.0
    scan_seconds: float = 10.0
    subfolders: bool = False
    events: bool = True
    deadline_seconds: float = 120.0
    memory_bytes: int = 2048 * MEBIBYTE
    idle_seconds: float = 300.0
    size_limit_bytes: int = 200 * MEBIBYTE
    reserve_bytes: int = 200 * MEBIBYTE
    complete_after_seconds: float = 7200.0
    span_seconds: float = 0.0
    adoption: str = "automatic"
    silence_seconds: float = 0.0
    silence_hours: str = "Mon-Sun 00:00-24:00"
    backup: Path | None = None
    mail: MailSettings | None = None

    @classmethod
    def from_plain(cls, values: Mapping[str, object]) -> ServiceSettings:
        """Make the record from plain values (texts for paths, lists for tuples, ``mail``: a map or None).

        Raises
        ------
        ServiceSettingsBroken
            A key is missing or unknown, or its value has the wrong form.
        """
        plain = dict(values)
        mail = plain.pop("mail", None)
        if mail is not None and not isinstance(mail, dict):
            raise ServiceSettingsBroken("mail", "a map or none", mail)
        known = _typed(cls, plain, "")
        known["mail"] = None if mail is None else MailSettings.from_plain(mail)
        settings = cls(**known)  # type: ignore[arg-type]
        _one_of("adoption", settings.adoption, ADOPTIONS)
        settings._check_folders()
        return settings

    def _check_folders(self) -> None:
        if not self.exports:
            raise ServiceSettingsBroken("exports", "at least one folder", [])
        for key, folder in (
            *(("exports", folder) for folder in self.exports),
            ("results", self.results),
            ("records", self.records),
            *((("backup", self.backup),) if self.backup is not None else ()),
        ):
            if not folder.is_absolute():
                raise ServiceSettingsBroken(key, "an absolute path", str(folder))
            if key != "exports" and any(self._would_be_read(folder, exports) for exports in self.exports):
                raise ServiceSettingsBroken(key, "a folder that is not read as exports", str(folder))
        names = [folder.name for folder in self.exports]
        if len(set(names)) < len(names):
            raise ServiceSettingsBroken("exports", "folders with names that differ", names)

    def _would_be_read(self, folder: Path, exports: Path) -> bool:
        """Whether what is written to a folder would be found in an exports folder and taken in."""
        return folder == exports or (self.subfolders and exports in folder.parents)


def _one_of(key: str, value: str, allowed: tuple[str, ...]) -> None:
    if value not in allowed:
        raise ServiceSettingsBroken(key, "one of " + ", ".join(allowed), value)


def _typed(record: type, values: Mapping[str, object], prefix: str) -> dict[str, object]:
    """Bring each plain value into the type its field declares; refuse what is missing or unknown."""
    declared = {item.name: item for item in fields(record)}
    for key in values:
        if key not in declared:
            raise ServiceSettingsBroken(prefix + key, "one of " + ", ".join(declared), values[key])
    hints = get_type_hints(record)
    typed: dict[str, object] = {}
    for name, item in declared.items():
        if name in values:
            typed[name] = _as(hints[name], prefix + name, values[name])
        elif item.default is MISSING:
            raise ServiceSettingsBroken(prefix + name, "a value", None)
    return typed


def _as(hint: object, key: str, value: object) -> object:
    choices = get_args(hint)
    if type(None) in choices:
        return None if value is None else _as(choices[0], key, value)
    if choices:  # tuple[item, ...]
        if not isinstance(value, list | tuple):
            raise ServiceSettingsBroken(key, "a list", value)
        return tuple(_as(choices[0], key, item) for item in value)
    return _scalar(hint, key, value)


def _scalar(hint: object, key: str, value: object) -> object:
    if hint is Path and isinstance(value, str | Path):
        return Path(value)
    if hint is float and isinstance(value, int | float) and not isinstance(value, bool) and value >= 0:
        return float(value)
    if hint is int and isinstance(value, int) and not isinstance(value, bool) and value >= 0:
        return value
    if hint in (str, bool) and type(value) is hint:
        return value
    wanted = {Path: "a path", float: "a number from 0", int: "a whole number from 0", str: "a text"}
    raise ServiceSettingsBroken(key, wanted.get(hint, "true or false"), value)  # type: ignore[call-overload]
