"""Plots of a page and of mails, drawn from the JSON record alone, with bytes that depend on nothing else.

Greys and one blue, told apart by dash, marker and label: they print in grey and need no colour vision.
"""

from __future__ import annotations

import base64
import io
import math
import re
from typing import TYPE_CHECKING, Any

import matplotlib as mpl
import numpy as np
from matplotlib.figure import Figure
from scipy import stats

from rules.figures import figure as figure_of
from rules.limits import Limit

if TYPE_CHECKING:
    from collections.abc import Iterable

    from matplotlib.axes import Axes

INK, LINE, SHADE = "#1c2430", "#1f4e8c", "#c9d3df"
#: Points that a drawn line or band has.
STEPS = 60
#: Sizes of a plot in inches: on a page, and in a mail, where its writing must be read on a phone.
PAGE, PHONE = (4.8, 3.7), (4.2, 3.7)
_STYLE: Any = {"svg.hashsalt": "spikewarden", "svg.fonttype": "path", "font.size": 9.0, "axes.edgecolor": INK}


def additions_plot(series: dict[str, Any], calibration_slope: float | None) -> str | None:
    """Draw the additions line of a series as a ``data:`` address of an SVG; see `_additions`."""
    with mpl.rc_context(_STYLE):
        figure = _additions(series, calibration_slope)
        return None if figure is None else _address(figure)


def additions_picture(series: dict[str, Any], calibration_slope: float | None) -> bytes | None:
    """Draw the additions line of a series as a PNG, for a mail; see `_additions`."""
    with mpl.rc_context(_STYLE):
        figure = _additions(series, calibration_slope, PHONE)
        if figure is None:
            return None
        out = io.BytesIO()
        figure.savefig(out, format="png", dpi=180, metadata={"Software": None})
        return out.getvalue()


def _additions(
    series: dict[str, Any], calibration_slope: float | None, size: tuple[float, float] = PAGE
) -> Figure | None:
    """Draw the additions line of a series over the concentration in the sample.

    Parameters
    ----------
    series
        An entry of ``series`` in the record.
    calibration_slope
        Slope of the calibration (signal per unit in the vessel), drawn dashed through the same intercept: the matrix
        effect is the angle between both.
    size
        Width and height in inches.

    Returns
    -------
    Figure or None
        None where no line was computed.
    """
    fit = series["fit"]
    points = [p for p in series["solutions"] if None not in (p["added"], p["signal"]) and p["dilution"]]
    if fit is None or fit["slope"] is None or fit["intercept"] is None or not points:
        return None
    # what is added to the aliquot counts in the sample as if it had been diluted with it
    predilution = max((p["predilution"] or 1.0 for p in points), default=1.0)
    x = predilution * np.array([p["added"] / p["dilution"] for p in points])
    y = np.array([p["signal"] / p["dilution"] for p in points])
    slope, intercept = fit["slope"] / predilution, fit["intercept"]
    crossing = -intercept / slope if slope > 0 else 0.0
    found = series["additions_result"]
    interval = (found["low"], found["high"]) if found and found["value"] else ()
    ends: list[float] = [-end for end in interval if end is not None]
    reach = np.linspace(min(crossing * 1.08, *ends, 0.0), x.max() * 1.04, STEPS)
    figure = Figure(figsize=size, layout="constrained")
    axes = figure.subplots()
    axes.axhline(0, color=INK, linewidth=0.8)
    axes.axvline(0, color=INK, linewidth=0.8, linestyle=":")
    half = confidence_band(fit, reach / predilution, series["confidence"])
    middle = intercept + slope * reach
    if half is not None:
        axes.fill_between(
            reach, middle - half, middle + half, color=SHADE, label=f"{100 * series['confidence']:g} % band of the line"
        )
    axes.plot(reach, middle, color=LINE, label="additions")
    if calibration_slope is not None:
        dashed = intercept + calibration_slope / predilution * reach
        effect = series["matrix_effect"]["value"]
        told = "" if effect is None else f" (matrix effect {figure_of(effect, 2)} %)"
        axes.plot(reach, dashed, color=INK, linestyle="--", label=f"slope of the calibration{told}")
    axes.plot(x, y, "o", color=INK, markersize=5, label="solutions")
    if len(ends) == 2:
        axes.plot(ends, [0, 0], "|-", color=LINE, linewidth=3, markersize=12, label="interval of the result")
    low, high = min(0.0, float(middle.min())), float(max(y.max(), middle.max()))
    axes.set_ylim(low - 0.06 * (high - low), high + 0.06 * (high - low))
    axes.set_xlabel(f"added to the sample ({series['result']['unit']}); left of zero: found in it")
    axes.set_ylabel("signal / dilution")
    figure.legend(loc="outside upper left", ncols=2, frameon=False, fontsize=8)
    return figure


def confidence_band(fit: dict[str, Any], at: np.ndarray, confidence: float) -> np.ndarray | None:
    """Return half the width of the line's confidence band over additions to the aliquot; None without scatter.

    Source: the variance of a fitted mean, var(a) + 2 x cov(a, b) + x² var(b), with Student's t.
    """
    parts = fit["intercept_variance"], fit["covariance"], fit["slope_variance"]
    if None in parts or fit["dof"] < 1:
        return None
    intercept, both, slope = parts
    factor = float(stats.t.ppf((1 + confidence) / 2, fit["dof"]))
    return np.asarray(factor * np.sqrt(np.maximum(intercept + 2 * at * both + at**2 * slope, 0.0)))


