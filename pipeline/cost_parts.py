"""Parts of [costs] of which a study may have several: vehicles, modes, bands of distance."""

from __future__ import annotations

import math
from typing import Annotated, Any, Self

from pydantic import AfterValidator, model_validator

from pipeline.sections import NotNegative, Section, Share, setting

#: Words of costs that fall due whether or not a trip is made.
FIXED_WORDS = (
    "insurance",
    "tax",
    "finance",
    "financing",
    "interest",
    "loan",
    "lease",
    "leasing",
    "registration",
    "licence",
    "license",
    "garage",
    "per_year",
    "annual",
    "yearly",
)


def _refuse_fixed(items: dict[str, float]) -> dict[str, float]:
    for name in items:
        words = [word for word in FIXED_WORDS if word in name.lower()]
        if words:
            raise ValueError(
                f"{name!r} looks like a fixed cost per year ({words[0]}): it is paid whether or "
                "not this trip is made, so it is no part of the price of the trip. Leave it out; "
                "a levy that grows with the distance driven may stand as 'distance_charge'"
            )
    return items


PerKm = Annotated[dict[str, NotNegative], AfterValidator(_refuse_fixed)]

KM_PER_MILE = 1.609344
"""International mile (Units of Measurement, NIST Special Publication 811, 2008)."""


class VehicleSettings(Section):
    """One class of vehicle, built up from what grows with distance."""

    energy: str = setting("Its fuel or current, by the name in [costs.energy_prices].")
    consumption_per_100km: float = setting(
        "What it uses.", unit="l or kWh per 100 km", usual="5 to 9 l; 15 to 22 kWh", gt=0
    )
    per_km: PerKm = setting(
        "What else grows with distance, by item: wear, tyres, depreciation, distance_charge. "
        "A fixed cost per year (insurance, tax, finance) is refused.",
        {},
        unit="currency/km",
        usual="wear 0.03 to 0.06, tyres 0.01 to 0.02, depreciation 0.05 to 0.15 in EUR or USD; "
        "common practice, no source",
    )

    @model_validator(mode="before")
    @classmethod
    def _only_what_grows(cls, data: Any) -> Any:
        if isinstance(data, dict):
            _refuse_fixed({key: 0.0 for key in data if key not in cls.model_fields})
        return data


class ModeSettings(Section):
    """A way of travelling that is not the party's own vehicle."""

    fare_per_person: float = setting("Fare, one way.", 0.0, unit="currency", ge=0)
    fare_per_km: float = setting(
        "Fare per person and km of the road distance.", 0.0, unit="currency/km", ge=0
    )
    speed_kmh: float = setting("Speed over the road distance.", unit="km/h", gt=0)
    extra_min: float = setting(
        "Getting to it and from it, waiting and changing, one way.", 0.0, unit="min", ge=0
    )
    access_km: float = setting(
        "Driven in the party's own or a hired vehicle to the station or airport and from the last "
        "one to the site, one way; costs what driving costs.",
        0.0,
        unit="km",
        ge=0,
    )


class ModeBand(Section):
    """How people travel up to some distance."""

    up_to_km: float | None = setting(
        "One way by road; none: any distance beyond the other bands.", None, unit="km", gt=0
    )
    shares: dict[str, Share] = setting(
        "Shares of the visitors by mode: 'road' for their own vehicle, or a name of [costs.modes]."
    )

    @model_validator(mode="after")
    def _whole(self) -> Self:
        total = math.fsum(self.shares.values())
        if abs(total - 1) > 1e-6:
            raise ValueError(f"the shares add up to {total:g}; they must add up to 1")
        return self
