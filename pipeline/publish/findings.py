"""The findings: what a fee would do, every value, and the models they come from."""

from __future__ import annotations

import pandas as pd

from pipeline.publish.charts import fee_charts
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Headline, Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import (
    figure,
    fixed,
    interval,
    level,
    model_words,
    number,
    p_value,
    whole,
    words_of,
)

TERM_WORDS = {"const": "constant", "alpha": "alpha (dispersion)", "smearing": "smearing factor"}


def fee_figure(results: Results, headline: Headline) -> Html:
    """What an added fee would do: charts and table."""
    schedule = results.fee_schedule[results.fee_schedule["site_id"] == headline.site_id]
    if schedule.empty:
        return tag("p", "No fee was looked at.")
    sure = level(results.study.surplus.confidence)
    rows = [
        (
            f"{row.fee:,.2f}",
            _cell(row.visits, row.visits_ci_low, row.visits_ci_high),
            _cell(row.revenue, row.revenue_ci_low, row.revenue_ci_high),
            _cell(row.consumer_surplus, row.consumer_surplus_ci_low, row.consumer_surplus_ci_high),
            "0" if row.surplus_lost == 0 else figure(row.surplus_lost),
        )
        for row in rows_of(schedule.sort_values("fee"))
    ]
    currency = results.currency
    head = (
        f"Added fee, {currency}",
        "Visits a year",
        f"Revenue, {currency} a year",
        f"Surplus left to visitors, {currency} a year",
        f"Surplus lost, {currency} a year",
    )
    grid = table(
        head,
        rows,
        caption=f"What an added fee per person and visit would do ({sure} intervals in brackets)",
        numbers=range(5),
    )
    return join([fee_charts(schedule, currency=currency), grid])


def _cell(value: float, low: float, high: float) -> object:
    """A figure with its interval below it."""
    if pd.isna(value):
        return "–"
    ends = interval(low, high, value)
    shown = figure(value, low, high)
    return shown if ends == "–" else join([shown, tag("small", f"({ends})")])


def models_tried(results: Results, headline: Headline) -> Html:
    """Why the model was chosen, how all fitted, and what they estimated."""
    fit = results.fit[results.fit["site_id"] == headline.site_id]
    chosen = fit[fit["chosen"].astype(bool)]
    note = chosen["note"].iloc[0] if len(chosen) else None
    why = "" if note is None or pd.isna(note) else str(note)
    lead = tag(
        "p", "The value comes from the ", tag("b", model_words(headline.model)), " model. ", why
    )
    return join([lead, _fit_table(fit), _estimates(results, fit)])


def _fit_table(fit: pd.DataFrame) -> Html:
    rows = [
        (
            model_words(str(row.model)),
            "chosen" if row.chosen else "",
            whole(row.nobs),
            fixed(row.log_likelihood),
            fixed(row.aic),
            fixed(row.bic),
            number(row.dispersion),
            p_value(row.overdispersion_p),
            number(row.r_squared),
            "yes" if row.converged else "no",
            row.errors,
        )
        for row in rows_of(fit)
    ]
    head = (
        "Model",
        "Choice",
        "Rows",
        "Log-likelihood",
        "AIC",
        "BIC",
        "Dispersion",
        "p of overdispersion",
        "R²",
        "Converged",
        "Errors",
    )
    remarks = [
        tag("li", tag("b", model_words(str(row.model)), ": "), row.note)
        for row in rows_of(fit)
        if not (row.chosen or pd.isna(row.note))
    ]
    grid = table(head, rows, caption="How the models fit", numbers=range(2, 9))
    return join([grid, tag("ul", *remarks, class_="care") if remarks else None])


def _estimates(results: Results, fit: pd.DataFrame) -> Html:
    site_id = fit["site_id"].iloc[0]
    of_site = results.estimates[results.estimates["site_id"] == site_id]
    order = list(dict.fromkeys(of_site["model"]))
    rows = [
        (
            model_words(model),
            TERM_WORDS.get(row.term, words_of(str(row.term))),
            number(row.estimate, 4),
            number(row.std_error),
            number(row.ci_low, 4),
            number(row.ci_high, 4),
            p_value(row.p_value),
        )
        for model in order
        for row in rows_of(of_site[of_site["model"] == model])
    ]
    sure = level(results.study.surplus.confidence)
    head = ("Model", "Term", "Estimate", "Standard error", f"{sure} from", "to", "p")
    grid = table(head, rows, caption="Estimates of every model", numbers=range(2, 7))
    return tag("details", tag("summary", "Estimates of every model"), grid, open="open")


def values_table(results: Results, headline: Headline) -> Html:
    """Every measure of the chosen model, with every kind of interval."""
    rows = results.surplus[
        (results.surplus["site_id"] == headline.site_id)
        & (results.surplus["model"] == headline.model)
    ]
    body = [
        (
            words_of(str(row.measure)),
            figure(row.value, row.ci_low, row.ci_high),
            interval(row.ci_low, row.ci_high, row.value),
            str(row.unit).replace("currency", results.currency),
            row.method,
            "" if pd.isna(row.note) else row.note,
        )
        for row in rows_of(rows)
    ]
    sure = level(results.study.surplus.confidence)
    head = ("Measure", "Value", f"{sure} interval", "Unit", "Kind of interval", "To know")
    return table(head, body, caption="Values from the chosen model", numbers=(1, 2))
