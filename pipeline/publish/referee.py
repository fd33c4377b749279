"""For a referee: what speaks for and against the model, and what would change the answer."""

from __future__ import annotations

import pandas as pd

from pipeline.publish.changes import changes
from pipeline.publish.mapview import BaseMap
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.residualmap import residual_map
from pipeline.publish.results import Headline, Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import figure, interval, model_words, words_of

TRIP = "surplus_per_trip"
#: Diagnostics that have a table of their own.
APART = ("observed_count", "influence")


def referee_report(results: Results, headline: Headline, base: BaseMap | None) -> Html:
    """What would change the answer, the residuals on the map, and the diagnostics as tables.

    A sentence where the study brought no diagnostics.
    """
    if results.diagnostics is None:
        return tag("p", "The diagnostics of the demand stage were not handed over.")
    rows = results.diagnostics[results.diagnostics["site_id"] == headline.site_id]
    plain = rows[~rows["diagnostic"].isin(APART)]
    return join(
        [
            changes(results, headline),
            _other_models(results, headline),
            residual_map(results, headline, base),
            _table_of(plain, "Tests and residuals", with_subject=True),
            _counts(rows, headline),
            _influence(rows),
        ]
    )


def _other_models(results: Results, headline: Headline) -> Html:
    """Surplus per trip by every model and every kind of interval: what the choice decides."""
    values = results.surplus
    site = values[(values["site_id"] == headline.site_id) & (values["measure"] == TRIP)]
    body = [
        (
            model_words(str(row.model)),
            "chosen" if row.model == headline.model else "",
            row.method,
            figure(row.value, row.ci_low, row.ci_high),
            interval(row.ci_low, row.ci_high, row.value),
        )
        for row in rows_of(
            site.iloc[(site["model"] != headline.model).to_numpy().argsort(kind="stable")]
        )
    ]
    head = ("Model", "Choice", "Kind of interval", f"{results.currency} per trip", "Interval")
    caption = "Surplus per trip by model and kind of interval"
    return table(head, body, caption=caption, numbers=(3, 4))


def _table_of(rows: pd.DataFrame, caption: str, *, with_subject: bool) -> Html:
    body = [
        (
            model_words(str(row.model)),
            words_of(str(row.diagnostic))
            + (f": {row.subject}" if with_subject and pd.notna(row.subject) else ""),
            _short(row.value),
            _short(row.expected),
            _short(row.p_value),
            "" if pd.isna(row.note) else row.note,
        )
        for row in rows_of(rows)
    ]
    head = ("Model", "Diagnostic", "Value", "Expected", "p", "What it says")
    return table(head, body, caption=caption, numbers=(2, 3, 4))


def _counts(rows: pd.DataFrame, headline: Headline) -> Html:
    """Rows by number of visits, observed and expected by the chosen model."""
    own = rows[(rows["diagnostic"] == "observed_count") & (rows["model"] == headline.model)]
    if own.empty:
        return Html("")
    body = [(row.subject, _short(row.value), _short(row.expected)) for row in rows_of(own)]
    caption = "Rows by their number of visits, and how many the chosen model expects"
    return table(("Visits", "Observed", "Expected"), body, caption=caption, numbers=(1, 2))


def _influence(rows: pd.DataFrame) -> Html:
    own = rows[rows["diagnostic"] == "influence"]
    if own.empty:
        return Html("")
    body = [(row.subject, _short(row.value), row.note) for row in rows_of(own)]
    head = ("Zone left out", "Coefficient of travel cost", "What it would change")
    return table(head, body, caption="Zones that move the answer most", numbers=(1,))


def _short(value: float) -> str:
    """Four digits; nothing where there is no figure."""
    return "" if pd.isna(value) else f"{value:.4g}".replace("-", "−")
