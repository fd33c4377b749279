"""The fee slider of the report: markup that the page's script brings to life."""

from __future__ import annotations

import numpy as np

from pipeline.publish.feecurve import FeeCurve
from pipeline.publish.markup import Html, tag


def fee_tool(site_id: str, curve: FeeCurve, *, currency: str, visitor: str) -> Html:
    """A slider, the same as a number to type, and what the fee would do.

    It is hidden until the script has run, which fills the figures in.
    """
    top = float(curve.table["fee"].max())
    fees = curve.table["fee"].to_numpy()
    start = float(fees[np.abs(fees - top / 4).argmin()])
    bounds = {
        "min": 0,
        "max": f"{top:.10g}",
        "step": f"{curve.step:.10g}",
        "value": f"{start:.10g}",
    }
    name = f"fee-{site_id}"
    slider = tag("input", type="range", id=name, **bounds)
    typed = tag("input", type="number", aria_label=f"Added fee, {currency}, typed", **bounds)
    words = (
        ("visits", "Visits a year"),
        ("revenue", f"Revenue, {currency} a year"),
        ("consumer_surplus", f"Surplus left to visitors, {currency} a year"),
        ("surplus_lost", f"Surplus lost, {currency} a year"),
    )
    rows = [
        tag(
            "tr",
            tag("th", label, scope="row"),
            tag("td", tag("data", data_measure=measure, value=""), class_="n"),
            tag("td", class_="n"),
        )
        for measure, label in words
    ]
    head = tag(
        "tr",
        tag("th", "At this fee", scope="col"),
        tag("th", "Estimate", scope="col", class_="n"),
        tag("th", "Interval", scope="col", class_="n"),
    )
    grid = tag("table", tag("thead", head), tag("tbody", *rows))
    label = tag("label", f"Added fee, {currency} per {visitor} and visit", for_=name)
    chosen = tag("output", for_=name)
    controls = tag("div", label, slider, typed, chosen, class_="controls")
    return tag("div", controls, grid, class_="fee-tool", data_site=site_id, hidden="hidden")
