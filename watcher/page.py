"""The page of an export: a view for people, drawn from the JSON record and nothing else.

It is one file without script or outside resource, so that it opens from a file share, prints, and stays readable
beside the record that it shows.
"""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING, Any

from jinja2 import Environment, PackageLoader, StrictUndefined

from rules.figures import figure, several
from rules.plan import batch_step
from watcher import plots
from watcher.clock import moment
from watcher.pictures import line_words

if TYPE_CHECKING:
    from jinja2 import Template

#: A verdict's sign, so that colour is never the only one.
SIGNS = {"pass": "✓", "warn": "!", "fail": "✗", "incomplete": "…", "not spiked": "–"}
#: Verdicts that ask for nothing.
QUIET = ("pass", "not spiked")
#: Checks that judge the batch: one line for all samples that wait for the same.
BATCH_CHECKS = ("stock", "check_standard", "bracket", "blank", "spiked_blank")
#: Analytes whose run is drawn, those that fail first.
MOST_RUNS = 6
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
    looked_at = [entry for entry in entries if entry["series"]["verdict"] not in QUIET]
    quiet = [entry for entry in entries if entry["series"]["verdict"] in QUIET]
    detailed = looked_at + (quiet if len(entries) <= PLOTS_FOR_ALL else [])
    for entry in detailed[:MOST_DETAILED]:
        entry["detailed"] = True
    _draw(detailed[:MOST_PLOTS], record)
    return _template().render(
        record=record,
        newer=newer,
        export=record["export"],
        entries=entries,
        looked_at=looked_at,
        quiet=quiet,
        actions=_actions(looked_at),
        counts=_counts(entries),
        grid=_grid(entries),
        runs=_runs(record),
        labels=_labels(record),
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
    environment.filters["exact"] = lambda value: "" if value is None else f"{value:.5f}"
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
        "looked_at": series["verdict"] not in QUIET,
        "detailed": False,
        "line_plot": None,
        "line_words": "",
        "residual_plot": None,
        "recovery_plot": None,
    }


def _draw(entries: list[dict[str, Any]], record: dict[str, Any]) -> None:
    slopes = {(c["analyte"], c["channel"]): c["slope"] for c in record["calibrations"]}
    for entry in entries:
        series = entry["series"]
        entry["line_plot"] = plots.additions_plot(series, slopes.get((series["analyte"], series["channel"])))
        entry["line_words"] = line_words(series) if entry["line_plot"] else ""
        entry["residual_plot"] = plots.residuals_plot(series)
        entry["recovery_plot"] = plots.recoveries_plot(series)


def _actions(looked_at: list[dict[str, Any]]) -> list[tuple[str, list[dict[str, Any]]]]:
    """Group the series by what is to be done: one sentence, and every series that it holds for.

    A check that failed for a batch is one line, whatever the number of its samples.
    """
    batches: dict[tuple[str, str], list[dict[str, Any]]] = {}
    grouped: dict[str, list[dict[str, Any]]] = {}
    for entry in looked_at:
        series = entry["series"]
        failed = [c["check"] for c in series["checks"] if c["outcome"] == "fail"]
        batch = next((check for check in BATCH_CHECKS if check in failed and "inputs" not in failed), None)
        if batch is not None and series["verdict"] == "fail":
            batches.setdefault((batch, "" if batch == "stock" else series["analyte"]), []).append(entry)
        elif series["next_step"]["sentence"]:
            grouped.setdefault(series["next_step"]["sentence"], []).append(entry)
    lines: dict[str, list[dict[str, Any]]] = {}
    for (check, _), members in batches.items():
        names = several(list(dict.fromkeys(entry["series"]["sample"] for entry in members)), most=12)
        lines.setdefault(batch_step(check, names), []).extend(members)
    return [*lines.items(), *grouped.items()]


def _runs(record: dict[str, Any]) -> list[tuple[str, str]]:
    """Return name and plot of the run of each analyte that has check standards or spiked blanks, failing ones first."""
    keys = {(e["analyte"], e["channel"]): False for key in ("check_standards", "spiked_blanks") for e in record[key]}
    for series in record["series"]:
        key = (series["analyte"], series["channel"])
        if key in keys:
            keys[key] |= any(c["outcome"] == "fail" and c["check"] in BATCH_CHECKS for c in series["checks"])
    ordered = sorted(keys, key=lambda key: not keys[key])[:MOST_RUNS]
    drawn = ((" ".join(filter(None, key)), plots.run_plot(record, *key)) for key in ordered)
    return [(name, plot) for name, plot in drawn if plot is not None]


def _labels(record: dict[str, Any]) -> list[tuple[str, str, str]]:
    """Return every label once with its role and its sample."""
    found: dict[tuple[str, str, str], None] = {}
    for series in record["series"]:
        for solution in series["solutions"]:
            found[solution["label"], solution["role"], series["sample"]] = None
    for calibration in record["calibrations"]:
        for standard in calibration["standards"]:
            found[standard["label"], "standard", ""] = None
    for key, role in (("blanks", "blank"), ("check_standards", "check standard"), ("spiked_blanks", "spiked blank")):
        for entry in record[key]:
            found[entry["label"], role, ""] = None
    return list(found)


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
