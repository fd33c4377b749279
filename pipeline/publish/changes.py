"""What would change the answer, in sentences: sampling, model, zones, assumptions, income, map."""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from pipeline.publish.markup import Html, join, tag
from pipeline.publish.results import Headline, Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import figure, interval, is_known, level, model_words, number, percent

TRIP = "surplus_per_trip"
#: Share of the surplus beyond the highest cost that is worth a sentence.
FAR = 0.2


@dataclass(frozen=True)
class Change:
    """One thing that would change the answer: its name, words, and the change as a share."""

    name: str
    words: str
    share: float = 0.0


def changes(results: Results, headline: Headline) -> Html:
    """A sentence that names the strongest, and a list of all."""
    own = headline.surplus_per_trip
    if own is None or not is_known(own.value):
        words = (
            "The chosen model gives no finite surplus, so there is no answer to change: see the "
            "notes of the models."
        )
        return tag("p", words)
    found = [
        *_sampling(results, headline),
        *_models(results, headline),
        *_zones(results, headline),
        *_assumptions(results, headline),
        *_income(results, headline),
        *_map(results, headline),
        *_reach(results, headline),
    ]
    strongest = max(found, key=lambda change: abs(change.share))
    lead = tag(
        "p",
        f"The answer is {figure(own.value, own.ci_low, own.ci_high)} {results.currency} per trip. ",
        "What would change it most: ",
        tag("b", f"{strongest.name.lower()}"),
        f" (by up to {percent(abs(strongest.share))})." if strongest.share else ".",
    )
    items = [tag("li", tag("b", f"{change.name}. "), change.words) for change in found]
    return join([lead, tag("ul", *items, class_="care")])


def _per_trip(results: Results, site_id: str) -> pd.DataFrame:
    values = results.surplus
    return values[(values["site_id"] == site_id) & (values["measure"] == TRIP)]


def _sampling(results: Results, headline: Headline) -> list[Change]:
    """Another sample of visitors: the headline's interval."""
    own = headline.surplus_per_trip
    assert own is not None
    sure = level(results.study.surplus.confidence)
    if not is_known(own.ci_low, own.ci_high):
        words = f"The {sure} interval has no finite upper end: these data bound the answer below."
        return [Change("Other visitors", words, 1.0)]
    share = max(own.ci_high - own.value, own.value - own.ci_low) / own.value
    ends = interval(own.ci_low, own.ci_high, own.value)
    return [Change("Other visitors", f"{sure} interval, {own.method}: {ends}.", share)]


def _models(results: Results, headline: Headline) -> list[Change]:
    """The other models' answers, from the least to the largest."""
    rows = _per_trip(results, headline.site_id)
    rows = rows[(rows["model"] != headline.model) & rows["value"].notna()]
    points = rows.drop_duplicates("model").sort_values("value", kind="stable")
    if points.empty:
        return []
    own = headline.surplus_per_trip
    assert own is not None
    ends = [points.iloc[0], points.iloc[-1]][: len(points)]
    said = [f"{number(r['value'], 4)} ({model_words(str(r['model']))})" for r in ends]
    share = max((float(r["value"]) / own.value - 1 for r in ends), key=abs)
    return [Change("Another model", f"It would give {' to '.join(said)}.", share)]


def _diagnostic(results: Results, headline: Headline, name: str) -> pd.DataFrame:
    rows = results.diagnostics
    if rows is None:
        return pd.DataFrame(columns=["value", "expected", "note", "subject", "p_value"])
    return rows[
        (rows["site_id"] == headline.site_id)
        & (rows["model"] == headline.model)
        & (rows["diagnostic"] == name)
    ]


def _zones(results: Results, headline: Headline) -> list[Change]:
    """The zone that moves the price coefficient most when it is left out."""
    rows = _diagnostic(results, headline, "influence").dropna(subset=["value", "expected"])
    rows = rows[rows["value"] != 0]
    if rows.empty:
        return []
    shares = (rows["expected"] / rows["value"] - 1).abs().to_numpy()
    worst = rows.iloc[int(shares.argmax())]
    return [Change("A zone left out", str(worst["note"]), float(shares.max()))]


def _assumptions(results: Results, headline: Headline) -> list[Change]:
    """The alternative of the sensitivity table that moves the annual surplus most."""
    rows = results.sensitivity
    rows = rows[(rows["site_id"] == headline.site_id) & rows["changed"].notna()]
    rows = rows.dropna(subset=["change_percent"])
    if rows.empty:
        return []
    worst = rows.iloc[int(rows["change_percent"].abs().to_numpy().argmax())]
    change = float(worst["change_percent"])
    words = (
        f"Of {len(rows)} alternatives that were run, “{worst['variant']}” moves the annual surplus "
        f"most: {change:+.0f} %.".replace("-", "−")
    )
    return [Change("Another assumption", words, change / 100)]


def _income(results: Results, headline: Headline) -> list[Change]:
    """Exact welfare beside the surplus, where income is in the regression."""
    values = results.surplus
    own = values[
        (values["site_id"] == headline.site_id)
        & (values["model"] == headline.model)
        & (values["method"] == "delta")
    ]
    by_measure = {str(row.measure): row for row in rows_of(own)}
    names = ("equivalent_variation_per_trip", TRIP, "compensating_variation_per_trip")
    if any(name not in by_measure for name in names):
        return []
    given, plain, paid = (float(by_measure[name].value) for name in names)
    if not is_known(given, plain, paid):
        return [Change("The income effect", str(by_measure[names[2]].note))]
    elasticity = by_measure["income_elasticity"].value
    words = (
        f"Income elasticity of visits {number(elasticity)}. Exact welfare per trip: "
        f"{number(given, 4)} (equivalent) and {number(paid, 4)} (compensating variation) "
        f"against a surplus of {number(plain, 4)}."
    )
    share = max((value / plain - 1 for value in (given, paid)), key=abs)
    return [Change("The income effect", words, share)]


def _map(results: Results, headline: Headline) -> list[Change]:
    rows = _diagnostic(results, headline, "moran_i")
    rows = rows[(rows["p_value"] < 0.05) & (rows["value"] > rows["expected"])]
    if rows.empty:
        return []
    words = (
        "Residuals of neighbouring zones are alike (Moran's I below): the intervals are too "
        "narrow by an unknown amount, and a regressor that varies over the map may be missing."
    )
    return [Change("A pattern on the map", words)]


def _reach(results: Results, headline: Headline) -> list[Change]:
    rows = _diagnostic(results, headline, "cost_reaches")
    rows = rows[rows["value"] > FAR]
    if rows.empty:
        return []
    share = float(rows["value"].iloc[0])
    words = (
        f"{percent(share)} of the surplus lies at costs beyond the highest in the data, where the "
        "curve is drawn on, not observed: another shape of the curve there changes that part."
    )
    return [Change("The curve beyond the data", words)]
