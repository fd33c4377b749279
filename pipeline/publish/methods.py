"""The methods in prose, made from what was really run; and the published work they rest on."""

from __future__ import annotations

from collections.abc import Iterator

from pipeline.cost_settings import CostsSettings
from pipeline.publish.markup import Html, tag
from pipeline.publish.results import Results
from pipeline.publish.words import count, level, model_words, number, percent, words_of
from pipeline.tables import PLACED_STATUSES, REACHED_STATUSES

SOURCES = {
    "zonal": (
        "Haab and McConnell, Valuing Environmental and Natural Resources, 2002: the travel cost "
        "method and the area under its demand curves."
    ),
    "counts": (
        "Cameron and Trivedi, Regression Analysis of Count Data, 1998: Poisson and negative "
        "binomial models and the test of overdispersion."
    ),
    "robust": "White, Econometrica 50, 1982: errors robust to a wrong variance.",
    "leverage": "MacKinnon and White, Journal of Econometrics 29, 1985: HC1 to HC3.",
    "draws": "Krinsky and Robb, Review of Economics and Statistics 68, 1986: simulated intervals.",
    "residuals": (
        "Dunn and Smyth, Journal of Computational and Graphical Statistics 5, 1996: randomised "
        "quantile residuals; Moran, Biometrika 37, 1950: correlation over the map."
    ),
    "map": (
        "Snyder, Map Projections: A Working Manual, USGS Professional Paper 1395, 1987; Harrower "
        "and Brewer, The Cartographic Journal 40(1), 2003: colours of the maps."
    ),
}


def methods(results: Results) -> list[Html]:
    """Paragraphs, one per step that was run, in the order of the flow."""
    parts = (
        ("Origins", _origins(results)),
        ("Routes", _routes(results)),
        ("Price of a trip", _price(results)),
        ("Market", _market(results)),
        ("Demand", " ".join(_demand(results))),
        ("Value", _value(results)),
        ("Fees", _fees(results)),
        ("Privacy", _privacy(results)),
    )
    return [tag("p", tag("b", f"{name}. "), words) for name, words in parts if words]


def sources(results: Results) -> Html:
    """Published work that the steps of this run rest on."""
    names = ["zonal", "counts"]
    errors = set(results.fit["errors"].astype(str))
    if any(name.startswith("HC") for name in errors):
        names += ["robust", "leverage"]
    if (results.surplus["method"] == "simulated").any():
        names.append("draws")
    if results.residuals is not None:
        names.append("residuals")
    if results.zones is not None:
        names.append("map")
    return tag("ul", *(tag("li", SOURCES[name]) for name in names), class_="care")


WHOSE_VISITS = {
    "person": "",
    "adult": " Visits and their value are of adults, who pay for the children of their party; "
    "children are not counted. Known totals were of persons.",
    "vehicle": " Visits and their value are of vehicles with all who come in them. Known totals "
    "were of persons.",
}


def _origins(results: Results) -> str:
    summary = results.origin_summary
    if summary is None:
        return "The study brought its finished table; how visits were placed is not known here."
    placed = summary[summary["origin_status"].isin(PLACED_STATUSES)]
    by_code = int(placed.loc[placed["origin_status"] != "point_in_zone", "records"].sum())
    by_place = int(placed["records"].sum()) - by_code
    ways = [
        f"{count(by_code, 'record')} by postal code" if by_code else "",
        f"{count(by_place, 'record')} by coordinates" if by_place else "",
    ]
    return (
        f"Visit records were given a zone of origin: {' and '.join(w for w in ways if w)}. "
        "A person-visit is one person on one trip: trips times party size times weight."
        + WHOSE_VISITS[results.visitor]
    )


def _routes(results: Results) -> str:
    routes = results.routes
    if routes is None:
        return "Travel costs came ready made; no route was searched."
    if results.study.routes.table is not None:
        return "Distances and times came ready made in a table of routes."
    reached = routes[routes["route_status"].isin(REACHED_STATUSES)]
    snap = float(reached["zone_snap_m"].median()) if len(reached) else float("nan")
    return (
        "The fastest route there and back was searched on the road network from each zone's "
        f"point to each site's access points, for {count(len(routes), 'pair')}; "
        f"{len(reached):,} have a route. Points were joined to the nearest road that reaches the "
        f"site (median gap {number(snap)} m). Distance is along the fastest route."
    )


