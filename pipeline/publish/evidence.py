"""The evidence: map, demand curve, fees and models of every site."""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.publish.charts import curve_costs, demand_chart, fee_charts, is_skewed
from pipeline.publish.curve import fitted_curve
from pipeline.publish.mapview import BaseMap, rate_map
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

MOST_ROWS = 250
TERM_WORDS = {"const": "constant", "alpha": "alpha (dispersion)"}
ZONE_HEAD = (
    ("visits_per_1000", "Visits per 1,000"),
    ("visits", "Visits a year"),
    ("population", "People"),
    ("household_income", "Household income"),
    ("travel_cost", "Travel cost"),
    ("distance_km", "Distance, km"),
    ("drive_time_min", "Drive, min"),
    ("annual_surplus", "Surplus a year"),
)


def site_heading(results: Results, headline: Headline) -> Html | None:
    """Name of the site, where there are several."""
    return tag("h3", headline.site_name) if len(results.headlines) > 1 else None


def map_figure(results: Results, base: BaseMap | None, headline: Headline) -> Html:
    """Map of one site, and the same as a table."""
    rows = results.site_zones(headline.site_id)
    if rows is None:
        words = "The study brought records of trips without zones, so there is no map."
        return tag("p", words)
    if base is None:
        words = "The study brought a finished table without zones' places, so there is no map."
        return join([tag("p", words), zone_table(results, rows)])
    with_rates = rows if "visits_per_1000" in rows else rows.assign(visits_per_1000=_rates(rows))
    caption = "Lambert azimuthal equal-area projection centred on the zones; north is up. "
    if not base.has_roads:
        caption += "The study brought no roads to draw. "
    if base.left_out:
        caption += f"{base.left_out.capitalize()}. "
    figure_ = tag(
        "figure",
        rate_map(results, base, headline.site_id, with_rates),
        tag("figcaption", caption, results.study.publish.attribution),
    )
    return join([figure_, zone_table(results, with_rates)])


def _rates(rows: pd.DataFrame) -> pd.Series:
    """Visits per 1,000 people; a zone without people has no rate."""
    people = rows["population"].where(rows["population"] > 0)
    return rows["visits"] * 1000 / people


def zone_table(results: Results, rows: pd.DataFrame) -> Html:
    """Zones with their figures, the most visited first."""
    frame = rows.merge(
        results.zone_surplus, on=["zone_id", "site_id"], how="left", validate="one_to_one"
    )
    names = _zone_names(results)
    frame = frame.sort_values(["visits", "zone_id"], ascending=[False, True], na_position="last")
    shown = [(column, words) for column, words in ZONE_HEAD if column in frame]
    body = [
        (names.get(str(row["zone_id"]), row["zone_id"]), *(number(row[c], 4) for c, _ in shown))
        for row in frame.head(MOST_ROWS).to_dict("records")
    ]
    head = ("Zone", *(words for _, words in shown))
    more = len(frame) - len(body)
    caption = f"Zones of origin; money in {results.currency}"
    if more:
        caption += f"; the {more:,} least visited are in tables/zone_table.csv"
    grid = table(head, body, caption=caption, numbers=range(1, len(head)))
    return tag("details", tag("summary", "The zones as a table"), grid)


def _zone_names(results: Results) -> dict[str, str]:
    if results.zones is None:
        return {}
    named = results.zones.dropna(subset=["zone_name"])
    return {
        str(zone_id): str(name) if str(name) == str(zone_id) else f"{name} ({zone_id})"
        for zone_id, name in zip(named["zone_id"], named["zone_name"], strict=True)
    }


def demand_figure(results: Results, headline: Headline) -> Html:
    """The demand curve on its points."""
    points = _points(results, headline)
    if points.empty:
        return tag("p", "There is no point to draw.")
    curve = fitted_curve(results, headline, curve_costs(points["cost"].to_numpy()))
    per_zone = results.zone_table is not None
    rate_words = "Visits per 1,000 people and year" if per_zone else "Trips per person and year"
    chart = demand_chart(
        points,
        curve,
        currency=results.currency,
        rate_words=rate_words,
        name=f"Demand for visits to {headline.site_name}",
    )
    sure = level(results.study.surplus.confidence)
    words = "One circle per zone, its area by population. " if per_zone else _CLASS_WORDS
    if per_zone and points["outside"].any():
        words += "Hollow circles are zones outside the market. "
    if curve is None:
        words += "The estimates of this model do not give its curve by themselves; none is drawn. "
    elif np.isnan(curve.low).any():
        words += f"Line: {model_words(headline.model)} model, other terms at the market's means. "
    else:
        words += (
            f"Line: {model_words(headline.model)} model, other terms at the market's means; "
            f"band: {sure} interval of the curve. "
        )
    if is_skewed(points["rate"].to_numpy()):
        words += "The upright axis goes by square roots, so that small rates stay visible."
    return tag("figure", chart, tag("figcaption", words))


_CLASS_WORDS = "One circle per class of travel cost, its area by number of records. "


def _points(results: Results, headline: Headline) -> pd.DataFrame:
    """Points of the demand chart: `cost, rate, size, label, outside`."""
    rows = results.site_zones(headline.site_id)
    if rows is None:
        return _class_points(results, headline)
    rate = rows["visits_per_1000"] if "visits_per_1000" in rows else _rates(rows)
    names = _zone_names(results)
    inside = rows["in_market"].astype(bool) if "in_market" in rows else rate.notna()
    points = pd.DataFrame(
        {
            "cost": rows["travel_cost"],
            "rate": rate,
            "size": rows["population"] / max(float(rows["population"].max()), 1e-9),
            "label": [names.get(str(zone), str(zone)) for zone in rows["zone_id"]],
            "outside": ~inside,
        }
    )
    return points.dropna(subset=["cost", "rate"])


def _class_points(results: Results, headline: Headline) -> pd.DataFrame:
    means = results.trip_means
    assert means is not None
    means = means[means["site_id"] == headline.site_id]
    return pd.DataFrame(
        {
            "cost": means["travel_cost"],
            "rate": means["trips"],
            "size": means["records"] / max(int(means["records"].max() or 1), 1),
            "label": [f"{records} records" for records in means["records"]],
            "outside": False,
        }
    )


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
            number(row.surplus_lost),
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
    if pd.isna(low) or pd.isna(high) or high <= low:
        return figure(value)
    return join([figure(value, low, high), tag("small", f"({interval(low, high, value)})")])


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
            "" if pd.isna(row.note) or row.chosen else row.note,
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
        "Remark",
    )
    return table(head, rows, caption="How the models fit", numbers=range(2, 9))


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
        for row in rows_of(rows.sort_values(["measure", "method"], kind="stable"))
    ]
    sure = level(results.study.surplus.confidence)
    head = ("Measure", "Value", f"{sure} interval", "Unit", "Kind of interval", "To know")
    return table(head, body, caption="Values from the chosen model", numbers=(1, 2))
