"""The sensitivity stage: what other assumptions would do to the surplus.

Each alternative runs the stages cost, join, demand and surplus again, on the routes that are
there. The first row of a site is the study itself, as its own tables give it.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from pandera.config import config_context

from pipeline.costs import cost
from pipeline.demand import demand
from pipeline.errors import PipelineError, RouteError
from pipeline.executor import Workforce, in_batches, make_executor
from pipeline.finished import join, repriced
from pipeline.roads.graph import RoadGraph
from pipeline.route_prices import with_route_prices
from pipeline.routes import route
from pipeline.settings import ComputeSettings
from pipeline.study import Study
from pipeline.surplus import surplus
from pipeline.tables import Sensitivity
from pipeline.variants import Variant, changed_values, own_variants, standard_variants

BASE = "the study"
PER_TRIP, ANNUAL = "surplus_per_trip", "annual_surplus"
METHODS = ("simulated", "delta")
"""Intervals in the order of preference; the value itself is the one at the estimates."""

Row = dict[str, Any]


@dataclass(frozen=True)
class Pricing:
    """Tables from which prices are worked out."""

    origins: pd.DataFrame
    routes: pd.DataFrame
    zones: pd.DataFrame
    sites: pd.DataFrame
    rerouted: dict[str, pd.DataFrame] = field(default_factory=dict)  # by their [routes]


@dataclass(frozen=True)
class Tables:
    """What the alternatives run on. Without `pricing` only the regression can be varied."""

    pricing: Pricing | None
    zone_table: pd.DataFrame | None
    trip_table: pd.DataFrame | None


def sensitivity(
    origins: pd.DataFrame | None,
    routes: pd.DataFrame | None,
    zones: pd.DataFrame | None,
    sites: pd.DataFrame | None,
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    fit: pd.DataFrame,
    values: pd.DataFrame,
    graph: RoadGraph | None = None,
    zone_points: pd.DataFrame | None = None,
    *,
    study: Study,
) -> tuple[pd.DataFrame]:
    """Run the alternatives of [sensitivity], and hold them against the study.

    Parameters
    ----------
    origins, routes, zones, sites : tables of the flow; None where the study brings a finished
        table, and then only the regression is varied.
    zone_table, trip_table : the finished table.
    fit, values : tables `fit` and `surplus` of the study itself.
    graph, zone_points : for alternatives that choose routes otherwise.
    study : reads [routes], [costs], [visits], [zones], [market], [demand], [surplus],
        [sensitivity] and [compute].

    Returns
    -------
    The `sensitivity` table. An alternative that gives no value keeps its row, with the reason.
    """
    pricing = None
    if origins is not None and routes is not None and zones is not None and sites is not None:
        pricing = Pricing(origins, routes, zones, sites)
    tables = Tables(pricing, zone_table, trip_table)
    variants = own_variants(study)
    if study.sensitivity.standard:
        chosen = set(fit.loc[fit["chosen"], "model"].astype(str))
        finished = None if pricing is None else zone_table
        variants = [*standard_variants(study, finished, chosen), *variants]
    if pricing is not None and graph is not None:
        pricing.rerouted.update(rerouted_by(variants, pricing, graph, zone_points, study))
    base = [row | _about(None, study) for row in _site_rows(fit, values)]
    with make_executor(study.compute) as executor:
        rows = run_variants(variants, tables, study, executor)
    table = pd.DataFrame([*base, *rows])
    order = {site: place for place, site in enumerate(dict.fromkeys(table["site_id"]))}
    table = table.sort_values("site_id", key=lambda ids: ids.map(order), kind="stable")
    return (Sensitivity.checked(_with_changes(table.reset_index(drop=True))),)


def rerouted_by(
    variants: list[Variant],
    pricing: Pricing,
    graph: RoadGraph,
    zone_points: pd.DataFrame | None,
    study: Study,
) -> dict[str, pd.DataFrame]:
    """Routes of the alternatives that choose them otherwise, each choice once."""
    found: dict[str, pd.DataFrame] = {}
    for variant in variants:
        if not any(key.startswith("routes.") for key in variant.changes):
            continue
        changed = variant.apply(study)
        key = changed.routes.model_dump_json()
        if key not in found:
            priced = with_route_prices(changed)
            found[key] = route(pricing.zones, pricing.sites, graph, zone_points, study=priced)[0]
    return found


def run_variants(
    variants: list[Variant], tables: Tables, study: Study, executor: Workforce
) -> list[Row]:
    """Rows of all alternatives, in their order, whatever the executor."""
    alone = study.model_copy(update={"compute": ComputeSettings()})  # no executor in another
    batches = executor.workers
    results = in_batches(executor, run_batch, variants, tables, alone, batches=batches)
    return [row for rows in results for row in rows]


def run_batch(variants: list[Variant], tables: Tables, study: Study) -> list[list[Row]]:
    """Rows of each alternative of a batch, one row per site."""
    # What the stages hand on is of their own making; the study's own run has checked it all.
    with config_context(validation_enabled=False):
        flow = Flow(tables, study)
        return [list(_run(variant, flow, study)) for variant in variants]


def _run(variant: Variant, flow: Flow, study: Study) -> Iterator[Row]:
    about = _about(variant, study)
    try:
        for row in _site_rows(*flow.run(variant.apply(study))):
            yield row | about
    except PipelineError as error:
        for site in flow.site_ids():
            yield _empty_row(site, f"No value: {error}") | about


@dataclass
class Flow:
    """The stages from the prices to the surplus; what has not changed is not done again."""

    tables: Tables
    study: Study
    _priced: tuple[Study, pd.DataFrame] | None = None

    def run(self, study: Study) -> tuple[pd.DataFrame, pd.DataFrame]:
        """`fit` and `surplus` of the models that are chosen."""
        zone_table, trip_table = self._finished(study)
        estimates, fit = demand(zone_table, trip_table, study=study)
        chosen = fit[fit["chosen"]]
        keys = set(zip(chosen["site_id"], chosen["model"], strict=True))
        used = [key in keys for key in zip(estimates["site_id"], estimates["model"], strict=True)]
        few = study.surplus.model_copy(update={"draws": study.sensitivity.draws, "fees": (0.0,)})
        study = study.model_copy(update={"surplus": few})
        values, _, _ = surplus(estimates[used], chosen, zone_table, trip_table, study=study)
        return chosen, values

    def site_ids(self) -> list[str]:
        """The sites that are valued."""
        tables = self.tables
        finished = tables.zone_table if tables.zone_table is not None else tables.trip_table
        return [] if finished is None else sorted(finished["site_id"].astype(str).unique())

    def _finished(self, study: Study) -> tuple[pd.DataFrame | None, pd.DataFrame | None]:
        """The finished tables, as far as the changes reach."""
        tables, pricing = self.tables, self.tables.pricing
        priced_alike = study.costs == self.study.costs and study.market == self.study.market
        counted_alike = study.visits == self.study.visits and _same_visitors(study, self.study)
        routed_alike = study.routes == self.study.routes
        if pricing is None or (priced_alike and counted_alike and routed_alike):
            return tables.zone_table, tables.trip_table
        routes, zones, sites = self._routes(pricing, study), pricing.zones, pricing.sites
        if self._priced is None or not _same_prices(self._priced[0], study):
            (costs,) = cost(routes, zones, sites, pricing.origins, study=study)
            self._priced = (study, costs)
        costs = self._priced[1]
        by_zone = study.market.level == "zone" and tables.trip_table is None
        if counted_alike and routed_alike and by_zone and tables.zone_table is not None:
            return repriced(tables.zone_table, costs, sites, study=study), None
        return join(pricing.origins, costs, routes, zones, sites, study=study)

    def _routes(self, pricing: Pricing, study: Study) -> pd.DataFrame:
        """The study's routes, or those of an alternative."""
        if study.routes == self.study.routes:
            return pricing.routes
        found = pricing.rerouted.get(study.routes.model_dump_json())
        if found is None:
            raise RouteError(
                "routes cannot be chosen otherwise, because the study brings its routes ready made."
            )
        return found


