"""What is looked at once at the start: kinds of file systems, rights, an altered ledger."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

from watcher.places import RecordsOnNetwork, file_system, findings, refuse_network
from watcher.service_settings import ServiceSettings

if TYPE_CHECKING:
    from pathlib import Path

    from watcher.ledger import Ledger


def test_the_file_system_of_the_longest_mount_point_counts(tmp_path: Path) -> None:
    """A share mounted inside a local disk is a share, also for folders that are not there yet."""
    (tmp_path / "share").mkdir()
    mounts = tmp_path / "mounts"
    mounts.write_text(f"/dev/sda / ext4 rw 0 0\n//bench {tmp_path}/share cifs rw 0 0\n")
    assert file_system(tmp_path / "share" / "records" / "deep", mounts) == "cifs"
    assert file_system(tmp_path, mounts) == "ext4"


@pytest.mark.parametrize("path", ["//bench/records", r"\\bench\records"])
def test_records_on_another_computer_are_refused(path: str) -> None:
    """A path to another computer is refused with what to do."""
    from pathlib import PureWindowsPath  # noqa: PLC0415 - a path of another system

    with pytest.raises(RecordsOnNetwork, match="expected a local disk, got a network path"):
        refuse_network(PureWindowsPath(path))  # type: ignore[arg-type]


def test_an_altered_ledger_is_told(ledger: Ledger, tmp_path: Path) -> None:
    """The number of the entry that does not fit stands in the sentence."""
    plain = {"laboratory": "Skerry Point Water Laboratory", "exports": [str(tmp_path / "exports")]}
    settings = ServiceSettings.from_plain(plain | {"results": str(tmp_path / "r"), "records": str(tmp_path / "q")})
    before = [each.key for each in findings(settings, ledger)]
    with ledger._database.transaction("adopt") as txn:
        txn.execute("UPDATE entries SET body = '{}' WHERE number = 1")

    found: Any = findings(settings, ledger)

    assert [each.key for each in found if each.key not in before] == ["odd:altered:1"]
    assert "entry 1 is not what it was" in found[0].sentence
