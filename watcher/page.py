"""The page of an export: a view for people, drawn from the JSON record and nothing else.

It is one file without script or outside resource, so that it opens from a file share, prints, and stays readable
beside the record that it shows.
"""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING, Any

from jinja2 import Environment, PackageLoader, StrictUndefined

from rules.figures import figure
from watcher import plots
from watcher.clock import moment

if TYPE_CHECKING:
    from jinja2 import Template

#: A verdict's sign, so that colour is never the only one.
SIGNS = {"pass": "✓", "warn": "!", "fail": "✗", "incomplete": "…", "not spiked": "–"}
#: Up to so many series, those that pass have tables and plots as well.
PLOTS_FOR_ALL = 24
#: So many series have plots at most; more would make the page too large to open on a phone.
MOST_PLOTS = 12
#: So many series have their tables at most; those further on are named with what failed, the record has the rest.
MOST_DETAILED = 80


def page(record: dict[str, Any], newer: str | None = None) -> str:
    """Return the page of one record.

    Parameters
    ----------
    record
        The JSON record of an export, as read from its result file (``"format": 1``).
    newer
        The file of the page of the next revision, which lies beside this one.
    """
    entries = [_entry(place, series) for place, series in enumerate(record["series"])]
    failing = [entry for entry in entries if entry["series"]["verdict"] != "pass"]
    passing = [entry for entry in entries if entry["series"]["verdict"] == "pass"]
    detailed = failing + (passing if len(entries) <= PLOTS_FOR_ALL else [])
    for entry in detailed[:MOST_DETAILED]:
        entry["detailed"] = True
    _draw(detailed[:MOST_PLOTS], record)
    return _template().render(
        record=record,
        newer=newer,
        export=record["export"],
        entries=entries,
        failing=failing,
        passing=passing,
        actions=_actions(failing),
        counts=_counts(entries),
        grid=_grid(entries),
        accepted=local(record["export"]["accepted_at"]),
    )


def local(utc: str) -> str:
    """Return a moment of the record in local time with its offset, for people."""
    return moment(utc).astimezone().strftime("%d %b %Y %H:%M:%S %z")


@cache
def _template() -> Template:
    environment = Environment(
        loader=PackageLoader("watcher"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["figure"] = lambda value: "" if value is None else figure(float(value))
    environment.filters["place"] = lambda value: "" if value is None else f"{value:g}"
    return environment.get_template("page.html")


def _entry(place: int, series: dict[str, Any]) -> dict[str, Any]:
    name = f"{series['sample']} {series['analyte']}"
    if series["channel"]:
        name += f" {series['channel']}"
    if series["attempt"] > 1:
        name += f", attempt {series['attempt']}"
    return {
        "anchor": f"s{place}",
        "name": name,
        "series": series,
        "sign": SIGNS.get(series["verdict"], "?"),
        "kind": series["verdict"].replace(" ", "-"),
        "raised": [c for c in series["checks"] if c["outcome"] not in ("pass", "not evaluated")],
        "detailed": False,
        "line_plot": None,
        "recovery_plot": None,
    }


def _draw(entries: list[dict[str, Any]], record: dict[str, Any]) -> None:
    slopes = {(c["analyte"], c["channel"]): c["slope"] for c in record["calibrations"]}
    for entry in entries:
        series = entry["series"]
        entry["line_plot"] = plots.additions_plot(series, slopes.get((series["analyte"], series["channel"])))
        entry["recovery_plot"] = plots.recoveries_plot(series)


def _actions(failing: list[dict[str, Any]]) -> list[tuple[str, list[dict[str, Any]]]]:
    """Group the series by what is to be done: one sentence, and every series that it holds for."""
    grouped: dict[str, list[dict[str, Any]]] = {}
    for entry in failing:
        sentence = entry["series"]["next_step"]["sentence"]
        if sentence:
            grouped.setdefault(sentence, []).append(entry)
    return list(grouped.items())


def _counts(entries: list[dict[str, Any]]) -> list[tuple[str, int]]:
    words = [entry["series"]["verdict"] for entry in entries]
    order = ["fail", "incomplete", "warn", "not spiked", "pass"]
    return [(word, words.count(word)) for word in [*order, *sorted(set(words) - set(order))] if word in words]


def _grid(entries: list[dict[str, Any]]) -> dict[str, Any]:
    """Return samples by analytes; a cell holds every attempt and channel."""
    cells: dict[str, dict[str, list[dict[str, Any]]]] = {}
    analytes: dict[str, None] = {}
    for entry in entries:
        series = entry["series"]
        analytes[series["analyte"]] = None
        cells.setdefault(series["sample"], {}).setdefault(series["analyte"], []).append(entry)
    return {"analytes": list(analytes), "rows": cells}
