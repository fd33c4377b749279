"""Reported distances, times and spending beside the routed ones."""

from __future__ import annotations

import pandas as pd

from pipeline.publish.agreement import agreement_charts
from pipeline.publish.markup import Html, join, table
from pipeline.publish.results import Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import number, whole

FIGURES = ("reported_mean", "routed_mean", "bias", "mean_absolute_error", "median_ratio")


def hide_few(check: pd.DataFrame | None, *, below: int) -> pd.DataFrame | None:
    """The table without the bands where any measure has few records.

    The figures of one band that is left out could be worked out from all and the others; so
    where one is, every band goes, and only the row of all records stays.
    """
    if check is None or not below:
        return check
    few = check[check["records"] < below]
    kept = check[~check["measure"].isin(few["measure"]) | (check["band"] == "all")]
    return kept[kept["records"] >= below].reset_index(drop=True)


def reported_table(results: Results) -> Html | None:
    """Bias and error by distance, drawn and as a table; None where nothing is reported."""
    check = results.reported_check
    if check is None or check.empty:
        return None
    rows = [
        (
            str(row.measure),
            row.band,
            row.unit.replace("currency", results.currency),
            whole(row.records),
            *(number(getattr(row, name)) for name in FIGURES),
        )
        for row in rows_of(check)
    ]
    head = (
        "Measure",
        "Routed distance",
        "Unit",
        "Records",
        "Reported, mean",
        "Routed, mean",
        "Bias",
        "Mean absolute error",
        "Reported ÷ routed, median",
    )
    caption = "Reported against routed; bias is routed less reported"
    grid = table(head, rows, caption=caption, numbers=range(3, 9))
    return join([agreement_charts(check, currency=results.currency), grid])
