"""Figures for papers and slides: demand and fees of every site as PNG, SVG and PDF.

Drawn by matplotlib without a window; no time and no random name goes into a file, so that the
same run gives the same bytes.
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pandas as pd
from matplotlib import rc_context
from matplotlib.figure import Figure as Canvas

from pipeline.publish.axes import scaled_unit
from pipeline.publish.evidence import demand_points
from pipeline.publish.results import Headline, Results
from pipeline.publish.words import level, model_words

INK, LINE, BAND, POINT = "#17203a", "#a8480a", "#f5d9c3", "#1b3a73"
STYLE: Any = {
    "svg.hashsalt": "roadworth",
    "svg.fonttype": "none",
    "font.size": 9,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": INK,
}
UNDATED: dict[str, dict[str, Any]] = {
    "png": {"Software": None},
    "svg": {"Date": None, "Creator": None},
    "pdf": {"CreationDate": None, "Producer": None, "Creator": None},
}
PANELS = (
    ("visits", "Visits a year"),
    ("revenue", "Revenue a year"),
    ("consumer_surplus", "Surplus left a year"),
)


def draw_figures(results: Results) -> dict[str, Canvas]:
    """Figures by file name without ending: `demand_<site>` and `fees_<site>`."""
    found: dict[str, Canvas] = {}
    with rc_context(STYLE):
        for headline in results.headlines:
            name = re.sub(r"[^a-z0-9]+", "_", headline.site_id.lower()).strip("_")
            if not demand_points(results, headline).empty:
                found[f"demand_{name}"] = _demand(results, headline)
            if headline.site_id in results.fees:
                found[f"fees_{name}"] = _fees(results, headline)
    return found


def write_figures(figures: dict[str, Canvas], folder: Path) -> None:
    """Write every figure as PNG (200 dots per inch), SVG and PDF."""
    with rc_context(STYLE):
        for name, canvas in figures.items():
            for ending, metadata in UNDATED.items():
                canvas.savefig(folder / f"{name}.{ending}", dpi=200, metadata=metadata)


def _demand(results: Results, headline: Headline) -> Canvas:
    points = demand_points(results, headline)
    canvas = Canvas(figsize=(6.3, 3.9), layout="constrained")
    axes = canvas.subplots()
    for outside, group in points.groupby("outside"):
        face = "none" if outside else POINT
        axes.scatter(
            group["cost"],
            group["rate"],
            s=6 + 90 * group["size"],
            facecolor=face,
            edgecolor=POINT,
            alpha=0.55,
            linewidth=0.6,
        )
    curve = results.curves.get(headline.site_id)
    if curve is not None:
        sure = level(results.study.surplus.confidence)
        axes.fill_between(curve.cost, curve.low, curve.high, color=BAND, label=f"{sure} interval")
        axes.plot(curve.cost, curve.rate, color=LINE, label=model_words(headline.model))
        axes.legend(frameon=False)
    per_zone = results.zone_table is not None
    axes.set_ylabel("Visits per 1,000 people and year" if per_zone else "Trips per person and year")
    axes.set_xlabel(f"Travel cost, {results.currency} per {results.visitor} and trip")
    axes.set_title(f"Demand for visits: {headline.site_name}", loc="left")
    top = float(points["rate"].max())
    axes.set_ylim(0, 1.08 * top if top > 0 else 1)
    axes.set_xlim(left=0)
    return canvas


def _fees(results: Results, headline: Headline) -> Canvas:
    table: pd.DataFrame = results.fees[headline.site_id].table
    canvas = Canvas(figsize=(8.6, 2.9), layout="constrained")
    for axes, (column, words) in zip(canvas.subplots(1, 3), PANELS, strict=True):
        ends = table[[f"{column}_ci_low", f"{column}_ci_high"]]
        divisor, size = scaled_unit(float(max(table[column].max(), ends.max(axis=None))))
        low, high = (ends[name] / divisor for name in ends)
        axes.fill_between(table["fee"], low, high, color=BAND)
        axes.plot(table["fee"], table[column] / divisor, color=LINE)
        money = results.currency if column != "visits" else ""
        unit = " ".join(part for part in (money, size) if part)
        axes.set_title(f"{words}, {unit}" if unit else words, loc="left", fontsize=9)
        axes.set_xlabel(f"Added fee, {results.currency}")
        axes.set_ylim(bottom=0)
        axes.set_xlim(left=0)
    return canvas
