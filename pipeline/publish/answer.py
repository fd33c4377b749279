"""The first screen: what the site is worth, how sure that is, and from which model."""

from __future__ import annotations

from pipeline.publish.axes import scaled_unit
from pipeline.publish.charts import interval_bar
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.results import Figure, Headline, Results
from pipeline.publish.words import count, figure, interval, is_known, level, model_words


def masthead(results: Results) -> Html:
    """Title, notice, and the answer."""
    about = results.study.study
    notice = (
        tag("p", tag("b", "Please note. "), about.notice, class_="notice", role="note")
        if about.notice
        else None
    )
    return tag(
        "header",
        tag("p", "Value of a place to the people who travel to it", class_="kind"),
        tag("h1", about.title),
        notice,
        _answer(results),
    )


def _answer(results: Results) -> Html:
    if len(results.headlines) == 1:
        return _one_site(results, results.headlines[0])
    return _several_sites(results)


def _one_site(results: Results, headline: Headline) -> Html:
    annual, year = headline.annual_surplus, results.study.study.price_year
    if annual is None or not is_known(annual.value):
        why = annual.note if annual else ""
        words = tag("p", f"No value can be given for {headline.site_name}. ", why, class_="claim")
        return join([words, _facts(results, headline)])
    currency, sure = results.currency, level(results.study.surplus.confidence)
    known = is_known(annual.ci_low, annual.ci_high)
    claim = tag(
        "p",
        "To its visitors, ",
        headline.site_name,
        " is worth about ",
        tag("strong", f"{currency} {figure(annual.value, annual.ci_low, annual.ci_high)} a year"),
        ".",
        class_="claim",
    )
    span = tag(
        "p",
        f"The {sure} interval runs from ",
        tag("b", f"{currency} {interval(annual.ci_low, annual.ci_high, annual.value)}"),
        f", at prices of {year}. This is what visitors would have been willing to pay over and "
        "above what their trips cost them. Nobody receives it as cash.",
    )
    gauge = _gauge(annual, currency, sure) if known and annual.ci_high > 0 else None
    left = tag("div", claim, span, gauge, class_="say")
    return tag("div", left, _facts(results, headline), class_="answer")


def _gauge(annual: Figure, currency: str, sure: str) -> Html:
    bar = interval_bar(annual.value, annual.ci_low, annual.ci_high, words="Annual value")
    unit = " ".join(word for word in (currency, scaled_unit(annual.ci_high)[1]) if word)
    words = f"{unit} a year. Pale: the {sure} interval. Upright mark: the estimate."
    return tag("figure", bar, tag("figcaption", words))


def _facts(results: Results, headline: Headline) -> Html:
    """The figures beside the claim."""
    facts: list[tuple[object, object]] = []
    trip = headline.surplus_per_trip
    if trip is not None:
        facts.append(
            (f"Value per {results.visitor} and visit", _with_interval(trip, results.currency))
        )
    facts.append((f"{results.visitor.capitalize()}-visits a year", figure(headline.visits)))
    rows = results.site_zones(headline.site_id)
    if rows is not None:
        inside = int(rows["in_market"].sum()) if "in_market" in rows else len(rows)
        people = rows.loc[rows["in_market"].astype(bool)] if "in_market" in rows else rows
        words = f"{count(inside, 'zone')} with {figure(float(people['population'].sum()))} people"
        facts.append(("Market", words))
    chosen = results.fit[
        (results.fit["site_id"] == headline.site_id) & (results.fit["model"] == headline.model)
    ]
    rows_used = int(chosen["nobs"].iloc[0]) if len(chosen) else 0
    facts.append(("Model", f"{model_words(headline.model)}, fitted to {count(rows_used, 'row')}"))
    entries = [tag("div", tag("dt", name), tag("dd", value)) for name, value in facts]
    return tag("dl", *entries, class_="facts")


def _with_interval(value: Figure, currency: str) -> Html:
    shown = figure(value.value, value.ci_low, value.ci_high)
    ends = interval(value.ci_low, value.ci_high, value.value)
    return join([tag("b", f"{currency} {shown}"), tag("small", f" ({ends})")])


def _several_sites(results: Results) -> Html:
    currency = results.currency
    rows = [
        (
            headline.site_name,
            tag("b", figure(a.value, a.ci_low, a.ci_high)) if a else "–",
            interval(a.ci_low, a.ci_high, a.value) if a else "–",
            figure(t.value, t.ci_low, t.ci_high) if t else "–",
            interval(t.ci_low, t.ci_high, t.value) if t else "–",
            figure(headline.visits),
            model_words(headline.model),
        )
        for headline in results.headlines
        for a, t in [(headline.annual_surplus, headline.surplus_per_trip)]
    ]
    sure = level(results.study.surplus.confidence)
    head = (
        "Site",
        f"{currency} a year",
        f"{sure} interval",
        f"{currency} per visit",
        f"{sure} interval",
        "Visits a year",
        "Model",
    )
    claim = tag("p", "What each site is worth to its visitors in a year", class_="claim")
    span = tag(
        "p",
        f"At prices of {results.study.study.price_year}: what visitors would have been willing "
        "to pay over and above what their trips cost them. Nobody receives it as cash. The "
        "figures of several sites do not add up where visitors would go from one to another.",
    )
    grid = table(head, rows, caption="Value of every site", numbers=range(1, 6), class_="cards")
    return tag("div", claim, grid, span, class_="say")
