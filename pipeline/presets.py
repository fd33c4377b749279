"""Presets of [costs]: published figures of one country, one currency and one year.

A preset is a file in ``config/costs/``: what it is about, and a list of figures, each with the
source that it was published in (or 'common practice, no source', or 'from memory'). A study
takes one by its name, and what the study itself sets goes before the preset's figure. No preset
is ever taken without being named.
"""

from __future__ import annotations

import copy
import difflib
import tomllib
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

FOLDER = Path(__file__).parent.parent / "config" / "costs"
#: Ways to price the vehicle; a study that names one gets none of the preset's others.
VEHICLE_KEYS = ("vehicle_cost_per_km", "vehicle_cost_per_mile", "vehicles", "vehicle_mix")
#: Keys whose amounts are money, so that they are of some year.
MONEY_KEYS = (
    "vehicle_cost_per_km",
    "vehicle_cost_per_mile",
    "energy_prices",
    "vehicles",
    "toll_per_km",
    "toll_per_booth",
    "ferry_fare_per_vehicle",
    "ferry_fare_per_person",
    "parking_per_vehicle",
    "lodging_per_person_night",
    "other_cost_per_person",
    "hourly_wage",
    "wage_floor_per_hour",
    "wage_cap_per_hour",
    "fallback_household_income",
    "modes",
)


@dataclass(frozen=True)
class Preset:
    """Figures of one preset.

    Attributes
    ----------
    name : name of its file, without ending.
    country, currency, year : ISO 3166 and ISO 4217 codes; the year of the prices.
    figures : value by dotted key below [costs].
    sources : source by dotted key.
    """

    name: str
    country: str
    currency: str
    year: int
    figures: dict[str, Any]
    sources: dict[str, str]

    def fill(self, given: dict[str, Any]) -> tuple[dict[str, Any], set[str]]:
        """The study's keys with the preset's figures where it has none, and which those are."""
        filled, taken = copy.deepcopy(given), set()
        own_vehicle = any(key in given for key in VEHICLE_KEYS[:3])
        for key, value in self.figures.items():
            top = key.split(".")[0]
            if own_vehicle and top in VEHICLE_KEYS:
                continue
            if _put(filled, key.split("."), value):
                taken.add(top)
        years = {key: self.year for key in MONEY_KEYS if key in taken and key not in given}
        filled["price_years"] = {**years, **given.get("price_years", {})}
        return filled, taken - set(given)

    def source(self, key: str) -> str:
        """Where the figures of a key of [costs] come from; empty where it has none."""
        words = [s for k, s in self.sources.items() if k == key or k.startswith(f"{key}.")]
        return "; ".join(dict.fromkeys(words))


@cache
def load_preset(name: str) -> Preset:
    """Read a preset by its name.

    Raises
    ------
    ValueError
        There is no such preset; the message names those that there are.
    """
    there = sorted(path.stem for path in FOLDER.glob("*.toml"))
    if name not in there:
        near = difflib.get_close_matches(name, there, n=1, cutoff=0.0)
        hint = f"; the nearest is {near[0]!r}" if near else ""
        raise ValueError(f"no such preset{hint} (there are: {', '.join(there) or 'none'})")
    raw = tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))
    figures = raw["figures"]
    return Preset(
        name=name,
        country=str(raw["country"]),
        currency=str(raw["currency"]),
        year=int(raw["year"]),
        figures={str(one["key"]): one["value"] for one in figures},
        sources={str(one["key"]): str(one["source"]) for one in figures},
    )


def _put(table: dict[str, Any], path: list[str], value: Any) -> bool:
    """Set a figure where there is none; say whether it was set."""
    for part in path[:-1]:
        table = table.setdefault(part, {})
        if not isinstance(table, dict):
            return False
    if path[-1] in table:
        return False
    table[path[-1]] = value
    return True
