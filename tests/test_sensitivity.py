"""Alternatives: each is the flow run with other settings, on the routes that are there."""

from __future__ import annotations

from typing import Any

import pandas as pd
import pytest

from pipeline.costs import cost
from pipeline.demand import demand
from pipeline.errors import StudyError
from pipeline.executor import InProcess, in_batches
from pipeline.finished import join, repriced
from pipeline.sensitivity import (
    BASE,
    Pricing,
    Tables,
    run_variants,
    sensitivity,
    summarise_sensitivity,
)
from pipeline.sensitivity_settings import SensitivitySettings, VariantSettings
from pipeline.study import Study
from pipeline.surplus import surplus
from pipeline.variants import (
    Variant,
    changed_values,
    check_own_variants,
    own_variants,
    standard_variants,
)
from tests import world
from tests.visit_world import make_study

ORIGINS = world.draw_origins(7)
TWICE = {"costs.vehicle_cost_per_km": 0.5, "costs.wage_fraction": 0.6666}


def study(**keys: Any) -> Study:
    """The small world's study with keys of [sensitivity]."""
    keys = {"standard": False, "draws": 1000, **keys}
    return world.study().model_copy(update={"sensitivity": SensitivitySettings(**keys)})


def flow(settings: Study) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """The flow by hand: `zone_table, fit, surplus`."""
    (costs,) = cost(world.routes(), world.zones(), world.sites(), ORIGINS, study=settings)
    zone_table, *_ = join(
        ORIGINS, costs, world.routes(), world.zones(), world.sites(), study=settings
    )
    estimates, fit = demand(zone_table, None, study=settings)
    values, _, _ = surplus(estimates, fit, zone_table, None, study=settings)
    return zone_table, fit, values


def run(settings: Study) -> pd.DataFrame:
    zone_table, fit, values = flow(settings)
    (table,) = sensitivity(
        ORIGINS,
        world.routes(),
        world.zones(),
        world.sites(),
        zone_table,
        None,
        fit,
        values,
        study=settings,
    )
    return table.set_index("variant")


def cell(table: pd.DataFrame, variant: str, column: str) -> Any:
    return table[column].to_dict()[variant]


def per_trip(values: pd.DataFrame, fit: pd.DataFrame) -> float:
    model = fit.loc[fit["chosen"], "model"].iloc[0]
    rows = values[(values["model"] == model) & (values["measure"] == "surplus_per_trip")]
    return float(rows.loc[rows["method"] == "delta", "value"].iloc[0])


def variants(**changes: dict[str, Any]) -> tuple[VariantSettings, ...]:
    return tuple(VariantSettings(name=name, changes=keys) for name, keys in changes.items())


def test_everything_twice_as_dear_is_worth_twice_as_much() -> None:
    """With every cost doubled the price coefficient halves, and −1 ÷ it doubles: exactly.

    The substitute's fee is not doubled; that shifts its price by a constant, which moves no slope.
    """
    table = run(study(variants=variants(twice=TWICE)))
    assert cell(table, "twice", "change_percent") == pytest.approx(100, abs=1e-3)
    assert cell(table, "twice", "ci_low") == pytest.approx(
        2 * cell(table, BASE, "ci_low"), rel=1e-4
    )


def test_the_first_row_is_the_study_itself() -> None:
    settings = study(variants=variants(twice=TWICE))
    table = run(settings)
    _, fit, values = flow(settings)
    assert table.index[0] == BASE
    assert cell(table, BASE, "surplus_per_trip") == per_trip(values, fit)
    assert cell(table, BASE, "change_percent") == 0
    assert pd.isna(cell(table, BASE, "changed"))


def test_an_alternative_is_the_flow_with_its_settings() -> None:
    changes: dict[str, dict[str, Any]] = {
        "free time": {"costs.wage_fraction": 0.0},
        "near": {"market.max_distance_km": 40.0},
        "counted": {"demand.choose": "poisson"},
        "total": {"visits.annual_visits.fen000": 5000.0},
        "all": {
            "costs.wage_fraction": 0.5,
            "market.max_distance_km": 50.0,
            "demand.covariates": ["household_income"],
        },
    }
    settings = study(variants=variants(**changes))
    table = run(settings)
    for name, keys in changes.items():
        _, fit, values = flow(Variant(name, keys).apply(settings))
        assert cell(table, name, "surplus_per_trip") == pytest.approx(
            per_trip(values, fit), rel=1e-9
        )


def test_other_prices_in_the_finished_table_are_joining_again() -> None:
    settings = study()
    zone_table, _, _ = flow(settings)
    changed = Variant("x", {"costs.wage_fraction": 1.0, "market.max_distance_km": 60.0})
    again, _, _ = flow(changed.apply(settings))
    (costs,) = cost(
        world.routes(), world.zones(), world.sites(), None, study=changed.apply(settings)
    )
    quick = repriced(zone_table, costs, world.sites(), study=changed.apply(settings))
    pd.testing.assert_frame_equal(quick[again.columns.tolist()], again, check_like=True)


