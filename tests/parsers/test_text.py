"""Bytes become lines strictly: declared encodings in order, marks honoured, nothing replaced."""

from __future__ import annotations

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from parsers import text as text_module
from parsers.errors import ExportRefused
from parsers.text import decode

BOTH = ["utf-8", "cp1252"]


@pytest.mark.parametrize(
    ("data", "encodings", "matched"),
    [
        ("µg/L".encode(), BOTH, "utf-8"),
        ("µg/L".encode("cp1252"), BOTH, "cp1252"),
        ("µg/L".encode("utf-8-sig"), BOTH, "utf-8"),
        ("µg/L".encode("utf-8-sig"), ["cp1252", "utf-8-sig"], "utf-8-sig"),
        ("µg/L".encode("utf-16"), ["utf-8", "utf-16"], "utf-16"),
        ("µg/L".encode("utf-16-le"), ["utf-16-le"], "utf-16-le"),
        ("µg/L".encode("utf-16-be"), ["utf-8", "utf-16-be"], "utf-16-be"),
        (b"\xfe\xff" + "µg/L".encode("utf-16-be"), ["utf-16"], "utf-16"),
        ("µg/L".encode("utf-32"), ["utf-32"], "utf-32"),
    ],
)
def test_encodings_are_tried_in_order_and_marks_decide(data: bytes, encodings: list[str], matched: str) -> None:
    """The text is the same whatever the encoding, no mark sticks to it, and the one that matched is kept."""
    lines = decode(data, encodings, "FL-1.csv")

    assert (lines.text, lines.encoding) == ("µg/L", matched)


@pytest.mark.parametrize(
    ("data", "encodings", "expected"),
    [
        (b"", BOTH, "FL-1.csv: expected lines of text, got an empty file"),
        (b"a\nb\r\nc\xb5", ["utf-8"], "FL-1.csv, line 3: expected text in utf-8, got the byte 0xB5"),
        (b"a\rb\r\xb5", ["ascii"], "FL-1.csv, line 3: expected text in ascii, got the byte 0xB5"),
        (b"a\n\x81", BOTH, "line 2: expected text in utf-8, got the byte 0x81"),
        (b"a\r\nb\0c", BOTH, "line 2: expected text, got a NUL character.*Look whether this is a text export"),
        ("Label;R1".encode("utf-16-le"), BOTH, "It looks like UTF-16 without a mark: declare utf-16-le or utf-16-be"),
        (
            "Label".encode("utf-16"),
            BOTH,
            r"begins with the mark of utf-16, which is not among .* \(utf-8, cp1252\).*Add utf-16",
        ),
        ("Label".encode("utf-8-sig"), ["cp1252"], "begins with the mark of utf-8"),
        (b"\xff\xfea", ["utf-16"], "line 1: expected text in utf-16"),
        (
            "Label".encode("utf-16-le"),
            ["utf-16"],
            "expected the mark of utf-16 at the beginning, got none.*Declare utf-16-le",
        ),
    ],
)
def test_what_does_not_belong_refuses_the_export(data: bytes, encodings: list[str], expected: str) -> None:
    """The refusal names the line and the byte, and says that nothing is read."""
    with pytest.raises(ExportRefused, match=expected) as refused:
        decode(data, encodings, "FL-1.csv")

    assert "Nothing of this export is read." in str(refused.value)


@given(st.lists(st.text(alphabet="ab;\x0b\x0c\x85\u2028 ", max_size=5), min_size=1, max_size=8), st.data())
def test_lines_are_numbered_as_an_editor_does(lines: list[str], data: st.DataObject) -> None:
    """CR, LF and CRLF end a line, in any mixture; no other character does."""
    ends = data.draw(st.lists(st.sampled_from(["\n", "\r\n"]), min_size=len(lines), max_size=len(lines)))
    content = "".join(line + end for line, end in zip(lines, ends, strict=True))

    assert decode(content.encode(), BOTH, "x").lines == lines
    assert decode(content.replace("\r\n", "\n").replace("\n", "\r").encode(), BOTH, "x").lines == lines
    assert len(decode(content.encode(), BOTH, "x")) == len(lines)


def test_the_last_line_needs_no_end() -> None:
    """A file that stops without line end holds its last line."""
    assert decode(b"a\nb", BOTH, "x").lines == ["a", "b"]
    assert decode(b"a\nb\n\n", BOTH, "x").lines == ["a", "b", ""]


@given(
    st.lists(st.sampled_from(["Page 1", "Page", " Page 2", "SED-12;1", "Pages", ""]), min_size=1, max_size=8),
    st.sampled_from(["^Page", r"^Page \d", "Page", "^Page *", "^$", "^Pa|^SED", r"(?i)^page"]),
    st.integers(0, 8),
)
def test_patterns_find_the_same_lines_with_and_without_splitting(texts: list[str], pattern: str, first: int) -> None:
    """Looking for the literal beginning of a pattern finds what searching each line finds."""
    first = min(first, len(texts) - 1)
    lines = decode(("\n".join(texts) + "\n").encode(), BOTH, "x")
    offset = sum(len(text) + 1 for text in texts[:first])

    found = lines.matching(re.compile(pattern), first, offset)

    expected = [at for at in range(first, len(texts)) if re.search(pattern, texts[at])]
    assert [line.at for line in found] == expected
    assert [lines.text[line.offset :].split("\n")[0] for line in found] == [texts[at] for at in expected]
    assert [line.text for line in found] == [texts[at] for at in expected]


def test_a_line_that_is_too_long_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """A line beyond the limit refuses the export, by its number."""
    monkeypatch.setattr(text_module, "MOST_CHARACTERS", 10)
    lines = decode(b"a\n" + b"x" * 11 + b"\nb\n", BOTH, "FL-1.csv")

    with pytest.raises(ExportRefused, match="line 2: expected at most 10 characters in a line, got 11"):
        _ = lines.lines
    assert lines.may_be_long()
    assert not decode(b"abc\n" * 9, BOTH, "x").may_be_long()


def test_an_export_that_is_too_large_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """An export beyond the limit is refused before it is decoded."""
    monkeypatch.setattr(text_module, "MOST_BYTES", 3)

    with pytest.raises(ExportRefused, match="expected at most 3 bytes, got 4"):
        decode(b"abcd", BOTH, "FL-1.csv")
