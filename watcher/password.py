"""The password for the mail server: read when it is needed, shown nowhere.

It comes from a file or from the environment, never from the configuration. Nothing here signs in.
"""

from __future__ import annotations

import os
from dataclasses import dataclass
from typing import TYPE_CHECKING

from watcher.errors import WatcherError

if TYPE_CHECKING:
    from pathlib import Path

VARIABLE = "SPIKEWARDEN_MAIL_PASSWORD"
MASK = "(hidden)"


@dataclass(eq=False)
class PasswordUnreadable(WatcherError):
    """There is a user to sign in as, but no password."""

    source: str
    fault: str

    def __str__(self) -> str:
        return (
            f"The password for the mail server cannot be read from {self.source}: {self.fault}. "
            "Mails stay queued. Correct mail.password_file, or set the variable "
            f"{VARIABLE} for the service."
        )


class Secret:
    """A text that no log, message or traceback shows; `reveal` gives it."""

    __slots__ = ("_text",)

    def __init__(self, text: str) -> None:
        self._text = text

    def reveal(self) -> str:
        """Return the text itself."""
        return self._text

    def __repr__(self) -> str:
        return f"Secret{MASK}"

    def __str__(self) -> str:
        return MASK

    def __reduce__(self) -> str:
        raise TypeError("a secret is not written down")


def read_password(password_file: Path | None) -> Secret:
    """Read the password from its file, or else from the environment.

    Raises
    ------
    PasswordUnreadable
        There is none, or the file cannot be read.
    """
    if password_file is None:
        text = os.environ.get(VARIABLE, "")
        source = f"the environment variable {VARIABLE}"
    else:
        source = str(password_file)
        try:
            text = password_file.read_text("utf-8").rstrip("\r\n")
        except (OSError, UnicodeDecodeError) as error:
            raise PasswordUnreadable(source, str(error)) from error
    if not text:
        raise PasswordUnreadable(source, "it is empty")
    return Secret(text)
