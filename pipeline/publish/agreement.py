"""Charts of what was reported against what was routed: a mark per band of distance.

Records are people's, so the marks are means of bands, as the table beside the charts has them.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.publish.axes import Axis, grid, line, round_up, titled
from pipeline.publish.markup import Html, tag
from pipeline.publish.rows import rows_of
from pipeline.publish.words import count, number

ALL = "all"


def agreement_charts(check: pd.DataFrame, *, currency: str) -> Html | None:
    """One small chart for each measure that has bands; None without any."""
    charts = [
        _chart(str(measure), bands, str(bands["unit"].iloc[0]).replace("currency", currency))
        for measure, bands in check[check["band"] != ALL].groupby("measure", sort=False)
    ]
    return tag("div", *charts, class_="trio") if charts else None


def _chart(measure: str, bands: pd.DataFrame, unit: str) -> Html:
    """Reported over routed means, with the line on which the two agree."""
    means = bands[["reported_mean", "routed_mean"]].to_numpy(dtype=float)
    step = round_up(max(float(means.max()), 1e-9) / 4)
    top = float(np.ceil(means.max() / step - 1e-9) * step) or step
    x, y = Axis(0.0, top, 52.0, 306.0), Axis(0.0, top, 186.0, 40.0)
    ends = np.array([0.0, top])
    most = float(bands["records"].max())
    circles = [
        tag(
            "circle",
            tag(
                "title",
                f"{row.band}: reported {number(row.reported_mean)}, routed "
                f"{number(row.routed_mean)} {unit}; {count(row.records, 'record')}",
            ),
            cx=f"{float(x.at(row.routed_mean)):.1f}",
            cy=f"{float(y.at(row.reported_mean)):.1f}",
            r=f"{3 + 5 * float(np.sqrt(row.records / most)):.1f}",
            class_="point",
        )
        for row in rows_of(bands)
    ]
    return titled(
        grid(x, y, x_ticks=4, y_ticks=4),
        tag("path", d=line(x.at(ends), y.at(ends)), class_="fitted"),
        tag("g", *circles),
        tag("text", f"{measure.capitalize()}, reported, {unit}", x=4, y=18, class_="head"),
        tag("text", "routed; on the line the two agree", x=306, y=226, text_anchor="end"),
        title=f"{measure.capitalize()}: reported against routed, means by band of distance",
        width=320,
        height=234,
        class_="chart small",
    )
