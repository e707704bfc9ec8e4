"""A note of which export is being evaluated, so that one which takes the whole service down comes last next time.

It is no part of the ledger and is not forced to disk: losing it costs an order, never an export.
"""

from __future__ import annotations

import contextlib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pathlib import Path

NOTE_NAME = "evaluating"


class CutShort:
    """The note in a records folder.

    Parameters
    ----------
    records
        The records folder.
    """

    def __init__(self, records: Path) -> None:
        self._note = records / NOTE_NAME
        self.export_id = self._left_over()

    def begins(self, export_id: int) -> None:
        """An evaluation begins."""
        self._note.write_text(str(export_id), "ascii")

    def ends(self) -> None:
        """It ended, whatever came of it."""
        self._note.unlink(missing_ok=True)

    def _left_over(self) -> int | None:
        """The export whose evaluation the last run did not survive."""
        with contextlib.suppress(OSError, ValueError):
            return int(self._note.read_text("ascii"))
        return None
