"""Figures of the study: classes of vehicle, zones' own figures, years, presets, modes."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from pipeline.costs import cost
from pipeline.errors import CostError, StudyError
from pipeline.presets import FOLDER, MONEY_KEYS, load_preset
from pipeline.study import Study
from tests.visit_world import make_routes, make_sites, make_study, make_zones

CLASSES: dict[str, Any] = {
    "vehicle_cost_per_km": None,
    "vehicles": {
        "petrol": {"energy": "petrol", "consumption_per_100km": 8.0, "per_km": {"wear": 0.06}},
        "electric": {"energy": "current", "consumption_per_100km": 20.0},
    },
    "energy_prices": {"petrol": 2.0, "current": 0.5},
    "vehicle_mix": {"petrol": 0.75, "electric": 0.25},
}


def priced(study: Study, zones: pd.DataFrame | None = None) -> pd.DataFrame:
    zones = make_zones() if zones is None else zones
    (costs,) = cost(make_routes(), zones, make_sites(), None, study=study)
    return costs.set_index(["zone_id", "site_id"])


def first(study: Study, column: str, zones: pd.DataFrame | None = None) -> float:
    return float(priced(study, zones)[column].iloc[0])


# --- vehicles --------------------------------------------------------------------------------


def test_a_mix_of_classes() -> None:
    """Petrol 0.08 × 2.00 + 0.06 = 0.22; electric 0.2 × 0.50 = 0.10; ¾ and ¼: 0.19."""
    assert first(make_study(costs=CLASSES), "vehicle_cost_per_km") == pytest.approx(0.19)


def test_a_cost_per_mile() -> None:
    """A mile is 1.609344 km by definition (NIST SP 811)."""
    study = make_study(costs={"vehicle_cost_per_km": None, "vehicle_cost_per_mile": 0.6})
    assert first(study, "vehicle_cost_per_km") == pytest.approx(0.6 / 1.609344)


def test_a_quarter_more_per_km() -> None:
    study = make_study(costs={**CLASSES, "vehicle_cost_factor": 1.25})
    assert first(study, "vehicle_cost_per_km") == pytest.approx(0.19 * 1.25)


@pytest.mark.parametrize(
    "item", ["insurance", "road_tax", "finance", "lease_per_year", "registration"]
)
def test_a_fixed_yearly_cost_is_refused_with_the_reason(item: str) -> None:
    vehicles = {"petrol": {"energy": "petrol", "consumption_per_100km": 8.0, "per_km": {item: 1.0}}}
    with pytest.raises(StudyError, match=rf"{item}.*fixed cost per year.*whether or not this trip"):
        make_study(costs={**CLASSES, "vehicles": vehicles, "vehicle_mix": {}})
    vehicles = {"petrol": {"energy": "petrol", "consumption_per_100km": 8.0, item: 600.0}}
    with pytest.raises(StudyError, match=rf"{item}.*fixed cost per year"):
        make_study(costs={**CLASSES, "vehicles": vehicles, "vehicle_mix": {}})


def test_a_levy_by_distance_is_no_fixed_cost() -> None:
    vehicles = {
        "petrol": {
            "energy": "petrol",
            "consumption_per_100km": 8.0,
            "per_km": {"distance_charge": 0.04},
        }
    }
    study = make_study(costs={**CLASSES, "vehicles": vehicles, "vehicle_mix": {}})
    assert first(study, "vehicle_cost_per_km") == pytest.approx(0.2)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"vehicle_mix": {"petrol": 0.5, "elektric": 0.5}}, r"'elektric'.*'electric'"),
        ({"vehicle_mix": {"petrol": 0.5, "electric": 0.4}}, r"adds up to 0.9"),
        ({"vehicle_mix": {}}, r"vehicle_mix is needed with several classes"),
        ({"energy_prices": {"petrol": 2.0}}, r"'current'.*energy_prices.*'petrol'"),
        (
            {"energy_prices": {"petrol": -2.0, "current": 0.1}},
            r"energy_prices.petrol. *= -2.0|-2.0",
        ),
        ({"vehicle_cost_per_km": 0.2}, r"given once.*vehicle_cost_per_km and vehicles"),
        ({"vehicles": {}, "vehicle_mix": {}}, r"given once.*none"),
        ({"ferry_fare_per_person": -1.0}, r"\[costs\] ferry_fare_per_person = -1.0 is not valid"),
        ({"zone_columns": {"fuel": "x"}}, r"zone_columns names 'fuel'"),
        ({"price_years": {"toll": 2020}}, r"price_years names 'toll'.*'toll_per_km'"),
    ],
)
def test_what_cannot_be_is_refused(change: dict[str, Any], words: str) -> None:
    with pytest.raises(StudyError, match=words):
        make_study(costs={**CLASSES, **change})


def test_a_misspelt_key_of_a_vehicle_names_the_nearest() -> None:
    vehicles = {"petrol": {"energy": "petrol", "consumption_per_100_km": 8.0}}
    with pytest.raises(StudyError, match=r"vehicles.petrol. consumption_per_100_km.*per_100km"):
        make_study(costs={**CLASSES, "vehicles": vehicles, "vehicle_mix": {}})


# --- zones' own figures ----------------------------------------------------------------------


def test_figures_of_the_zones_and_the_study_s_where_they_have_none() -> None:
    zones = make_zones().assign(pump=[3.0, float("nan"), 1.0], pay=[10.0, 40.0, 1.0])
    columns = {"energy_prices.petrol": "pump", "hourly_wage": "pay"}
    costs = priced(make_study(costs={**CLASSES, "zone_columns": columns}), zones)
    reserve = costs.xs("reserve", level="site_id")
    per_km = reserve["vehicle_cost_per_km"]
    assert per_km["west"] == pytest.approx(0.75 * (0.24 + 0.06) + 0.25 * 0.1)
    assert per_km["east"] == pytest.approx(0.19)
    assert reserve["hourly_wage"].to_dict() == {"west": 10.0, "east": 40.0, "isle": 1.0}


def test_a_zone_s_mix_must_be_whole() -> None:
    zones = make_zones().assign(cars=[0.75, 0.5, 0.75])
    study = make_study(costs={**CLASSES, "zone_columns": {"vehicle_mix.petrol": "cars"}})
    with pytest.raises(CostError, match=r"shares .* 1 zones.*'east' with 0.75"):
        priced(study, zones)


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ([3.0, -2.0, 1.0], r"column 'pump'.*negative.*-2.0 in row 2 \(zone 'east'\)"),
        ([3.0, 2.0, "dear"], r"column 'pump'.*'dear' in row 3 \(zone 'isle'\)"),
    ],
)
def test_a_wrong_figure_of_a_zone_names_row_and_column(values: list[Any], words: str) -> None:
    zones = make_zones().assign(pump=pd.Series(values, dtype=object))
    study = make_study(costs={**CLASSES, "zone_columns": {"energy_prices.petrol": "pump"}})
    with pytest.raises(CostError, match=words):
        priced(study, zones)


def test_a_column_that_is_not_there_names_the_remedy() -> None:
    study = make_study(costs={**CLASSES, "zone_columns": {"hourly_wage": "poplation"}})
    with pytest.raises(CostError, match=r"Did you mean 'population'.*\[zones\] covariates"):
        priced(study)


def test_parking_at_a_site_that_is_not_there() -> None:
    study = make_study(costs={"parking_per_vehicle": {"resreve": 3.0}})
    with pytest.raises(CostError, match=r"'resreve', which is no site; the nearest is 'reserve'"):
        priced(study)


# --- prices of different years ---------------------------------------------------------------

INDEX = {"2019": 80.0, "2024": 100.0}


def test_amounts_of_another_year_are_brought_to_the_study_s() -> None:
    """The study is in prices of 2024; 80 to 100 is a quarter more.

    0.30 a km becomes 0.375: 60 km × 0.375 ÷ 2 = 11.25; the wage of 25 becomes 31.25.
    """
    years = {"vehicle_cost_per_km": 2019, "household_income": 2019, "fee": 2019}
    costs = priced(make_study(costs={"price_index": INDEX, "price_years": years}))
    west = costs.xs("reserve", level="site_id").loc["west"]
    assert west["vehicle_cost"] == pytest.approx(11.25)
    assert west["hourly_wage"] == pytest.approx(31.25)
    assert west["fee_cost"] == pytest.approx(5.0)


def test_a_missing_year_of_the_index_is_named() -> None:
    years = {"toll_per_km": 2018}
    words = r"toll_per_km is in prices of 2018.*price_index\] has no 2018 \(it has: 2019, 2024\)"
    with pytest.raises(StudyError, match=words):
        make_study(costs={"price_index": INDEX, "price_years": years})


# --- presets ---------------------------------------------------------------------------------


def preset_study(name: str, currency: str, year: int = 2025, **costs: Any) -> Study:
    needed = {"vehicle_cost_per_km": None, "wage_fraction": None, **costs}
    given = {key: value for key, value in needed.items() if value is not None}
    about = {"name": "s", "title": "s", "currency": currency, "price_year": year, "folder": "s"}
    raw = {"study": about, "costs": {"preset": name, "party_size": 2.0, **given}}
    from pipeline.study import study_from

    return study_from(raw, base=Path(), source="small.toml")


def test_a_preset_fills_what_the_study_does_not_set() -> None:
    """IRS Notice 2025-5: 21 cents a mile; US DOT guidance: half of the hourly income."""
    study = preset_study("us_2025", "USD")
    assert study.costs.vehicle_cost_per_mile == 0.21
    assert study.costs.wage_fraction == 0.5
    assert "wage_fraction" not in study.costs.model_fields_set
    own = preset_study("us_2025", "USD", wage_fraction=0.25, vehicle_cost_per_km=0.2)
    assert own.costs.wage_fraction == 0.25
    assert own.costs.vehicle_cost_per_mile is None
    assert {"wage_fraction", "vehicle_cost_per_km"} <= own.costs.model_fields_set


def test_a_preset_of_another_currency_is_refused() -> None:
    with pytest.raises(StudyError, match=r"us_2025' is in USD \(US\), the study in EUR"):
        preset_study("us_2025", "EUR")


def test_a_preset_of_another_year_needs_the_index() -> None:
    with pytest.raises(StudyError, match=r"prices of 2025.*prices of 2027.*no 2025"):
        preset_study("us_2025", "USD", 2027)
    index = {"2025": 100.0, "2027": 110.0}
    study = preset_study("us_2025", "USD", 2027, price_index=index)
    assert first(study, "vehicle_cost_per_km") == pytest.approx(0.21 * 1.1 / 1.609344)


def test_an_unknown_preset_names_those_that_there_are() -> None:
    with pytest.raises(StudyError, match=r"nearest is 'us_2025' .*de_2025, gb_2025, us_2025"):
        preset_study("us_2024", "USD")


@pytest.mark.parametrize("path", sorted(FOLDER.glob("*.toml")), ids=lambda path: path.stem)
def test_every_preset_is_dated_bound_and_has_its_sources(path: Path) -> None:
    preset = load_preset(path.stem)
    raw = tomllib.loads(path.read_text(encoding="utf-8"))
    assert str(preset.year) in path.stem
    assert len(preset.country) == 2
    assert all(one["source"].strip() for one in raw["figures"])
    study = preset_study(path.stem, preset.currency, preset.year)
    assert 0.05 < first(study, "vehicle_cost_per_km") < 0.5
    for key in {name.split(".")[0] for name in preset.figures}.intersection(MONEY_KEYS):
        assert study.costs.price_years[key] == preset.year


# --- modes -----------------------------------------------------------------------------------

MODES: dict[str, Any] = {
    "modes": {"train": {"fare_per_person": 5.0, "fare_per_km": 0.1, "speed_kmh": 90.0,
                        "extra_min": 20.0}},
    "mode_bands": (
        {"up_to_km": 40.0, "shares": {"road": 1.0}},
        {"shares": {"road": 0.6, "train": 0.4}},
    ),
}  # fmt: skip


def test_the_expected_cost_over_modes() -> None:
    """West, 30 km, drives. Of the east, 61 km on average, 4 in 10 take the train.

    Road: 122 km × 0.30 ÷ 2 = 18.30; train: 2 × (5 + 6.10) = 22.20. Hours: road 1.55, train
    2 × (61 ÷ 90 + 1/3) = 2.0222. Expected: 0.6 × 18.30 = 10.98; 0.4 × 22.20 = 8.88;
    (0.6 × 1.55 + 0.4 × 2.0222) × 10 = 17.3889 at half of 20 an hour; gate 6: 43.2489.
    """
    costs = priced(make_study(costs=MODES)).xs("reserve", level="site_id")
    plain = priced(make_study()).xs("reserve", level="site_id")
    assert costs.loc["west", "travel_cost"] == pytest.approx(plain.loc["west", "travel_cost"])
    east = costs.loc["east"]
    assert east["road_share"] == pytest.approx(0.6)
    assert east["vehicle_cost"] == pytest.approx(10.98)
    assert east["fare_cost"] == pytest.approx(8.88)
    assert east["time_cost"] == pytest.approx(17.3889, abs=1e-4)
    assert east["travel_cost"] == pytest.approx(43.2489, abs=1e-4)
    assert east["travel_hours"] == pytest.approx(0.6 * 1.55 + 0.4 * 2.02222, abs=1e-4)


@pytest.mark.parametrize(
    ("bands", "words"),
    [
        (({"shares": {"road": 0.6, "rail": 0.4}},), r"'rail'.*\[costs.modes\]"),
        (({"shares": {"road": 0.6}},), r"add up to 0.6"),
        (({"up_to_km": 40.0, "shares": {"road": 1.0}},), r"last one must have no up_to_km"),
    ],
)
def test_bands_that_leave_something_out_are_refused(bands: Any, words: str) -> None:
    with pytest.raises(StudyError, match=words):
        make_study(costs={**MODES, "mode_bands": bands})
