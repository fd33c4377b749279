"""Whether the figures of [costs] fit together: names that must be there, shares, bands."""

from __future__ import annotations

import difflib
import math
from typing import TYPE_CHECKING, Any

from pipeline.presets import MONEY_KEYS

if TYPE_CHECKING:
    from pipeline.cost_settings import CostsSettings

ROAD = "road"
#: Figures that a column of the zones may give, beside energy_prices.* and vehicle_mix.*
ZONE_KEYS = (
    "vehicle_cost_per_km",
    "vehicle_cost_per_mile",
    "hourly_wage",
    "wage_fraction",
    "earners_per_household",
)
YEAR_KEYS = (*MONEY_KEYS, "household_income", "fee")


def check_costs(costs: CostsSettings) -> None:
    """Hold the section against itself.

    Raises
    ------
    ValueError
        Driving has no price or several, a name refers to nothing, shares do not add up, bands
        are out of order, or the adults who are to pay are not known.
    """
    _one_price_of_driving(costs)
    _names_fit(costs)
    _bands_in_order(costs)
    if costs.shared_by == "adults" and costs.adults is None:
        raise ValueError(
            "shared_by = 'adults' needs adults: their number in a party, or 'records' "
            "(with the column in [visits.columns] adults)"
        )


def _one_price_of_driving(costs: CostsSettings) -> None:
    names = ("vehicle_cost_per_km", "vehicle_cost_per_mile", "vehicles")
    given = [name for name in names if getattr(costs, name) not in (None, {})]
    if len(given) != 1:
        said = " and ".join(given) if given else "none"
        raise ValueError(
            "the price of driving is given once: vehicle_cost_per_km, vehicle_cost_per_mile, "
            f"or [costs.vehicles] (given: {said})"
        )


def _names_fit(costs: CostsSettings) -> None:
    classes = tuple(costs.vehicles)
    _known(costs.vehicle_mix, classes, "vehicle_mix", "a class of [costs.vehicles]")
    if len(classes) > 1 and not costs.vehicle_mix:
        raise ValueError(f"vehicle_mix is needed with several classes ({', '.join(classes)})")
    if costs.vehicle_mix and abs(math.fsum(costs.vehicle_mix.values()) - 1) > 1e-6:
        total = math.fsum(costs.vehicle_mix.values())
        raise ValueError(f"vehicle_mix adds up to {total:g}; it must add up to 1")
    energies = [vehicle.energy for vehicle in costs.vehicles.values()]
    _known(energies, tuple(costs.energy_prices), "energy", "in [costs.energy_prices]")
    _known(costs.price_years, YEAR_KEYS, "price_years", "an amount of [costs]")
    by_zone = [f"vehicle_mix.{name}" for name in classes]
    by_zone += [f"energy_prices.{name}" for name in costs.energy_prices]
    _known(costs.zone_columns, (*ZONE_KEYS, *by_zone), "zone_columns", "a figure by zone")
    for band in costs.mode_bands:
        _known(band.shares, (ROAD, *costs.modes), "mode_bands", "'road' or in [costs.modes]")


def _bands_in_order(costs: CostsSettings) -> None:
    ends = [math.inf if band.up_to_km is None else band.up_to_km for band in costs.mode_bands]
    if ends and (sorted(set(ends)) != ends or ends[-1] != math.inf):
        raise ValueError(
            "mode_bands must go from near to far, and the last one must have no up_to_km"
        )


def _known(names: Any, allowed: tuple[str, ...], key: str, what: str) -> None:
    for name in names:
        if name not in allowed:
            near = difflib.get_close_matches(name, allowed, n=1, cutoff=0.0)
            hint = f"; the nearest is {near[0]!r}" if near else ""
            raise ValueError(f"{key} names {name!r}, which is not {what}{hint}")
