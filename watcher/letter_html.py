"""A mail's text as HTML for a phone: the same words in the same order, with the plots of what fails.

Everything is escaped; nothing is fetched from anywhere. Styles are inline, because mail programs drop the rest.
"""

from __future__ import annotations

import re
from html import escape
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

#: A section's title stands alone on its line.
_TITLE = re.compile(r"[A-Z]{2,12}")
#: Behind these sections the plots stand: after what to do and what is held, before the explanation.
_BEFORE_PLOTS = ("HOLD", "DO")
_BODY = "margin:0 auto;padding:12px;max-width:40em;font:16px/1.45 sans-serif;color:#1c2430;background:#ffffff"
_TITLE_STYLE = "margin:18px 0 4px;font-size:14px;letter-spacing:1px"
_HEADLINE = "margin:0 0 8px;font-size:19px;line-height:1.3"
_DO = "border-left:6px solid #1c2430;padding:2px 0 2px 10px"
_WRAP = "overflow-wrap:anywhere"


def html(text: str, remarks: Iterable[str], pictures: Sequence[tuple[str, str]], seal: str) -> str:
    """Return the HTML part of a mail.

    Parameters
    ----------
    text
        The queued text: a headline, then sections or paragraphs, parted by blank lines; a line that ends with a blank
        goes on.
    remarks
        About the mail itself; they stand first.
    pictures
        Content identity and alternative text of each plot.
    seal
        The last line.
    """
    blocks = [block for block in unfolded(text).split("\n\n") if block.strip()]
    parts = [f'<p style="{_WRAP}"><em>{escape(remark.strip())}</em></p>' for remark in remarks if remark.strip()]
    parts.append(f'<h1 style="{_HEADLINE};{_WRAP}">{escape(blocks[0].strip()) if blocks else ""}</h1>')
    titles = [block.partition("\n")[0] for block in blocks[1:]]
    behind = next((titles.index(title) for title in _BEFORE_PLOTS if title in titles), len(titles) - 1)
    for place, block in enumerate(blocks[1:]):
        parts.append(_section(block))
        if place == behind:
            parts += _shown(pictures)
    parts += _shown(pictures) if len(blocks) < 2 else []
    if seal:
        parts.append(f'<p style="font-size:13px;{_WRAP}">{escape(seal.strip())}</p>')
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width, initial-scale=1"></head>\n'
        f'<body style="{_BODY}">\n' + "\n".join(parts) + "\n</body></html>\n"
    )


def unfolded(text: str) -> str:
    r"""Join lines that end with a blank with those behind them.

    >>> unfolded("one \ntwo\nthree")
    'one two\nthree'
    """
    return re.sub(r" \n(?!\n)", " ", text)


def _section(block: str) -> str:
    title, _, rest = block.partition("\n")
    if not _TITLE.fullmatch(title) or not rest:
        return _paragraphs(block)
    style = f' style="{_DO}"' if title == "DO" else ""
    return f'<div{style}><h2 style="{_TITLE_STYLE}">{escape(title)}</h2>\n{_paragraphs(rest)}</div>'


def _paragraphs(block: str) -> str:
    """Return lines as paragraphs, and those that begin with a dash as a list."""
    parts: list[str] = []
    listing = False
    for line in block.strip("\n").split("\n"):
        item = line.startswith("- ")
        if item != listing:
            parts.append('<ul style="margin:4px 0;padding-left:18px">' if item else "</ul>")
            listing = item
        tag, text = ("li", line[2:]) if item else ("p", line)
        parts.append(f'<{tag} style="margin:4px 0;{_WRAP}">{escape(text)}</{tag}>')
    return "\n".join([*parts, "</ul>"] if listing else parts)


def _shown(pictures: Iterable[tuple[str, str]]) -> list[str]:
    return [
        f'<p><img src="cid:{escape(cid)}" alt="{escape(alt)}" style="max-width:100%;height:auto"></p>'
        for cid, alt in pictures
    ]
