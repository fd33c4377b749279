"""What a km of driving costs: a flat figure, or built up by class of vehicle.

Only what grows with the distance is part of it; the study file refuses fixed yearly costs.
"""

from __future__ import annotations

import pandas as pd

from pipeline.cost_parts import KM_PER_MILE
from pipeline.cost_settings import CostsSettings
from pipeline.costs.figures import Figures
from pipeline.errors import CostError


def cost_per_km(figures: Figures) -> pd.Series[float]:
    """Money per km of every row: the flat figure, or the classes by their shares.

    Raises
    ------
    CostError
        A zone's shares of the classes do not add up to 1.
    """
    settings = figures.settings
    if settings.vehicle_cost_per_km is not None:
        flat = figures.each("vehicle_cost_per_km", settings.vehicle_cost_per_km)
        return flat * settings.vehicle_cost_factor
    if settings.vehicle_cost_per_mile is not None:
        flat = figures.each("vehicle_cost_per_mile", settings.vehicle_cost_per_mile)
        return flat / KM_PER_MILE * settings.vehicle_cost_factor
    total = pd.Series(0.0, index=figures.zone_id.index)
    for name, share in _mix(figures).items():
        total = total + share * class_cost_per_km(figures, name)
    return total * settings.vehicle_cost_factor


def class_cost_per_km(figures: Figures, name: str) -> pd.Series[float]:
    """Money per km of one class: price × consumption, and what else grows with distance."""
    vehicle = figures.settings.vehicles[name]
    price = figures.settings.energy_prices[vehicle.energy]
    energy = figures.each(f"energy_prices.{vehicle.energy}", price)
    others = sum(vehicle.per_km.values()) * figures.factor("vehicles")
    return energy * vehicle.consumption_per_100km / 100 + others


def own_cost_per_km(
    records: pd.DataFrame, expected: pd.Series[float], figures: Figures
) -> pd.Series[float]:
    """Money per km of every record's own class of vehicle; `expected` where it is not known.

    A flat figure holds for every vehicle.
    """
    settings = figures.settings
    if "vehicle" not in records or not settings.vehicles:
        return expected
    per_km = expected.copy()
    for name in settings.vehicles:
        of_class = class_cost_per_km(figures, name) * settings.vehicle_cost_factor
        per_km = per_km.mask(records["vehicle"] == name, of_class)
    return per_km


def refuse_strange_vehicles(origins: pd.DataFrame, settings: CostsSettings) -> None:
    """Records of a class of vehicle that [costs.vehicles] does not have.

    Raises
    ------
    CostError
        There are such records.
    """
    classes = tuple(settings.vehicles)
    if "vehicle" not in origins or not classes:
        return
    strange = origins["vehicle"].notna() & ~origins["vehicle"].isin(classes)
    if strange.any():
        row = int(strange.to_numpy().argmax())
        raise CostError(
            f"{int(strange.sum())} visit record(s) have a class of vehicle that [costs.vehicles] "
            f"does not know; first: {origins['vehicle'].iloc[row]!r} in column 'vehicle', row "
            f"{row + 1} (record {origins['record_id'].iloc[row]!r}; classes: "
            f"{', '.join(classes)}). Add the class, correct the records, or leave out "
            "[visits.columns] vehicle."
        )


def _mix(figures: Figures) -> dict[str, pd.Series[float]]:
    """Share of every class in every row."""
    settings = figures.settings
    stated = settings.vehicle_mix or dict.fromkeys(settings.vehicles, 1.0)
    shares = {
        name: figures.each(f"vehicle_mix.{name}", stated.get(name, 0.0))
        for name in settings.vehicles
    }
    total = pd.concat(shares, axis=1).sum(axis=1)
    wrong = (total - 1).abs() > 1e-6
    if wrong.any():
        zone = figures.zone_id[wrong].iloc[0]
        raise CostError(
            f"the shares of the vehicle classes of {figures.zone_id[wrong].nunique()} zones do "
            f"not add up to 1; first: zone {zone!r} with {total[wrong].iloc[0]:.4g} (columns: "
            f"{', '.join(settings.zone_columns.values())}). Correct the zones."
        )
    return shares