def _same_prices(one: Study, other: Study) -> bool:
    return one.costs == other.costs and one.routes == other.routes


def _same_visitors(one: Study, other: Study) -> bool:
    """Whether a visit is of the same: a person, or a party's adults or vehicle."""
    keys = ("shared_by", "adults", "party_size")
    if one.costs == other.costs or one.costs.shared_by == other.costs.shared_by == "all":
        return True
    return all(getattr(one.costs, key) == getattr(other.costs, key) for key in keys)


def _about(variant: Variant | None, study: Study) -> Row:
    if variant is None:
        return {"variant": BASE, "changed": None, "from_value": None, "to_value": None}
    changed, before, after = changed_values(study, variant)
    return {
        "variant": variant.name,
        "changed": changed,
        "from_value": before,
        "to_value": after,
    }


def _site_rows(fit: pd.DataFrame, values: pd.DataFrame) -> Iterator[Row]:
    """One row per site: model, surplus per trip and annual surplus with their intervals."""
    chosen = fit[fit["chosen"].astype(bool)]
    for site, model in zip(chosen["site_id"], chosen["model"], strict=True):
        mine = values[(values["site_id"] == site) & (values["model"] == model)]
        yield {
            "site_id": site,
            "model": model,
            **_figures(mine, PER_TRIP, ""),
            **_figures(mine, ANNUAL, "annual_"),
            "note": None,
        }


def _figures(values: pd.DataFrame, measure: str, prefix: str) -> Row:
    """Value at the estimates, and the interval that the study quotes."""
    rows = values[values["measure"] == measure]
    found = {str(row["method"]): row for row in rows.to_dict("records")}
    at = next((found[m] for m in reversed(METHODS) if m in found), {})
    ends = next((found[m] for m in METHODS if m in found), {})
    return {
        measure: at.get("value", np.nan),
        f"{prefix}ci_low": ends.get("ci_low", np.nan),
        f"{prefix}ci_high": ends.get("ci_high", np.nan),
    }


def _empty_row(site_id: str, note: str) -> Row:
    names = (PER_TRIP, "ci_low", "ci_high", ANNUAL, "annual_ci_low", "annual_ci_high")
    return {"site_id": site_id, "model": None, **dict.fromkeys(names, np.nan), "note": note}


def _with_changes(table: pd.DataFrame) -> pd.DataFrame:
    """Add each alternative's change of the annual surplus against the study's, in per cent."""
    base = table[table["variant"] == BASE].set_index("site_id")[ANNUAL]
    against = table["site_id"].map(base).astype("float64")
    change = 100 * (table[ANNUAL] / against.where(against > 0) - 1)
    lacking = table[ANNUAL].isna() & table["note"].isna()
    note = table["note"].mask(lacking, "No finite surplus: visits do not fall with cost.")
    return table.assign(change_percent=change, note=note)


def summarise_sensitivity(outputs: tuple[pd.DataFrame]) -> str:
    """How many alternatives, and how far they move the annual surplus."""
    table = outputs[0]
    others = table[table["variant"] != BASE]
    if others.empty:
        return "no alternatives asked for"
    known = others["change_percent"].dropna()
    count = others["variant"].nunique()
    if known.empty:
        return f"{count} alternatives, none with a value"
    return f"{count} alternatives; annual surplus {known.min():+.0f} % to {known.max():+.0f} %"
