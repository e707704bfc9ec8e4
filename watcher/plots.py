"""Plots of a page, drawn from the JSON record alone, with bytes that depend on nothing else.

Greys and one blue, told apart by dash, marker and label: they print in grey and need no colour vision.
"""

from __future__ import annotations

import base64
import io
import math
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.figure import Figure
from scipy import stats

from rules.figures import figure as figure_of

INK, LINE, SHADE = "#1c2430", "#1f4e8c", "#c9d3df"
#: Points that a drawn line or band has.
STEPS = 60
#: Sizes of a plot in inches: on a page, and in a mail, where its writing must be read on a phone.
PAGE, PHONE = (6.4, 3.6), (4.2, 3.5)
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


def additions_words(series: dict[str, Any]) -> str:
    """Say what the plot of a series shows, with its numbers."""
    fit = series["fit"]
    name = " ".join(part for part in (series["sample"], series["analyte"], series["channel"]) if part)
    line = f"slope {figure_of(fit['slope'])}, intercept {figure_of(fit['intercept'])}, {fit['n']} solutions"
    return f"Additions line of {name}: {line}; result {series['result']['text']}"


def _additions(
    series: dict[str, Any], calibration_slope: float | None, size: tuple[float, float] = PAGE
) -> Figure | None:
    """Draw the additions line of a series.

    Parameters
    ----------
    series
        An entry of ``series`` in the record.
    calibration_slope
        Slope of the calibration (signal per unit in the vessel), drawn dashed through the same intercept.
    size
        Width and height in inches.

    Returns
    -------
    Figure or None
        None where no line was computed. The axis is the concentration in the aliquot.
    """
    fit = series["fit"]
    points = [p for p in series["solutions"] if None not in (p["added"], p["signal"]) and p["dilution"]]
    if fit is None or fit["slope"] is None or fit["intercept"] is None or not points:
        return None
    x = np.array([p["added"] / p["dilution"] for p in points])
    y = np.array([p["signal"] / p["dilution"] for p in points])
    slope, intercept = fit["slope"], fit["intercept"]
    crossing = -intercept / slope if slope > 0 else 0.0
    reach = np.linspace(min(crossing * 1.08, 0.0), x.max() * 1.04, STEPS)
    figure = Figure(figsize=size, layout="constrained")
    axes = figure.subplots()
    axes.axhline(0, color=INK, linewidth=0.8)
    axes.axvline(0, color=INK, linewidth=0.8, linestyle=":")
    half = confidence_band(fit, points, reach)
    if half is not None:
        middle = intercept + slope * reach
        axes.fill_between(reach, middle - half, middle + half, color=SHADE, label="95 % band of the line")
    axes.plot(reach, intercept + slope * reach, color=LINE, label="additions")
    if calibration_slope is not None:
        dashed = intercept + calibration_slope * reach
        axes.plot(reach, dashed, color=INK, linestyle="--", label="slope of the calibration")
    axes.plot(x, y, "o", color=INK, markersize=5, label="solutions")
    found = series["additions_result"]
    if crossing < 0 and found and found["value"] and None not in (found["low"], found["high"]):
        ends = [found["high"] / found["value"] * crossing, found["low"] / found["value"] * crossing]
        axes.plot(ends, [0, 0], "|-", color=LINE, linewidth=3, markersize=12, label="interval of the result")
    axes.set_xlabel(f"concentration in the aliquot ({series['result']['unit']}), below zero: found there")
    axes.set_ylabel("signal / dilution")
    axes.legend(frameon=False, fontsize=8)
    return figure


def confidence_band(fit: dict[str, Any], points: list[dict[str, Any]], at: np.ndarray) -> np.ndarray | None:
    """Return half the width of the line's 95 % confidence band.

    Only where the record determines it: constant variance, equal dilutions, degrees of freedom left. Elsewhere none
    is drawn rather than a wrong one. Source: the textbook variance of a fitted mean, s² (1/n + (x - x̄)²/Sxx).
    """
    dilutions = {p["dilution"] for p in points}
    determined = fit["variance"] == "constant" and len(dilutions) == 1 and fit["dof"] > 0
    if not determined or fit["residual_sd"] is None or fit["n"] != len(points):
        return None
    x = np.array([p["added"] / p["dilution"] for p in points])
    spread = float(((x - x.mean()) ** 2).sum())
    if spread == 0:
        return None
    scatter = fit["residual_sd"] / dilutions.pop()
    factor = float(stats.t.ppf(0.975, fit["dof"]))
    return np.asarray(factor * scatter * np.sqrt(1 / len(x) + (at - x.mean()) ** 2 / spread))


def recoveries_plot(series: dict[str, Any]) -> str | None:
    """Draw the recovery of each addition with its interval, as a ``data:`` address; none without recoveries."""
    listed = series["recoveries"]
    if not listed:
        return None
    with mpl.rc_context(_STYLE):
        figure = Figure(figsize=(6.4, 0.9 + 0.32 * len(listed)), layout="constrained")
        axes = figure.subplots()
        axes.axvline(100, color=INK, linewidth=0.8, linestyle=":")
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
        # A label is data of the laboratory: a dollar sign in it must not start a formula.
        axes.set_yticks(range(len(listed)), [entry["label"].replace("$", r"\$") for entry in listed])
        axes.set_ylim(len(listed) - 0.5, -0.5)
        axes.set_xlabel("recovery (%)")
        return _address(figure)


def _address(figure: Figure) -> str:
    out = io.BytesIO()
    figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    return "data:image/svg+xml;base64," + base64.b64encode(out.getvalue()).decode("ascii")