def test_an_alternative_without_a_value_keeps_its_row_and_says_why() -> None:
    table = run(study(variants=variants(nowhere={"market.max_distance_km": 4.0})))
    assert pd.isna(cell(table, "nowhere", "annual_surplus"))
    assert str(cell(table, "nowhere", "note")).startswith("No value: ")


def test_the_usual_alternatives_of_the_small_world() -> None:
    table = run(study(standard=True))
    names = list(table.index)
    assert names[:4] == [BASE, "time at no cost", "time at half the wage", "time at the whole wage"]
    assert "cost per km −25 %" in names
    assert "nobody shares the vehicle" in names
    assert "a visit is a vehicle's, with all in it" in names
    assert "a visit is an adult's, with the children" not in names
    assert "without substitute cost" in names
    # The nearest 75 % of the visits are those of six zones: too few for a regression.
    lacking = table["annual_surplus"].isna()
    assert list(table.index[lacking]) == ["market of the nearest 75 % of visits"]
    assert table["annual_surplus"][~lacking].gt(0).all()
    # Dearer travel is worth more to those who come all the same.
    assert cell(table, "cost per km +25 %", "change_percent") > 0
    assert cell(table, "time at no cost", "change_percent") < 0
    line = summarise_sensitivity((table.reset_index(),))
    assert line.startswith(f"{len(names) - 1} alternatives; annual surplus −".replace("−", "-"))


def test_party_sharing_by_adults_needs_to_know_the_adults() -> None:
    told = make_study(costs={"adults": 1.5})
    table = pd.DataFrame({"in_market": [True], "distance_km": [1.0], "visits": [1.0]})
    names = [one.name for one in standard_variants(told, table, {"poisson"})]
    assert "a visit is an adult's, with the children" in names


@pytest.mark.parametrize(
    ("columns", "treatments"),
    [
        ({"purpose_share": "p"}, ["drop", "apportion by share", "equal"]),
        ({"stops": "s"}, ["drop", "by stops", "equal"]),
        ({"stops": "s", "hours_on_site": "h", "nights": "n"}, ["drop", "by time", "by stops",
                                                               "equal"]),
        ({"hours_on_site": "h", "nights": "n"}, []),
    ],
)  # fmt: skip
def test_every_treatment_of_other_purposes_that_the_records_allow(
    columns: dict[str, str], treatments: list[str]
) -> None:
    table = pd.DataFrame({"in_market": [True], "distance_km": [1.0], "visits": [1.0]})
    told = make_study(visits={"columns": columns})
    names = [one.name for one in standard_variants(told, table, {"poisson"})]
    start = "trips with other purposes: "
    assert [name.removeprefix(start) for name in names if name.startswith(start)] == treatments


def test_trips_with_other_purposes_move_the_annual_surplus_by_their_share() -> None:
    """Of every party half of the trip was the site's: dropped there is no demand left to fit.

    Apportioned, the visits are halved and their fall with the price is as it was: the annual
    surplus is half, to the last digit that the fit has. Two places on the trip are a half, too.
    """
    columns = {"purpose_share": "share", "stops": "stops"}
    settings = study(standard=True)
    visits = settings.visits.model_copy(
        update={"columns": settings.visits.columns.model_copy(update=columns)}
    )
    settings = settings.model_copy(update={"visits": visits})
    origins = ORIGINS.assign(purpose_share=0.5, stops=1.0)
    zone_table, fit, values = flow(settings)
    routes, zones, sites = world.routes(), world.zones(), world.sites()
    (table,) = sensitivity(
        origins, routes, zones, sites, zone_table, None, fit, values, study=settings
    )
    found = table.set_index("variant")
    start = "trips with other purposes: "
    for treatment in ("apportion by share", "by stops", "equal"):
        assert cell(found, start + treatment, "change_percent") == pytest.approx(-50, abs=0.5)
    assert str(cell(found, f"{start}drop", "note")).startswith("No value")


def test_an_enjoyed_drive_is_worth_less() -> None:
    table = run(study(standard=True))
    a_quarter, free = "a quarter of the drive enjoyed", "time at no cost"
    assert cell(table, free, "change_percent") < cell(table, a_quarter, "change_percent") < 0
    told = make_study(costs={"enjoyed_drive_share": 0.5})
    finished = pd.DataFrame({"in_market": [True], "distance_km": [1.0], "visits": [1.0]})
    names = [one.name for one in standard_variants(told, finished, {"poisson"})]
    assert "none of the drive enjoyed" in names