def recoveries_plot(series: dict[str, Any]) -> str | None:
    """Draw the recovery of each addition with its interval between the limits; none without recoveries."""
    listed = series["recoveries"]
    if not listed:
        return None
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(PAGE[0], 1.1 + 0.32 * len(listed)), layout="constrained")
        axes = figure.subplots()
        axes.axvline(100, color=INK, linewidth=0.8, linestyle=":")
        _limits(axes, series, "recovery", vertical=True)
        for place, entry in enumerate(listed):
            width = entry["expanded_uncertainty"]
            axes.errorbar(
                entry["recovery"],
                place,
                xerr=width if width is not None and math.isfinite(width) else None,
                fmt="o",
                color=LINE,
                capsize=4,
            )
        _names(axes, [entry["label"] for entry in listed])
        axes.set_xlabel("recovery (%), with its interval")
        return _address(figure)


def residuals_plot(series: dict[str, Any]) -> str | None:
    """Draw the residual of each solution in percent between the limits; none without a line."""
    listed = [p for p in series["solutions"] if p["residual_percent"] is not None]
    if not listed:
        return None
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(PAGE[0], 1.1 + 0.3 * len(listed)), layout="constrained")
        axes = figure.subplots()
        axes.axvline(0, color=INK, linewidth=0.8)
        _limits(axes, series, "residual", vertical=True, mirrored=True)
        for place, point in enumerate(listed):
            axes.plot([0, point["residual_percent"]], [place, place], color=LINE, linewidth=2)
            axes.plot(point["residual_percent"], place, "o", color=LINE)
        _names(axes, [point["label"] for point in listed])
        axes.set_xlabel("residual (% of the fitted signal)")
        return _address(figure)


def run_plot(record: dict[str, Any], analyte: str, channel: str | None) -> str | None:
    """Draw check standards and spiked blanks of an analyte in percent over the run, and blanks below.

    Failing brackets are shaded. None where there is nothing to draw.
    """

    def own(key: str) -> list[dict[str, Any]]:
        return [e for e in record[key] if (e["analyte"], e["channel"]) == (analyte, channel)]

    checks = [e for e in own("check_standards") if e["percent_of_nominal"] is not None]
    spiked = [e for e in own("spiked_blanks") if e["recovery"] is not None]
    blanks = [e for e in own("blanks") if e["signal"] is not None]
    series = [s for s in record["series"] if (s["analyte"], s["channel"]) == (analyte, channel)]
    if not checks and not spiked:
        return None
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(PAGE[0], 3.4 if blanks else 2.4), layout="constrained")
        rows: Any = figure.subplots(2 if blanks else 1, 1, sharex=True, height_ratios=[3, 2] if blanks else None)
        axes = rows[0] if blanks else rows
        axes.axhline(100, color=INK, linewidth=0.8, linestyle=":")
        if series:
            _limits(axes, series[0], "check_standard")
        for begin, end in _failing_brackets(series):
            axes.axvspan(begin, end, color=SHADE, hatch="///", label="failing bracket")
        _dots(axes, checks, "percent_of_nominal", "s-", "check standards")
        _dots(axes, spiked, "recovery", "^", "spiked blanks")
        axes.set_ylabel("% of nominal")
        handles = dict(zip(*reversed(axes.get_legend_handles_labels()), strict=True))
        axes.legend(handles.values(), handles.keys(), frameon=False, fontsize=8)
        if blanks:
            _dots(rows[1], blanks, "signal", "o", "blanks")
            rows[1].axhline(0, color=INK, linewidth=0.8)
            rows[1].set_ylabel("signal of blanks")
        (rows[1] if blanks else axes).set_xlabel("place in the run")
        return _address(figure)


def _dots(axes: Axes, entries: Iterable[dict[str, Any]], value: str, form: str, label: str) -> None:
    ordered = sorted(entries, key=lambda entry: int(entry["run_order"]))
    if ordered:
        places = [entry["run_order"] for entry in ordered]
        axes.plot(places, [entry[value] for entry in ordered], form, color=LINE, linewidth=0.8, label=label)


def _failing_brackets(series: Iterable[dict[str, Any]]) -> list[tuple[float, float]]:
    """Return from where to where in the run the samples lie whose bracket failed."""
    spans = []
    for one in series:
        bracket = next((c for c in one["checks"] if c["check"] == "bracket"), None)
        places = [p["run_order"] for p in one["solutions"]]
        if bracket is not None and bracket["outcome"] == "fail" and places:
            spans.append((min(places) - 0.5, max(places) + 0.5))
    return spans


def _limits(axes: Axes, series: dict[str, Any], check: str, *, vertical: bool = False, mirrored: bool = False) -> None:
    """Draw the limits of a check, failing solid and warning dashed; `mirrored` for a limit on the absolute value."""
    text = next((c["limit"] for c in series["checks"] if c["check"] == check), "")
    for word, limit in re.findall(r"(fail|warn) unless ([^;]+)", text):
        parsed = Limit.parse(limit)
        bounds = {b for b in (parsed.low, parsed.high) if math.isfinite(b)}
        for bound in bounds | ({-b for b in bounds} if mirrored else set()):
            draw = axes.axvline if vertical else axes.axhline
            draw(bound, color=INK, linewidth=1.2, linestyle="-" if word == "fail" else "--")


def _names(axes: Axes, labels: list[str]) -> None:
    # A label is data of the laboratory: a dollar sign in it must not start a formula.
    axes.set_yticks(range(len(labels)), [label.replace("$", r"\$") for label in labels])
    axes.set_ylim(len(labels) - 0.5, -0.5)


def _address(figure: Figure) -> str:
    out = io.BytesIO()
    figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    return "data:image/svg+xml;base64," + base64.b64encode(out.getvalue()).decode("ascii")
