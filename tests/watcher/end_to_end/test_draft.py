"""`draft` prints a layout that works at once, writes it where it is told, and never over a file."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from click.testing import CliRunner

from parsers.layout import parse_layout
from parsers.read import read
from watcher.commands import main

if TYPE_CHECKING:
    from pathlib import Path

EXPORT = """\
Label;Element;R1;R2
STD 0;Zn;0.001;0.002
STD 0.5;Zn;0.092;0.093
BLK 1;Zn;0.001;0.001
SED-12;Zn;0.118;0.119
SED-12 +A1;Zn;0.205;0.206
SED-12 +A2;Zn;0.294;0.293
"""


def drafted(*arguments: object) -> Any:
    """Run `draft` in this process."""
    return CliRunner().invoke(main, ["draft", *map(str, arguments)])


def test_what_is_printed_is_a_layout(tmp_path: Path) -> None:
    """Standard output can be redirected into a file: the layout, and behind it the account as comments."""
    export = tmp_path / "ZN-0001.csv"
    export.write_text(EXPORT)

    done = drafted(export)

    assert done.exit_code == 0, done.output
    layout = parse_layout(done.stdout, "layouts/zn.yaml")
    readings = read(export.read_bytes(), layout, export.name)
    assert len(readings) == 6
    assert not readings.faults
    assert "# SED-12 +A1  spiked" in done.stdout
    assert "# FILL IN: what each level adds" in done.stdout
    assert max(map(len, done.stdout.splitlines())) <= 80
    assert sorted(path.name for path in tmp_path.iterdir()) == ["ZN-0001.csv"]


def test_a_file_is_written_and_never_overwritten(tmp_path: Path) -> None:
    """`--output` makes a new file; where one is, it is left as it was, and the code is 2."""
    export, output = tmp_path / "ZN-0001.csv", tmp_path / "zn.yaml"
    export.write_text(EXPORT)

    first = drafted(export, "--output", output)
    text = output.read_text(encoding="utf-8")
    output.write_text("mine", encoding="utf-8")
    second = drafted(export, "--output", output)

    assert (first.exit_code, second.exit_code) == (0, 2)
    assert parse_layout(text, "zn.yaml").layout == "ZN exports"
    assert "ZN-0001.csv: read with layout 'ZN exports'" in first.stdout
    assert "is never overwritten" in " ".join(second.stderr.split())
    assert output.read_text(encoding="utf-8") == "mine"


def test_a_shape_beyond_it_is_refused(tmp_path: Path) -> None:
    """Without a table there is no layout: the reason stands on standard error, and the code is 2."""
    letter = tmp_path / "letter.txt"
    letter.write_text("Dear colleague,\nthe run is done.\n")

    done = drafted(letter)

    assert done.exit_code == 2
    assert done.stdout == ""
    assert "refused: letter.txt: expected a table" in " ".join(done.stderr.split())


def test_an_example_with_a_broken_row_is_told(tmp_path: Path) -> None:
    """The layout comes all the same, with the line that refuses the example, and the code is 2."""
    export = tmp_path / "ZN-0002.csv"
    export.write_text(EXPORT + "SED-13;Zn;0.1\nSED-14;Zn;0.1;0.2\n")

    done = drafted(export)

    assert done.exit_code == 2
    parse_layout(done.stdout, "layouts/zn.yaml")
    told = " ".join(line.removeprefix("#").strip() for line in done.stdout.splitlines())
    assert "line 8 of ZN-0002.csv: other fields than the 4 of the header, so the export is refused" in told
    assert "ZN-0002.csv, line 8: expected 4 fields as in the header, got 3" in told


def test_an_export_that_is_not_there_is_named(tmp_path: Path) -> None:
    """A path that leads nowhere gives 2 and is named."""
    done = drafted(tmp_path / "ZN-9999.csv")

    assert done.exit_code == 2
    assert "ZN-9999.csv:nosuchfileordirectory.Nothingwasdrafted." in "".join(done.stderr.split())