def test_the_value_of_a_year_is_the_same_by_persons_and_by_vehicles() -> None:
    """Where all parties are alike, a vehicle's price and value are its people's together."""
    alike = ORIGINS.assign(party_size=2.1)
    settings = study()
    vehicle = Variant("x", {"costs.shared_by": "vehicle"}).apply(settings)
    found = []
    for one in (settings, vehicle):
        (costs,) = cost(world.routes(), world.zones(), world.sites(), alike, study=one)
        table, _ = join(alike, costs, world.routes(), world.zones(), world.sites(), study=one)
        estimates, fit = demand(table, None, study=one)
        values, _, _ = surplus(estimates, fit, table, None, study=one)
        rows = values[values["chosen"] & (values["method"] == "delta")]
        found.append(rows.set_index("measure")["value"])
    assert found[1]["surplus_per_trip"] == pytest.approx(
        2.1 * found[0]["surplus_per_trip"], rel=0.02
    )
    assert found[1]["annual_surplus"] == pytest.approx(found[0]["annual_surplus"], rel=0.02)


def test_a_study_with_a_limit_is_run_without_it_too() -> None:
    limited = make_study(market={"max_distance_km": 50.0})
    table = pd.DataFrame({"in_market": [True], "distance_km": [1.0], "visits": [1.0]})
    found = {one.name: one for one in standard_variants(limited, table, {"poisson"})}
    without = found["market without a limit"].apply(limited)
    assert without.market.max_distance_km is None


def test_a_brought_table_varies_the_regression_only() -> None:
    zone_table, fit, values = flow(study())
    settings = study(standard=True, variants=variants(twice=TWICE))
    (table,) = sensitivity(None, None, None, None, zone_table, None, fit, values, study=settings)
    assert all(key.startswith("demand.") for key in table["changed"][1:-1])


def test_a_grid_is_every_combination() -> None:
    grid: dict[str, Any] = {"costs.wage_fraction": (0.0, 0.5), "costs.party_size": (1.0, 2.0, 3.0)}
    found = own_variants(study(grid=grid))
    assert [one.name for one in found][:2] == [
        "wage_fraction 0, party_size 1",
        "wage_fraction 0, party_size 2",
    ]
    assert len(found) == 6
    assert found[-1].apply(study()).costs.party_size == 3.0


def test_what_changed_is_told_from_and_to() -> None:
    told = changed_values(study(), Variant("x", {"costs.wage_fraction": 0.5}))
    assert told == ("costs.wage_fraction", "0.3333", "0.5")
    model = Variant("x", {"demand.models": ("linear",), "demand.choose": "linear"})
    assert changed_values(study(), model) == ("demand.choose", "test", "linear")


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"costs.wage_share": 0.1}, r"'costs.wage_share', and there is no such key"),
        ({"costs.wage_fraction": 7.0}, r"variant 'x': .*less than or equal to 2"),
        ({"costs.vehicle_cost_per_mile": 0.3}, r"variant 'x': the price of driving is given once"),
    ],
)
def test_a_wrong_alternative_is_found_when_the_study_is_read(
    changes: dict[str, Any], words: str
) -> None:
    wrong = study(variants=variants(x=changes))
    with pytest.raises(StudyError, match=words):
        check_own_variants(wrong)
    with pytest.raises(StudyError, match=words):
        make_study(sensitivity={"variants": ({"name": "x", "changes": changes},)})


@pytest.mark.parametrize("key", ["roads.speed_factor", "market.zone_table", "costs"])
def test_what_the_routes_hang_on_cannot_be_varied(key: str) -> None:
    with pytest.raises(StudyError, match=rf"'{key}' cannot be varied"):
        make_study(sensitivity={"variants": ({"name": "x", "changes": {key: 1.0}},)})


# --- where the work is done ------------------------------------------------------------------


def squares(batch: list[int], add: int) -> list[int]:
    return [number * number + add for number in batch]


@pytest.mark.parametrize("batches", [1, 2, 3, 7, 20])
def test_results_come_in_the_order_of_the_tasks(batches: int) -> None:
    tasks = list(range(7))
    found = list(in_batches(InProcess(), squares, tasks, 1, batches=batches))
    assert found == [number * number + 1 for number in tasks]


def test_no_task_is_no_result() -> None:
    assert list(in_batches(InProcess(), squares, [], 1, batches=2)) == []


def broken(_: list[int]) -> list[int]:
    raise ZeroDivisionError("as it must be")


def test_an_error_in_a_task_is_raised_where_its_result_is_asked_for() -> None:
    with pytest.raises(ZeroDivisionError, match="as it must be"):
        list(in_batches(InProcess(), broken, [1], batches=1))


def tables(settings: Study) -> Tables:
    pricing = Pricing(ORIGINS, world.routes(), world.zones(), world.sites())
    return Tables(pricing, flow(settings)[0], None)


def test_the_number_of_batches_changes_no_figure() -> None:
    grid: dict[str, Any] = {"costs.wage_fraction": (0.0, 0.2, 0.4), "costs.party_size": (1.0, 2.0)}
    settings = study(grid=grid)
    one = run_variants(own_variants(settings), tables(settings), settings, InProcess())
    several = InProcess()
    several.workers = 4
    four = run_variants(own_variants(settings), tables(settings), settings, several)
    pd.testing.assert_frame_equal(pd.DataFrame(one), pd.DataFrame(four), check_exact=True)
