"""What was lost on the way: records without a zone, zones without a route or out of the market."""

from __future__ import annotations

import pandas as pd

from pipeline.publish.markup import Html, table, tag
from pipeline.publish.privacy import GIVEN_AWAY, REASON
from pipeline.publish.results import Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import count, number, percent, whole, words_of
from pipeline.publish.zonewords import zones_placed
from pipeline.tables import PLACED_STATUSES, REACHED_STATUSES

ORIGIN_WORDS = {
    "matched": "postal code found among the zones",
    "crosswalk": "postal code taken to another zone by the study's list",
    "point_in_zone": "placed in a zone by coordinates",
    "outside_zones": "coordinates outside every zone",
    "malformed": "not a postal code",
    "unknown_code": "looks like a postal code, but no zone has it",
    "missing": "no postal code given",
    "foreign": "postal code of another country",
}
ROUTE_WORDS = {
    "routed": "route found",
    "within_zone": "site lies in the zone; distance within the zone taken",
    "no_path": "no road or ferry leads there",
    "too_far_from_road": "too far from any road",
}


def losses(results: Results) -> list[Html]:
    """A sentence and a table for every step that can lose something."""
    parts = [
        _origins(results),
        zones_placed(results),
        _routes(results),
        _market(results),
        _hidden(results),
    ]
    return [part for part in parts if part is not None]


def _origins(results: Results) -> Html | None:
    summary = results.origin_summary
    if summary is None:
        return tag("p", "The study brought no visit records, so none could be lost.")
    totals = summary.groupby("origin_status")[["records", "trips"]].sum()
    totals = totals.sort_values("records", ascending=False, kind="stable")
    all_records = float(totals["records"].sum())
    placed = float(totals.loc[totals.index.isin(PLACED_STATUSES), "records"].sum())
    share = (all_records - placed) / all_records if all_records else 0.0
    lead = tag(
        "p",
        f"{count(all_records, 'visit record')} came in; {whole(placed)} have a zone of origin "
        f"and {whole(all_records - placed)} ({percent(share)}) do not.",
    )
    rows = [
        (
            ORIGIN_WORDS.get(str(row.Index), str(row.Index)),
            "kept" if row.Index in PLACED_STATUSES else "left out",
            whole(row.records),
            whole(row.trips),
        )
        for row in rows_of(totals)
    ]
    head = ("Outcome", "Record", "Records", "Trips")
    grid = table(head, rows, caption="Visit records by outcome", numbers=(2, 3))
    return tag("div", tag("h3", "Visit records"), lead, grid)


def _routes(results: Results) -> Html | None:
    routes = results.routes
    if routes is None:
        return tag("p", "The study brought its travel costs ready made; no route was searched.")
    counts = pd.crosstab(routes["site_id"], routes["route_status"])
    statuses = [status for status in ROUTE_WORDS if status in counts]
    rows = [
        (results.site_name(str(site_id)), *(whole(row[status]) for status in statuses))
        for site_id, row in counts.iterrows()
    ]
    failed = int((~routes["route_status"].isin(REACHED_STATUSES)).sum())
    lead = tag(
        "p",
        f"No route was found for {whole(failed)} of {count(len(routes), 'pair')} of zone and site. "
        "A zone without a route has no travel cost to that site.",
    )
    head = ("Site", *(ROUTE_WORDS[status] for status in statuses))
    numbers = range(1, len(head))
    grid = table(head, rows, caption="Zones by route, for every site", numbers=numbers)
    return tag("div", tag("h3", "Routes"), lead, grid)


def _market(results: Results) -> Html | None:
    zones = results.zone_table
    if zones is None or "in_market" not in zones:
        return None
    out = zones[~zones["in_market"].astype(bool)]
    if out.empty:
        return tag("div", tag("h3", "Market"), tag("p", "Every zone is in the market."))
    notes = out["market_note"] if "market_note" in out else pd.Series("", index=out.index)
    groups = out.assign(reason=notes.fillna("reason not recorded")).groupby(["site_id", "reason"])
    rows = [
        (
            results.site_name(str(site_id)),
            reason,
            whole(len(group)),
            whole(group["population"].sum()),
            whole(group["visits"].sum()),
            percent(_share(group, zones[zones["site_id"] == site_id])),
        )
        for (site_id, reason), group in groups
    ]
    head = ("Site", "Why left out", "Zones", "People", "Visits a year", "Share of visits")
    lead = "Zones outside the market are drawn and listed, but no model is fitted to them."
    grid = table(head, rows, caption="Zones outside the market", numbers=range(2, 6))
    return tag("div", tag("h3", "Market"), tag("p", lead), grid)


def _share(part: pd.DataFrame, whole: pd.DataFrame) -> float:
    total = float(whole["visits"].sum())
    return float(part["visits"].sum()) / total if total else 0.0


def _hidden(results: Results) -> Html | None:
    zones = results.zone_table
    if zones is None or REASON not in zones:
        return None
    hidden = int(zones[REASON].notna().sum())
    words = (
        f"{count(hidden, 'zone')} with few visit records (below "
        f"{results.study.publish.suppress_below}), or hiding such a zone in a total, "
        f"{'is' if hidden == 1 else 'are'} published without visits, so that nobody can be made "
        "out. The models used them."
    )
    exposed = int(zones[REASON].str.endswith(GIVEN_AWAY, na=False).sum())
    if exposed:
        words += (
            f" The visits of {count(exposed, 'zone')} of them can be worked out from the totals "
            "of the site all the same, because no other zone in or outside the market hides them: "
            "think before you publish, or move the market's limit."
        )
    return tag("div", tag("h3", "Hidden figures"), tag("p", words))


def route_table(results: Results) -> Html | None:
    """How well the routes stand on the roads: gaps, delay, measured times."""
    quality = results.route_quality
    if quality is None or quality.empty:
        return None
    rows = [
        (row.measure, number(row.value), row.unit, "" if pd.isna(row.note) else row.note)
        for row in rows_of(quality)
    ]
    head = ("Measure", "Figure", "Unit", "What it means")
    return table(head, rows, caption="Quality of the routes", numbers=(1,), class_="prose")


def road_table(results: Results) -> Html | None:
    """What the road extract holds."""
    quality = results.road_quality
    if quality is None or quality.empty:
        return None
    rows = [
        (
            words_of(str(row.measure)),
            "" if row.road_class == "all" else words_of(str(row.road_class)),
            number(row.value),
            row.unit,
            "" if pd.isna(row.note) else row.note,
        )
        for row in rows_of(quality)
    ]
    head = ("Measure", "Road class", "Figure", "Unit", "What it means")
    return table(head, rows, caption="Quality of the road data", numbers=(2,), class_="prose")
