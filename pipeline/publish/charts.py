"""Charts of the report: the demand curve on its points, what a fee would do, an interval."""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.publish.axes import (
    Axis,
    Numbers,
    band,
    grid,
    line,
    round_up,
    scaled_unit,
    tick_words,
    titled,
)
from pipeline.publish.curve import Curve
from pipeline.publish.markup import Html, tag
from pipeline.publish.rows import rows_of
from pipeline.publish.words import figure, number

SKEWED = 25.0
"""A greatest rate so many times the middle one makes the axis go by square roots."""


def is_skewed(rates: Numbers) -> bool:
    """Whether most points would lie on the axis of a plain drawing."""
    above = rates[rates > 0]
    return bool(len(above)) and float(above.max() / np.median(above)) > SKEWED


def demand_chart(
    points: pd.DataFrame,
    curve: Curve | None,
    *,
    currency: str,
    visitor: str,
    rate_words: str,
    name: str,
) -> Html:
    """Rates against travel cost, one circle per zone or class, and the curve with its band.

    Parameters
    ----------
    points : `cost, rate, size, label, outside`; size is a share of the greatest, 0 to 1.
    """
    cost, rate = points["cost"].to_numpy(), points["rate"].to_numpy()
    top = _top(rate, curve)
    step = round_up(max(float(cost.max()), 1e-9) / 6)
    x = Axis(0.0, float(np.ceil(cost.max() / step - 1e-9) * step), 84.0, 704.0)
    y = Axis(0.0, _headroom(top), 344.0, 46.0, root=is_skewed(rate))
    circles = [
        tag(
            "circle",
            tag("title", f"{p.label}: {currency} {number(p.cost)}, {number(p.rate)}"),
            cx=f"{float(x.at(p.cost)):.1f}",
            cy=f"{float(y.at(p.rate)):.1f}",
            r=f"{2.5 + 9 * float(np.sqrt(p.size)):.1f}",
            class_="point out" if p.outside else "point",
        )
        for p in rows_of(points.sort_values(["size", "label"], ascending=[False, True]))
    ]
    return titled(
        grid(x, y),
        _curve_band(x, y, curve),
        tag("g", *circles),
        _curve_line(x, y, curve),
        tag("text", rate_words, x=4, y=20, class_="head"),
        tag(
            "text",
            f"Travel cost, {currency} per {visitor} and trip",
            x=704,
            y=412,
            text_anchor="end",
            class_="head",
        ),
        title=name,
        width=720,
        height=420,
        class_="chart",
    )


def _top(rate: Numbers, curve: Curve | None) -> float:
    """Greatest figure to show: points and curve in full, a wide band only so far."""
    if curve is None:
        return float(rate.max())
    shown = max(float(rate.max()), float(curve.rate.max()))
    return max(shown, min(float(np.nan_to_num(curve.high).max()), 1.5 * shown))


def _headroom(top: float, steps: int = 5) -> float:
    step = round_up(max(top, 1e-9) / steps)
    return float(np.ceil(top / step - 1e-9) * step)


def _curve_band(x: Axis, y: Axis, curve: Curve | None) -> Html | None:
    if curve is None or np.isnan(curve.low).any():
        return None
    return tag("path", d=band(x.at(curve.cost), y.at(curve.low), y.at(curve.high)), class_="band")


def _curve_line(x: Axis, y: Axis, curve: Curve | None) -> Html | None:
    if curve is None:
        return None
    return tag("path", d=line(x.at(curve.cost), y.at(curve.rate)), class_="fitted")


def fee_charts(schedule: pd.DataFrame, *, currency: str) -> Html:
    """Visits, revenue and surplus against the fee, side by side, each with its interval."""
    panels = (
        ("visits", "Visits a year", ""),
        ("revenue", "Revenue a year", currency),
        ("consumer_surplus", "Surplus left to visitors a year", currency),
    )
    return tag(
        "div",
        *(
            _fee_chart(schedule, column, words, unit, currency)
            for column, words, unit in panels
            if schedule[column].notna().sum() > 1
        ),
        class_="trio",
    )


def _fee_chart(schedule: pd.DataFrame, column: str, words: str, unit: str, currency: str) -> Html:
    rows = schedule.dropna(subset=[column]).sort_values("fee")
    low, high = rows[f"{column}_ci_low"], rows[f"{column}_ci_high"]
    has_band = bool(low.notna().all() and high.notna().all())
    top = float(max(rows[column].max(), high.max() if has_band else 0.0, 1e-9))
    divisor, size = scaled_unit(top)
    x = Axis(0.0, max(float(rows["fee"].max()), 1e-9), 52.0, 306.0)
    y = Axis(0.0, _headroom(top / divisor, 4), 186.0, 40.0)
    across = x.at(rows["fee"].to_numpy())
    unit_words = " ".join(part for part in (unit, size) if part)
    head = f"{words}, {unit_words}" if unit_words else words
    return titled(
        grid(x, y, x_ticks=5, y_ticks=4),
        tag(
            "path",
            d=band(across, y.at(low.to_numpy() / divisor), y.at(high.to_numpy() / divisor)),
            class_="band",
        )
        if has_band
        else None,
        tag("path", d=line(across, y.at(rows[column].to_numpy() / divisor)), class_="fitted"),
        tag(
            "line",
            y1=40,
            y2=186,
            class_="fee-mark",
            visibility="hidden",
            data_start=x.start,
            data_end=x.end,
            data_top=x.high,
        ),
        tag("text", head, x=4, y=18, class_="head"),
        tag("text", f"added fee, {currency}", x=306, y=226, text_anchor="end"),
        title=f"{words} against the added fee",
        width=320,
        height=234,
        class_="chart small",
    )


def interval_bar(value: float, low: float, high: float, *, words: str) -> Html:
    """The headline as a bar from zero: what is certain, what is not, and where the value lies."""
    divisor, _ = scaled_unit(high)
    least = min(0.0, low / divisor)
    x = Axis(least, _headroom(high / divisor), 8.0, 452.0)
    marks = []
    for tick in x.ticks(4):
        mark = f"{float(x.at(tick)):.1f}"
        marks.append(tag("line", x1=mark, x2=mark, y1=34, y2=40, class_="tick"))
        anchor = "start" if tick == x.low else "end" if tick == x.high else "middle"
        marks.append(tag("text", tick_words(tick), x=mark, y=58, text_anchor=anchor))
    start, left, right, at = (
        float(x.at(v)) for v in (0.0, low / divisor, high / divisor, value / divisor)
    )
    return titled(
        tag("line", x1=8, x2=452, y1=34, y2=34, class_="axis"),
        tag(
            "rect",
            x=f"{start:.1f}",
            y=12,
            width=f"{max(left - start, 0):.1f}",
            height=16,
            class_="sure",
        ),
        tag("rect", x=f"{left:.1f}", y=12, width=f"{right - left:.1f}", height=16, class_="unsure"),
        tag("line", x1=f"{at:.1f}", x2=f"{at:.1f}", y1=6, y2=34, class_="needle"),
        *marks,
        title=f"{words}: {figure(value, low, high)}",
        width=460,
        height=64,
        class_="chart gauge",
    )
