"""Prices by which routes are chosen: what [routes.generalised] leaves to [costs]."""

from __future__ import annotations

from typing import TYPE_CHECKING

from pipeline.cost_parts import KM_PER_MILE
from pipeline.errors import StudyError

if TYPE_CHECKING:
    from pipeline.cost_settings import CostsSettings
    from pipeline.road_settings import GeneralisedSettings
    from pipeline.study import Study

FROM_COSTS = (
    "toll_per_km",
    "toll_per_booth",
    "ferry_fare_per_vehicle",
    "ferry_fare_per_person",
)


def with_route_prices(study: Study) -> Study:
    """The study with all of [routes.generalised], where routes are chosen by it.

    Raises
    ------
    StudyError
        A figure is not set, and [costs] has none that holds for every zone; or driving a km
        costs more than an hour is worth.
    """
    if study.routes.minimise != "generalised_cost":
        return study
    stated, costs = study.routes.generalised, study.costs
    filled: dict[str, float] = {}
    if costs is not None:
        year = study.study.price_year
        for name in FROM_COSTS:
            filled[name] = getattr(costs, name) * costs.price_factor(name, year)
        filled |= _people(costs) | _driving(costs, year) | _time(costs, stated, year)
    given = {k: v for k, v in stated.model_dump().items() if v is not None}
    made = stated.model_copy(update=filled | given)
    for name in ("value_of_time_per_hour", "vehicle_cost_per_km"):
        if getattr(made, name) is None:
            raise StudyError(
                f"[routes.generalised] {name} is needed: routes are to be chosen by the "
                "generalised cost, and [costs] has no figure that holds for every zone. Set it."
            )
    _refuse_dear_roads(made)
    routes = study.routes.model_copy(update={"generalised": made})
    return study.model_copy(update={"routes": routes})


def _people(costs: CostsSettings) -> dict[str, float]:
    return {"people": costs.party_size} if isinstance(costs.party_size, float) else {}


def _driving(costs: CostsSettings, year: int) -> dict[str, float]:
    """Cost per km, if the study has a flat one."""
    factor = costs.vehicle_cost_factor
    if costs.vehicle_cost_per_km is not None:
        price = costs.price_factor("vehicle_cost_per_km", year)
        return {"vehicle_cost_per_km": costs.vehicle_cost_per_km * factor * price}
    if costs.vehicle_cost_per_mile is not None:
        price = costs.price_factor("vehicle_cost_per_mile", year)
        return {"vehicle_cost_per_km": costs.vehicle_cost_per_mile / KM_PER_MILE * factor * price}
    return {}


def _time(costs: CostsSettings, stated: GeneralisedSettings, year: int) -> dict[str, float]:
    """Worth of an hour to the party, if the study has a flat wage."""
    stated_heads = (costs.adults, costs.party_size, stated.people)
    heads = next((n for n in stated_heads if isinstance(n, float)), None)
    worth = (costs.hourly_wage or 0.0) * costs.wage_fraction
    if worth <= 0 or heads is None:
        return {}
    return {"value_of_time_per_hour": worth * heads * costs.price_factor("hourly_wage", year)}


def _refuse_dear_roads(prices: GeneralisedSettings) -> None:
    """The search has room for 60 days of time and money together."""
    per_km, per_hour = prices.vehicle_cost_per_km or 0.0, prices.value_of_time_per_hour or 0.0
    if per_km > per_hour:
        raise StudyError(
            f"[routes.generalised] a km costs {per_km:g} and an hour is worth {per_hour:g}: time "
            'hardly counts. Set minimise = "distance", or correct the prices.'
        )
