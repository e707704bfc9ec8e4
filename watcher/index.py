"""index.html in the results folder: whether the service is well, what is open, and the exports, newest first.

A view for people who have the results folder open; nothing depends on it. It is made from plain values with the
standard library alone, because the service itself writes it.
"""

from __future__ import annotations

from datetime import timedelta
from html import escape
from typing import TYPE_CHECKING
from urllib.parse import quote

from watcher.clock import moment

if TYPE_CHECKING:
    from collections.abc import Sequence
    from datetime import datetime

    from watcher.failures import Failure
    from watcher.ledger_rows import Listed

FILE_NAME = "index.html"
#: Exports that are listed; earlier ones are in their month's folder.
MOST_EXPORTS = 500
#: A heartbeat older than this means that nothing runs.
STALE = timedelta(minutes=10)
_STYLE = (
    "body{font:1rem/1.5 Georgia,serif;color:#1c2430;background:#fff;max-width:70rem;margin:0 auto;padding:1rem;"
    "overflow-wrap:anywhere}h1{font-size:1.4rem;margin:.2rem 0}h2{font-size:1.2rem;border-bottom:2px solid #1c2430}"
    "table{border-collapse:collapse;overflow-wrap:normal}th,td{border:1px solid #66707e;padding:.2rem .5rem;"
    "text-align:left;vertical-align:top}.wide{overflow-x:auto}a{color:#1f4e8c}.banner{border:3px solid #1c2430;"
    "padding:.6rem 1rem}.trouble{background:#1c2430;color:#fff}.trouble a{color:#fff}td.look{font-weight:bold}"
    "@media(max-width:40rem){table,tbody,tr,th,td{display:block;border:0}tr{border:1px solid #66707e;margin:.4rem 0;"
    "padding:.3rem .4rem}tr:first-of-type{display:none}td:empty{display:none}}"
    "@page{size:A4;margin:15mm}@media print{.wide{overflow:visible}}"
)
_WORDS = {
    "accepted": "waits for evaluation",
    "refused": "refused",
    "unclaimed": "no layout claims it",
    "waiting": "waits for its last line",
}
_CAUTION = (
    "A tool for qualified staff: validate it on your own samples before use. Accreditation, legal limits and the "
    "release of results stay with the laboratory and its local rules. A pass means that the stated checks "
    "held, nothing more."
)


def index(
    laboratory: str,
    now: datetime,
    *,
    running: bool,
    troubles: Sequence[str],
    failures: Sequence[tuple[Failure, str | None]],
    exports: Sequence[Listed],
) -> str:
    """Return the page.

    Parameters
    ----------
    laboratory
        Whose results these are.
    now
        When it is written, the heartbeat that people see.
    running
        Whether the service goes on; it writes the page once more when it stops.
    troubles
        What is wrong now, in sentences.
    failures
        What is open, each with the path of the page that shows it.
    exports
        Newest first.
    """
    parts = [
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">',
        '<meta name="viewport" content="width=device-width, initial-scale=1">',
        "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'\">",
        f"<title>Results of {escape(laboratory)}</title><style>{_STYLE}</style></head><body>",
        _banner(laboratory, now, troubles, len(failures), running=running),
        "<main>",
        _open(failures),
        _exports(exports),
        "</main>",
        f"<footer><p>{_CAUTION}</p></footer></body></html>\n",
    ]
    return "\n".join(part for part in parts if part)


def _banner(laboratory: str, now: datetime, troubles: Sequence[str], failures: int, *, running: bool) -> str:
    minutes = int(STALE.total_seconds() // 60)
    if running:
        life = (
            f"spikewarden was at work at {_time(now)}. If that is more than {minutes} minutes ago, it does not run: "
            f"see to its computer, and reload this page."
        )
    else:
        life = f"spikewarden was stopped at {_time(now)}. Nothing is taken in until it is started again."
    open_ones = f"{failures} open failure{'s' if failures != 1 else ''}." if failures else "No failure is open."
    well = running and not troubles
    items = "".join(f"<li>{escape(sentence)}</li>" for sentence in troubles)
    wrong = f"<p><strong>Something is wrong:</strong></p><ul>{items}</ul>" if troubles else ""
    return (
        f'<header class="banner{"" if well else " trouble"}"><h1>{escape(laboratory)}</h1>'
        f"<p><strong>{open_ones}</strong> {escape(life)}</p>{wrong}</header>"
    )


def _open(failures: Sequence[tuple[Failure, str | None]]) -> str:
    if not failures:
        return ""
    items = "".join(
        f"<li><strong>{_link(page, failure.title)}</strong>: {escape(failure.verdict)} in {escape(failure.name)}, "
        f"attempt {failure.attempt}, since {_time(moment(failure.opened_at))}</li>"
        for failure, page in failures
    )
    return (
        f"<h2>Open failures</h2><ul>{items}</ul><p>One is closed by a later attempt that passes, or by a person: "
        f"<code>spikewarden note EXPORT --by NAME &quot;what was done&quot;</code></p>"
    )


def _exports(exports: Sequence[Listed]) -> str:
    if not exports:
        return "<h2>Exports</h2><p>None came in yet.</p>"
    rows = "".join(map(_row, exports))
    more = f"<p>The newest {MOST_EXPORTS} are listed.</p>" if len(exports) >= MOST_EXPORTS else ""
    return (
        '<h2>Exports, newest first</h2><div class="wide" tabindex="0" role="region" aria-label="Exports"><table>'
        '<tr><th scope="col">Export</th><th scope="col">Taken in</th><th scope="col">Result</th>'
        f'<th scope="col">Files</th></tr>{rows}</table></div>{more}'
    )


def _row(export: Listed) -> str:
    page = next((file for file in export.files if file.endswith(".html")), None)
    others = ", ".join(_link(file, file.rpartition(".")[2].upper()) for file in export.files if file != page)
    name = f"{export.name}, revision {export.revision}" if (export.revision or 1) > 1 else export.name
    counts = ", ".join(f"{count} {word}" for word, count in export.counts.items())
    told = counts or _WORDS.get(export.state, export.state)
    if export.state in ("refused", "unclaimed") and export.problem:
        told += f": {export.problem}"
    look = export.state in ("refused", "unclaimed") or any(export.counts.get(word) for word in ("fail", "incomplete"))
    marked = ' class="look"' if look else ""
    return (
        f'<tr><th scope="row">{_link(page, name)}</th><td>{_time(moment(export.accepted_at))}</td>'
        f"<td{marked}>{escape(told)}</td><td>{others}</td></tr>"
    )


def _link(path: str | None, text: str) -> str:
    return escape(text) if path is None else f'<a href="{escape(quote(path))}">{escape(text)}</a>'


def _time(at: datetime) -> str:
    """Return a moment in local time with its offset."""
    return at.astimezone().strftime("%d %b %Y %H:%M %z")
