"""Alternatives to a study's assumptions: the usual ones, the study's own, and a grid."""

from __future__ import annotations

import copy
import itertools
import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pydantic import ValidationError

from pipeline.errors import StudyError

if TYPE_CHECKING:
    import pandas as pd

    from pipeline.study import Study

WAGE_FRACTIONS = (0.0, 1 / 3, 0.5, 1.0)
"""Common practice, no source: no value of time, a third, a half and the whole wage."""
PER_KM = (0.75, 1.25)
ENJOYED = 0.25
"""Common practice, no source: a quarter of the drive's time taken for a pleasure."""
VISIT_SHARES = (0.9, 0.75)
"""Market extents: the nearest zones that send this share of the visits."""


@dataclass(frozen=True)
class Variant:
    """One alternative.

    Attributes
    ----------
    name : what to call it.
    changes : new value by dotted key of the study file.
    """

    name: str
    changes: dict[str, Any]

    def apply(self, study: Study) -> Study:
        """The study with the changes; only the changed sections are made anew.

        Raises
        ------
        StudyError
            A key does not exist, or a value is not allowed.
        """
        for section in sorted({key.partition(".")[0] for key in self.changes}):
            settings = getattr(study, section)
            values = copy.deepcopy(settings.model_dump())
            for key, value in self.changes.items():
                head, _, rest = key.partition(".")
                if head == section:
                    self._put(values, rest.split("."), value, key)
            try:
                made = type(settings).model_validate(values)
            except ValidationError as error:
                said = error.errors()[0]["msg"].removeprefix("Value error, ")
                raise StudyError(f"[sensitivity] variant {self.name!r}: {said}.") from None
            study = study.model_copy(update={section: made})
        return study

    def _put(self, values: dict[str, Any], path: list[str], value: Any, key: str) -> None:
        for part in path[:-1]:
            values = values.get(part, {})
        if path[-1] not in values and len(path) == 1:
            raise StudyError(
                f"[sensitivity] variant {self.name!r} changes {key!r}, and there is no such key. "
                "Correct it; docs/study_file.md lists every key."
            )
        values[path[-1]] = _frozen(value)


def own_variants(study: Study) -> list[Variant]:
    """Alternatives that the study file lists, and the combinations of its grid."""
    listed = [Variant(one.name, dict(one.changes)) for one in study.sensitivity.variants]
    grid = study.sensitivity.grid
    for values in itertools.product(*grid.values()) if grid else ():
        changes = dict(zip(grid, values, strict=True))
        words = ", ".join(f"{key.rpartition('.')[2]} {shown(v)}" for key, v in changes.items())
        listed.append(Variant(words, changes))
    return listed


def check_own_variants(study: Study) -> None:
    """Apply every alternative of the study file, so that a wrong one is found at once."""
    for variant in own_variants(study):
        variant.apply(study)


def standard_variants(
    study: Study, zone_table: pd.DataFrame | None, models: set[str]
) -> list[Variant]:
    """The usual alternatives, as far as they differ from the study and it has what they need.

    Parameters
    ----------
    zone_table : the finished table, for the extent of the market.
    models : the models that the surplus comes from now.
    """
    found = [*_model_variants(study, models), *_covariate_variants(study)]
    if zone_table is not None and study.costs is not None:
        found = [*_cost_variants(study), *_market_variants(study, zone_table), *found]
        found += _purpose_variants(study)
    return found


def _cost_variants(study: Study) -> Iterator[Variant]:
    costs = study.costs
    for share in WAGE_FRACTIONS:
        if abs(share - costs.wage_fraction) > 1e-3:
            yield Variant(f"time at {_fraction(share)}", {"costs.wage_fraction": share})
    key = _driving_key(study)
    for factor in PER_KM:
        words = f"cost per km {100 * (factor - 1):+g} %".replace("-", "−")
        yield Variant(words, {f"costs.{key}": round(getattr(costs, key) * factor, 12)})
    if costs.distance_along == "fastest":
        yield Variant("kilometres of the shortest route", {"costs.distance_along": "shortest"})
    enjoyed = 0.0 if costs.enjoyed_drive_share else ENJOYED
    words = "a quarter of the drive enjoyed" if enjoyed else "none of the drive enjoyed"
    yield Variant(words, {"costs.enjoyed_drive_share": enjoyed})
    yield from _sharing_variants(study)