def _price(results: Results) -> str:
    if results.costs is None:
        return ""
    costs, money = results.study.costs, results.currency
    people = costs.party_size
    party = "the records' mean party" if people == "records" else f"{people:g} people"
    shared = {
        "all": f"shared by {party}",
        "adults": f"borne by the adults of {party}, who pay for the children too",
        "vehicle": f"in full for the vehicle with {party} in it",
    }[costs.shared_by]
    wage = f"household income over {costs.hours_per_year:,.0f} hours"
    if costs.hourly_wage is not None:
        wage = f"{money} {costs.hourly_wage:g}"
    return (
        f"The round trip is priced per {results.visitor}: {_driving(costs, money)} and what tolls "
        f"and ferries cost, {shared}, and {percent(costs.wage_fraction)} of the hourly wage for "
        f"each hour, the wage being {wage}; entrance fees and other costs are added."
    )


def _driving(costs: CostsSettings, money: str) -> str:
    """The price of driving, in whichever way the study gives it."""
    if costs.vehicle_cost_per_km is not None:
        return f"{money} {costs.vehicle_cost_per_km:g} per km"
    if costs.vehicle_cost_per_mile is not None:
        return f"{money} {costs.vehicle_cost_per_mile:g} per mile"
    return f"what a km costs by class of vehicle ({', '.join(costs.vehicles)})"


def _market(results: Results) -> str:
    market, table = results.study.market, results.zone_table
    if table is None:
        return ""
    limits = [
        f"{market.max_distance_km:g} km" if market.max_distance_km is not None else "",
        f"{market.max_drive_time_min:g} minutes" if market.max_drive_time_min is not None else "",
    ]
    within = " and ".join(limit for limit in limits if limit)
    words = f"Zones within {within} one way make up the market. " if within else ""
    return words + "Zones that nobody came from stay in, with zero visits."


def _demand(results: Results) -> Iterator[str]:
    demand = results.study.demand
    tried = [model_words(name) for name in dict.fromkeys(results.fit["model"].astype(str))]
    covariates = [words_of(name) for name in demand.covariates]
    beside = f" and {', '.join(covariates)}" if covariates else ""
    yield f"Visits are explained by travel cost{beside}. Models fitted: {', '.join(tried)}."
    if results.zone_table is not None:
        yield (
            "Count models have the population as exposure, and counts before they are expanded "
            "to the year, so that 400 records carry the information of 400."
        )
    if demand.choose == "test":
        yield (
            "Between Poisson and negative binomial the test of overdispersion decides, at the "
            f"level {demand.test_level:g}."
        )
    else:
        yield f"The study chose the {model_words(demand.choose)} model beforehand."
    kinds = ", ".join(dict.fromkeys(results.fit["errors"].dropna().astype(str)))
    yield f"Standard errors: {kinds}."


def _value(results: Results) -> str:
    settings = results.study.surplus
    lines = {h.model == "linear" for h in results.headlines}
    semi = "the value of a visit is −1 over the coefficient of travel cost"
    straight = "the value of a visit is the area under the fitted line, per visit"
    shape = straight if lines == {True} else semi if lines == {False} else f"{semi}, or {straight}"
    return (
        f"With the chosen model {shape}; the annual value is that times the observed visits. "
        f"Intervals at {level(settings.confidence)} come from {settings.draws:,} draws of the "
        f"parameters (seed {results.provenance.seed}) and, beside them, from the delta method. "
        "The headline is the simulated one: it follows the skewness of a ratio."
    )


def _fees(results: Results) -> str:
    if results.fee_schedule.empty or not results.fees:
        return ""
    return (
        "A fee adds to everybody's travel cost. The model says by which factor visits fall; the "
        "schedule starts at the observed visits. The slider works out every fee from the same "
        "parameter draws: each measure rises with the price coefficient, so its interval ends "
        "where the coefficient's draws do."
    )


def _privacy(results: Results) -> str:
    below = results.study.publish.suppress_below
    if below < 1:
        return "No small counts are hidden; nothing here is a record of a person."
    return f"Counts of fewer than {below} records are hidden, as the section on losses says."
