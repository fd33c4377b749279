"""What the assumptions do: other alternatives' surplus beside the study's, the strongest first."""

from __future__ import annotations

import math
from typing import Any

import pandas as pd

from pipeline.publish.axes import Axis, round_up, scaled_unit, tick_words, titled
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Headline, Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import count, figure, interval, is_known, level, model_words

MOST_BARS = 24
ROW = 26.0
LABELS = 292.0
MONEY = (
    "surplus_per_trip",
    "ci_low",
    "ci_high",
    "annual_surplus",
    "annual_ci_low",
    "annual_ci_high",
    "change_percent",
)


def coarse(sensitivity: pd.DataFrame) -> pd.DataFrame:
    """Figures to three significant digits.

    Where small counts are hidden, two market extents must not give a hidden zone's visits away
    by their difference.
    """
    rounded = {
        name: [float(f"{value:.3g}") for value in sensitivity[name]]
        for name in MONEY
        if name in sensitivity
    }
    return sensitivity.assign(**rounded)


def has_effects(results: Results) -> bool:
    """Whether any alternative was run."""
    return bool(results.sensitivity["changed"].notna().any())


def effects_figure(results: Results, headline: Headline) -> Html:
    """The figure of one site, what it shows in words, and the table behind it."""
    rows = results.sensitivity[results.sensitivity["site_id"] == headline.site_id]
    study, others = rows[rows["changed"].isna()], rows[rows["changed"].notna()]
    if study.empty or others.empty:
        return tag("p", "No alternative was run for this site.")
    base = study.iloc[0]
    ordered = others.assign(size=others["change_percent"].abs()).sort_values(
        ["size", "variant"], ascending=[False, True], na_position="last", kind="stable"
    )
    known = ordered[ordered["annual_surplus"].notna()]
    grid = _table(results, pd.concat([study, ordered]))
    if known.empty or not is_known(base["annual_surplus"]):
        return join([tag("p", "No alternative gives a finite surplus."), grid])
    drawn = known.head(MOST_BARS)
    chart = effects_chart(drawn, base, currency=results.currency, name=headline.site_name)
    words = _words(results, base, known, len(ordered))
    wide = tag(
        "div",
        chart,
        class_="wide effects",
        tabindex="0",
        role="region",
        aria_label="Annual surplus",
    )
    return join([tag("figure", wide, tag("figcaption", words)), grid])


def _words(results: Results, base: pd.Series, known: pd.DataFrame, number_run: int) -> str:
    sure = level(results.study.surplus.confidence)
    low, high = float(known["annual_surplus"].min()), float(known["annual_surplus"].max())
    words = (
        f"Bars run from the study's annual surplus to the alternative's; thin lines are the "
        f"alternatives' own {sure} intervals, the shade is the study's. "
        f"{count(number_run, 'alternative')}: {results.currency} {interval(low, high, low)} a year."
    )
    outside = known[
        (known["annual_surplus"] < base["annual_ci_low"])
        | (known["annual_surplus"] > base["annual_ci_high"])
    ]
    if len(outside):
        words += f" {count(len(outside), 'alternative')} outside the study's own interval."
    if len(known) > MOST_BARS:
        words += f" The {MOST_BARS} strongest are drawn."
    return words


def effects_chart(rows: pd.DataFrame, base: pd.Series, *, currency: str, name: str) -> Html:
    """One bar per alternative, from the study's annual surplus to its own.

    Parameters
    ----------
    rows : alternatives with `variant, annual_surplus, annual_ci_low, annual_ci_high,
        change_percent`, in the order to draw them.
    base : the study's own row.
    """
    ends = [rows["annual_surplus"].max(), base["annual_ci_high"], base["annual_surplus"]]
    top = max(float(end) for end in ends if is_known(float(end)))
    divisor, size = scaled_unit(top)
    step = round_up(1.12 * top / divisor / 4)
    x = Axis(0.0, math.ceil(1.12 * top / divisor / step - 1e-9) * step, LABELS, 640.0)
    bottom = 40.0 + ROW * len(rows)
    unit = " ".join(part for part in (currency, size) if part)
    return titled(
        _frame(x, base, divisor, bottom),
        *(
            _bar(x, row, float(base["annual_surplus"]), divisor, 40.0 + ROW * place)
            for place, row in enumerate(rows_of(rows))
        ),
        _line_at(x, float(base["annual_surplus"]) / divisor, bottom, "needle"),
        tag("text", f"Annual surplus, {unit}", x=4, y=20, class_="head"),
        title=f"Annual surplus of {name} under other assumptions",
        width=720,
        height=bottom + 34,
        class_="chart",
    )


