"""The findings: what a fee would do, every value, and the models they come from."""

from __future__ import annotations

import math
from typing import Any

import pandas as pd

from pipeline.publish.charts import fee_charts
from pipeline.publish.feetool import fee_tool
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Headline, Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import (
    fee_words,
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
            fee_words(row.fee, float(schedule["fee"].max())),
            _cell(row.visits, row.visits_ci_low, row.visits_ci_high),
            _cell(row.revenue, row.revenue_ci_low, row.revenue_ci_high),
            _cell(row.consumer_surplus, row.consumer_surplus_ci_low, row.consumer_surplus_ci_high),
            _lost(row),
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
        caption=f"What an added fee per {results.visitor} and visit would do "
        f"({sure} intervals in brackets)",
        numbers=range(5),
    )
    curve = results.fees.get(headline.site_id)
    smooth = schedule if curve is None else curve.table
    tool = (
        None
        if curve is None
        else fee_tool(headline.site_id, curve, currency=currency, visitor=results.visitor)
    )
    figure_ = tag("div", tool, fee_charts(smooth, currency=currency), class_="fees")
    return join([figure_, grid])


def _lost(row: Any) -> object:
    """Surplus lost, with its interval where the table has one."""
    if row.surplus_lost == 0:
        return "0"
    ends = (getattr(row, f"surplus_lost_ci_{end}", math.nan) for end in ("low", "high"))
    return _cell(row.surplus_lost, *ends)


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
    scale = tag("p", _SCALES) if fit["model"].str.contains("linear").any() else None
    return join([grid, scale, tag("ul", *remarks, class_="care") if remarks else None])


_SCALES = (
    "Log-likelihood, AIC and BIC can be compared among count models of the same rows only. Those "
    "of least squares are of the density of a rate, or of the log of a rate in the zones that had "
    "a visit: they stand on another scale and are no reason to prefer or to reject a model."
)


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


MEASURE_WORDS = {
    "surplus_per_trip": "Surplus per visit",
    "annual_surplus": "Annual surplus, observed visits",
    "annual_surplus_predicted": "Annual surplus, predicted visits",
    "surplus_per_person_per_year": "Surplus per resident",
    "price_elasticity": "Price elasticity of visits",
    "annual_visits_observed": "Visits observed",
    "annual_visits_predicted": "Visits predicted",
    "choke_cost": "Cost that ends all visits",
}
KIND_WORDS = {"fieller": "Fieller"}
POINT_METHODS = ("delta", "observed")


def values_table(results: Results, headline: Headline) -> Html:
    """Every measure of the chosen model in a row, its kinds of interval side by side."""
    rows = results.surplus[
        (results.surplus["site_id"] == headline.site_id)
        & (results.surplus["model"] == headline.model)
    ]
    kinds = [kind for kind in dict.fromkeys(rows["method"]) if kind != "observed"]
    measures = list(dict.fromkeys(rows["measure"]))
    body = [
        _measure_row(rows[rows["measure"] == measure], measure, kinds, results.currency)
        for measure in measures
    ]
    sure = level(results.study.surplus.confidence)
    names = [KIND_WORDS.get(kind, kind) for kind in kinds]
    head = ("Measure", "Estimate", *(f"{sure} interval, {name}" for name in names), "Unit")
    grid = table(
        head,
        body,
        caption="Values from the chosen model",
        numbers=range(1, len(head) - 1),
        class_="cards",
    )
    remarks = [tag("li", tag("b", f"{kind}: "), words) for kind, words in _remarks(rows)]
    return join([grid, tag("ul", *remarks, class_="care") if remarks else None])


def _measure_row(
    rows: pd.DataFrame, measure: str, kinds: list[str], currency: str
) -> tuple[object, ...]:
    """Name with how it is made, estimate, an interval per kind, unit."""
    by_kind = {str(row.method): row for row in rows_of(rows)}
    point = next((by_kind[kind] for kind in POINT_METHODS if kind in by_kind), None)
    first = point if point is not None else next(iter(by_kind.values()))
    note = "" if pd.isna(first.note) else str(first.note)
    name = MEASURE_WORDS.get(measure, words_of(measure).capitalize())
    ends = [
        interval(by_kind[kind].ci_low, by_kind[kind].ci_high, by_kind[kind].value)
        if kind in by_kind
        else "–"
        for kind in kinds
    ]
    about = tag("small", note, class_="note") if note else None
    shown = figure(first.value, first.ci_low, first.ci_high)
    unit = str(first.unit).replace("currency", currency)
    return (join([name, about]), shown, *ends, unit)


def _remarks(rows: pd.DataFrame) -> list[tuple[str, str]]:
    """What the notes of the other kinds of interval add: the kind, and each sentence once."""
    said: dict[str, dict[str, None]] = {}
    for _, group in rows.groupby("measure", sort=False):
        notes = [(str(row.method), str(row.note)) for row in rows_of(group.dropna(subset="note"))]
        for method, note in notes[1:]:
            kind = KIND_WORDS.get(method, method.capitalize())
            words = note.removeprefix(notes[0][1]).strip().removeprefix(f"{kind}: ")
            sentences = (part.strip(" .") for part in words.split(". "))
            said.setdefault(kind, {}).update(dict.fromkeys(filter(None, sentences)))
    return [(kind, ". ".join(words) + ".") for kind, words in said.items() if words]