def _sharing_variants(study: Study) -> Iterator[Variant]:
    """Whose a visit is, and parties of one."""
    costs = study.costs
    for sharing, words in (
        ("all", "a visit is a person's"),
        ("adults", "a visit is an adult's, with the children"),
        ("vehicle", "a visit is a vehicle's, with all in it"),
    ):
        if sharing != costs.shared_by and (sharing != "adults" or costs.adults is not None):
            yield Variant(words, {"costs.shared_by": sharing})
    if costs.shared_by == "all" and study.market.level == "zone" and costs.party_size != 1:
        alone = {"costs.party_size": 1.0, "costs.adults": None}
        yield Variant("nobody shares the vehicle", alone)


def _driving_key(study: Study) -> str:
    """The key that scales the price of driving."""
    flat = ("vehicle_cost_per_km", "vehicle_cost_per_mile")
    return next((k for k in flat if getattr(study.costs, k) is not None), "vehicle_cost_factor")


def _market_variants(study: Study, zone_table: pd.DataFrame) -> Iterator[Variant]:
    market = study.market
    if market.max_distance_km is not None or market.max_drive_time_min is not None:
        everywhere = {"market.max_distance_km": None, "market.max_drive_time_min": None}
        yield Variant("market without a limit", everywhere)
    inside = zone_table[zone_table["in_market"] & zone_table["distance_km"].notna()]
    near_first = inside.sort_values("distance_km")
    furthest = float(near_first["distance_km"].max())
    reached = near_first["visits"].cumsum() / max(float(near_first["visits"].sum()), 1e-12)
    for share in VISIT_SHARES:
        limit = _rounded_up(float(near_first["distance_km"][reached >= share].min()))
        if limit < furthest:
            words = f"market of the nearest {share * 100:g} % of visits"
            yield Variant(words, {"market.max_distance_km": limit})


def _rounded_up(limit: float) -> float:
    """A limit of three figures, not below the zone that it is to hold."""
    size = 10.0 ** (math.floor(math.log10(max(limit, 1e-3))) - 2)
    return round(math.ceil(limit / size - 1e-9) * size, 6)


def _model_variants(study: Study, models: set[str]) -> Iterator[Variant]:
    """Every fitted model that is not the chosen one; linear forms beside the counts."""
    for name in dict.fromkeys((*study.demand.models, "log_linear")):
        if models != {name}:
            words = f"model: {name.replace('_', ' ')}"
            yield Variant(words, {"demand.models": (name,), "demand.choose": name})


def _covariate_variants(study: Study) -> Iterator[Variant]:
    covariates = study.demand.covariates
    for name in covariates:
        rest = tuple(other for other in covariates if other != name)
        yield Variant(f"without {name.replace('_', ' ')}", {"demand.covariates": rest})
    if study.costs is not None and "substitute_cost" not in covariates:
        more = (*covariates, "substitute_cost")
        yield Variant("with substitute cost", {"demand.covariates": more})


def _purpose_variants(study: Study) -> Iterator[Variant]:
    """Treatments of trips with other purposes, where the records tell of them."""
    now = getattr(study.visits, "other_purposes", None)
    columns = study.visits.columns
    told = {name for name in type(columns).model_fields if getattr(columns, name) is not None}
    if now is None or not told & {"purpose_share", "stops"}:
        return
    possible = {
        "apportion_by_share": "purpose_share" in told,
        "by_time": "hours_on_site" in told and bool(told & {"trip_hours", "nights"}),
        "by_stops": "stops" in told,
    }
    for treatment in ("keep", "drop", *possible, "equal"):
        if treatment != now and possible.get(treatment, True):
            words = f"trips with other purposes: {treatment.replace('_', ' ')}"
            yield Variant(words, {"visits.other_purposes": treatment})


def changed_values(study: Study, variant: Variant) -> tuple[str, str, str]:
    """What a variant changes, from what, to what, in words."""
    keys = list(variant.changes)
    if "demand.choose" in keys:
        # The list of models to fit follows the choice.
        keys = [key for key in keys if key != "demand.models"]
    before = [shown(_value(study, key)) for key in keys]
    after = [shown(variant.changes[key]) for key in keys]
    return "; ".join(keys), "; ".join(before), "; ".join(after)


def shown(value: Any) -> str:
    """A setting's value as people write it."""
    if value is None or value in ((), {}, ""):
        return "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.4g}"
    if isinstance(value, tuple | list):
        return ", ".join(shown(item) for item in value)
    return str(value)


def _value(study: Study, key: str) -> Any:
    value: Any = study
    for part in key.split("."):
        value = value.get(part) if isinstance(value, dict) else getattr(value, part)
    return value


def _fraction(share: float) -> str:
    named = {0.0: "no cost", 1 / 3: "a third of the wage", 0.5: "half the wage"}
    return named.get(share, "the whole wage")


def _frozen(value: Any) -> Any:
    return tuple(_frozen(item) for item in value) if isinstance(value, list) else value