def _frame(x: Axis, base: pd.Series, divisor: float, bottom: float) -> Html:
    """Ticks, their lines, and the study's interval as a shade."""
    parts = []
    low, high = float(base["annual_ci_low"]), float(base["annual_ci_high"])
    if is_known(low, high):
        left, right = float(x.at(low / divisor)), float(x.at(high / divisor))
        shade = {"x": f"{left:.1f}", "width": f"{right - left:.1f}"}
        parts.append(tag("rect", **shade, y=32, height=f"{bottom - 32:.1f}", class_="band"))
    for tick in x.ticks(4):
        parts.append(_line_at(x, tick, bottom, "grid"))
        at = f"{float(x.at(tick)):.1f}"
        parts.append(tag("text", tick_words(tick), x=at, y=bottom + 20, text_anchor="middle"))
    return tag("g", *parts, class_="axes")


def _line_at(x: Axis, value: float, bottom: float, class_: str) -> Html:
    at = f"{float(x.at(value)):.1f}"
    return tag("line", x1=at, x2=at, y1=32, y2=f"{bottom:.1f}", class_=class_)


def _bar(x: Axis, row: Any, study: float, divisor: float, top: float) -> Html:
    """Name, bar, interval and change in per cent of one alternative."""
    middle = top + ROW / 2
    here, there = float(x.at(study / divisor)), float(x.at(row.annual_surplus / divisor))
    ends = (row.annual_ci_low, row.annual_ci_high)
    whisker = None
    if is_known(*ends):
        left, right = (f"{float(x.at(end / divisor)):.1f}" for end in ends)
        whisker = tag("line", x1=left, x2=right, y1=middle, y2=middle, class_="axis")
    change = f"{row.change_percent:+.0f} %".replace("-", "−")
    return tag(
        "g",
        tag("title", f"{row.variant}: {row.from_value} to {row.to_value}, {change}"),
        tag("text", row.variant, x=LABELS - 10, y=middle, dy=".35em", text_anchor="end"),
        tag(
            "rect",
            x=f"{min(here, there):.1f}",
            y=f"{top + 6:.1f}",
            width=f"{max(abs(there - here), 0.5):.1f}",
            height=ROW - 12,
            class_="unsure",
        ),
        whisker,
        tag("circle", cx=f"{there:.1f}", cy=middle, r=4, class_="point"),
        tag("text", change, x=716, y=middle, dy=".35em", text_anchor="end"),
    )


def _table(results: Results, rows: pd.DataFrame) -> Html:
    """The alternatives as a table, the study first."""
    head = (
        "Alternative",
        "From",
        "To",
        "Surplus per trip",
        "Surplus a year",
        "Change, %",
        "Model",
        "Remark",
    )
    grid = table(
        head,
        [_cells(row) for row in rows_of(rows)],
        caption=f"The study under other assumptions; money in {results.currency}",
        numbers=(3, 4, 5),
    )
    return tag("details", tag("summary", "The alternatives as a table"), grid)


def _cells(row: Any) -> tuple[object, ...]:
    per_trip = figure(row.surplus_per_trip, row.ci_low, row.ci_high)
    annual = figure(row.annual_surplus, row.annual_ci_low, row.annual_ci_high)
    valued = is_known(row.annual_surplus)
    return (
        row.variant,
        "" if pd.isna(row.from_value) else row.from_value,
        "" if pd.isna(row.to_value) else row.to_value,
        per_trip if valued else "–",
        annual if valued else "–",
        f"{row.change_percent:+.1f}".replace("-", "−") if is_known(row.change_percent) else "–",
        "" if pd.isna(row.model) else model_words(str(row.model)),
        "" if pd.isna(row.note) else row.note,
    )
