"""The surplus stage: measures, intervals, fees and zones that belong together."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from pipeline.demand import demand, fitted_models
from pipeline.errors import SurplusError
from pipeline.study import Study
from pipeline.surplus import demand_curve, parameter_draws, summarise_surplus, surplus
from tests.demand.worlds import a_sample, a_study, number, zones

MODELS = ("poisson", "negative_binomial", "log_linear", "linear")
STUDY = a_study(demand={"covariates": ("household_income",), "models": MODELS})
Outputs = tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]


def valued(table: pd.DataFrame, study: Study = STUDY) -> Outputs:
    estimates, fit = demand(table, None, study=study)
    return surplus(estimates, fit, table, None, study=study)


def figures(values: pd.DataFrame, model: str, method: str = "delta") -> pd.DataFrame:
    rows = values[(values["model"] == model) & (values["method"] == method)]
    return rows.set_index("measure")


@pytest.fixture(scope="module")
def outputs() -> Outputs:
    return valued(zones(expansion=4.0))


@pytest.mark.parametrize("model", ["poisson", "negative_binomial", "log_linear"])
def test_semi_log_figures_follow_from_the_price_coefficient(model: str) -> None:
    """−1/b, with standard error se/b² (delta method); everything else is a multiple of it."""
    table = zones(expansion=4.0)
    estimates, fit = demand(table, None, study=STUDY)
    values, _, _ = surplus(estimates, fit, table, None, study=STUDY)
    fitted = fitted_models(estimates, fit)["fen", model]
    b, se = fitted.price_coefficient, fitted.std_error[1]
    rows = figures(values, model)
    trip = rows.loc["surplus_per_trip"]
    assert trip["value"] == pytest.approx(-1 / b, rel=1e-12)
    assert trip["std_error"] == pytest.approx(se / b**2, rel=1e-7)
    width = fitted.quantile(0.95) * se / b**2
    assert trip["ci_low"] == pytest.approx(-1 / b - width, rel=1e-7)
    visits = table["visits"].sum()
    assert number(rows, "annual_surplus", "value") == pytest.approx(visits / -b)
    per_person = visits / -b / table["population"].sum()
    assert number(rows, "surplus_per_person_per_year", "value") == pytest.approx(per_person)
    mean_cost = (table["visits"] * table["travel_cost"]).sum() / visits
    assert number(rows, "price_elasticity", "value") == pytest.approx(b * mean_cost)


def test_a_poisson_predicts_what_was_observed(outputs: Outputs) -> None:
    values, _, _ = outputs
    rows = figures(values, "poisson")
    observed = values.query("model == 'poisson' and measure == 'annual_visits_observed'")
    assert observed["method"].tolist() == ["observed"]
    total = observed["value"].iloc[0]
    assert number(rows, "annual_visits_predicted", "value") == pytest.approx(total)
    assert number(rows, "annual_surplus_predicted", "value") == pytest.approx(
        number(rows, "annual_surplus", "value")
    )


def test_simulated_intervals_are_percentiles_of_minus_one_over_b(outputs: Outputs) -> None:
    """b is normal, so the percentiles of −1/b are known exactly: −1/(b ± 1.96 se)."""
    table = zones(expansion=4.0)
    estimates, fit = demand(table, None, study=STUDY)
    model = fitted_models(estimates, fit)["fen", "negative_binomial"]
    b, se = model.price_coefficient, model.std_error[1]
    trip = figures(outputs[0], "negative_binomial", "simulated").loc["surplus_per_trip"]
    assert trip["value"] == pytest.approx(-1 / b, rel=0.01)
    assert trip["ci_low"] == pytest.approx(-1 / (b - 1.95996 * se), rel=0.01)
    assert trip["ci_high"] == pytest.approx(-1 / (b + 1.95996 * se), rel=0.02)
    assert np.isnan(trip["std_error"])
    assert "0.00% of the draws" in trip["note"]


def test_draws_have_the_mean_and_covariance_of_the_estimates() -> None:
    sample_table = zones()
    estimates, fit = demand(sample_table, None, study=STUDY)
    model = fitted_models(estimates, fit)["fen", "negative_binomial"]
    draws = parameter_draws(model, draws=40_000, seed=3)
    z = (draws - model.estimate) / model.std_error
    np.testing.assert_allclose(z.mean(axis=0), 0, atol=0.03)
    correlation = model.covariance / np.outer(model.std_error, model.std_error)
    np.testing.assert_allclose(np.cov(z, rowvar=False), correlation, atol=0.03)


def test_the_same_seed_gives_the_same_tables_and_another_seed_others() -> None:
    table = zones()
    for one, two in zip(valued(table), valued(table), strict=True):
        pd.testing.assert_frame_equal(one, two)
    other = a_study(
        study={**STUDY.study.model_dump(), "folder": "line", "seed": 2},
        demand={"covariates": ("household_income",), "models": MODELS},
    )
    simulated = figures(valued(table)[0], "poisson", "simulated")["ci_low"]
    again = figures(valued(table, other)[0], "poisson", "simulated")["ci_low"]
    assert (simulated != again).all()


def test_the_fee_schedule_starts_at_the_count_and_the_annual_surplus(outputs: Outputs) -> None:
    values, fees, _ = outputs
    trip = figures(values, "negative_binomial")
    first = fees.iloc[0]
    assert first["fee"] == 0
    assert first["revenue"] == 0
    assert first["surplus_lost"] == 0
    assert first["visits"] == pytest.approx(zones(expansion=4.0)["visits"].sum())
    assert first["consumer_surplus"] == pytest.approx(number(trip, "annual_surplus", "value"))
    b = -1 / number(trip, "surplus_per_trip", "value")
    np.testing.assert_allclose(fees["visits"], first["visits"] * np.exp(b * fees["fee"]))


def test_what_is_left_and_lost_adds_up_at_every_fee(outputs: Outputs) -> None:
    """Surplus left + surplus lost = surplus without a fee; revenue is part of what is lost."""
    fees = outputs[1]
    total = fees["consumer_surplus"].iloc[0]
    np.testing.assert_allclose(fees["consumer_surplus"] + fees["surplus_lost"], total)
    assert (fees["revenue"] <= fees["surplus_lost"] + 1e-9).all()
    for name in ("visits", "revenue", "consumer_surplus", "surplus_lost"):
        assert (fees[f"{name}_ci_low"] <= fees[name] * (1 + 1e-12)).all()
        assert (fees[name] <= fees[f"{name}_ci_high"] * (1 + 1e-12)).all()


def test_few_zones_are_said_to_make_the_delta_interval_too_narrow() -> None:
    """20 zones: said of the delta method's areas alone."""
    values, _, _ = valued(zones(count=20, seed=2))
    few = values["note"].str.contains("delta method is too narrow", na=False)
    assert set(values.loc[few, "method"]) == {"delta"}
    assert {"surplus_per_trip", "annual_surplus"} <= set(values.loc[few, "measure"])
    many = valued(zones())[0]["note"].str.contains("too narrow", na=False)
    assert not many.any()


def test_default_fees_are_ten_round_steps_to_a_high_fee(outputs: Outputs) -> None:
    fees = outputs[1]
    assert len(fees) == 11
    assert fees["fee"].tolist() == [i * fees["fee"].iloc[1] for i in range(11)]
    share = fees["visits"].iloc[-1] / fees["visits"].iloc[0]
    assert 0.003 < share <= 0.1


def test_fees_of_the_study_are_sorted_and_start_at_none() -> None:
    study = a_study(surplus={"fees": (12.0, 2.5)})
    assert valued(zones(), study)[1]["fee"].tolist() == [0, 2.5, 12]


@pytest.mark.parametrize("choose", ["test", "linear", "log_linear"])
def test_zones_add_up_to_the_annual_surplus(choose: str) -> None:
    study = a_study(demand={"models": MODELS, "choose": choose})
    table = zones(expansion=4.0)
    table.loc[3, "in_market"] = False
    values, fees, by_zone = valued(table, study)
    annual = values.query("chosen and measure == 'annual_surplus' and method == 'delta'")
    assert by_zone["annual_surplus"].sum() == pytest.approx(annual["value"].iloc[0])
    assert fees["consumer_surplus"].iloc[0] == pytest.approx(annual["value"].iloc[0])
    assert by_zone["zone_id"].tolist() == table["zone_id"].tolist()
    assert by_zone.loc[3, ["predicted_visits", "annual_surplus"]].isna().all()


def test_visits_that_do_not_fall_with_cost_have_no_surplus_only_a_reason() -> None:
    table = zones(price=0.03)
    values, fees, by_zone = valued(table)
    areas = values[values["measure"].str.contains("surplus|choke")]
    assert areas[["value", "std_error", "ci_low", "ci_high"]].isna().all(axis=None)
    assert areas["note"].str.contains("the price coefficient is 0.0").any()
    assert areas["note"].str.startswith("No finite surplus").all()
    assert fees["fee"].tolist() == [0]
    assert fees["consumer_surplus"].isna().all()
    assert fees["note"].str.startswith("No finite surplus").all()
    assert by_zone["annual_surplus"].isna().all()
    assert by_zone["predicted_visits"].notna().all()
    line = summarise_surplus((values, fees, by_zone))
    assert line == "fen: no finite surplus (see surplus.csv)"


def test_a_price_that_may_be_positive_leaves_the_interval_open() -> None:
    """A weak price effect: some draws have b ≥ 0, and the interval has no upper end."""
    values, _, _ = valued(zones(price=-0.008, count=40, seed=4), a_study())
    trip = figures(values, "negative_binomial", "simulated").loc["surplus_per_trip"]
    assert np.isfinite(trip["value"])
    assert np.isfinite(trip["ci_low"])
    assert np.isnan(trip["ci_high"])
    assert "no finite upper end" in trip["note"]
    share = float(trip["note"].split("%")[0].split()[-1])
    assert share > 2.5


@pytest.mark.parametrize(
    "change",
    [
        {"travel_cost": 1000.0},
        {"household_income": 1e-4},
        {"travel_cost": 1000.0, "household_income": 1e-4},
    ],
)
def test_other_units_give_the_same_surplus_to_six_digits(change: dict[str, float]) -> None:
    plain, scaled = zones(), zones()
    for name, factor in change.items():
        scaled[name] *= factor
    money = change.get("travel_cost", 1.0)
    unit = money / change.get("household_income", 1.0)
    study = a_study(
        demand={"covariates": ("household_income",), "models": MODELS},
        surplus={"income_unit": unit},
    )
    _assert_same(valued(plain), valued(scaled, study), money)


def test_unsorted_rows_and_a_shifted_covariate_give_the_same_surplus() -> None:
    plain = zones()
    other = plain.sample(frac=1, random_state=1)
    other["household_income"] += 123_456.0
    one, two = valued(plain), valued(other)
    # An elasticity is of the whole income, so it alone must change with a shift of it.
    kept = [out[0][out[0]["measure"] != "income_elasticity"] for out in (one, two)]
    by_zone = two[2].sort_values("zone_id")
    _assert_same((kept[0], one[1], one[2]), (kept[1], two[1], by_zone), 1.0)


def _assert_same(one: Outputs, two: Outputs, money: float) -> None:
    unit = one[0]["unit"].str.startswith("EUR").to_numpy()
    columns = ["value", "std_error", "ci_low", "ci_high"]
    factor = np.where(unit, money, 1.0)[:, None]
    np.testing.assert_allclose(two[0][columns], one[0][columns] * factor, rtol=1e-6)
    assert one[0]["measure"].tolist() == two[0]["measure"].tolist()
    np.testing.assert_allclose(
        two[2]["annual_surplus"], one[2]["annual_surplus"] * money, rtol=1e-6
    )


def test_estimates_of_another_table_are_refused() -> None:
    estimates, fit = demand(zones(), None, study=STUDY)
    with pytest.raises(SurplusError, match="not made from this finished table"):
        surplus(estimates, fit, zones(site_id="weir"), None, study=STUDY)


def test_two_sites_and_one_without_a_fit() -> None:
    empty = zones(site_id="weir").assign(visits=0.0, sampled_visits=0.0)
    table = pd.concat([zones(), empty], ignore_index=True)
    values, fees, by_zone = valued(table)
    weir = values[values["site_id"] == "weir"]
    assert weir["value"].isna().all()
    assert weir["note"].str.contains("no visit").all()
    assert set(fees["site_id"]) == {"fen"}
    assert len(by_zone) == 160
    assert summarise_surplus((values, fees, by_zone)).startswith("fen: ")


def test_trip_records_are_valued_by_zone_where_they_have_one() -> None:
    random = np.random.default_rng(5)
    cost = random.uniform(1, 40, 300)
    trips = pd.DataFrame(
        {
            "record_id": [str(i) for i in range(300)],
            "zone_id": [f"{i % 7:04d}" if i % 10 else None for i in range(300)],
            "site_id": "fen",
            "trips": random.poisson(np.exp(1.5 - 0.08 * cost)).astype(float),
            "weight": 30.0,
            "travel_cost": cost,
        }
    )
    study = a_study(demand={"choose": "poisson"})
    estimates, fit = demand(None, trips, study=study)
    values, fees, by_zone = surplus(estimates, fit, None, trips, study=study)
    assert len(by_zone) == 7
    assert fees["visits"].iloc[0] == pytest.approx(30 * trips["trips"].sum())
    annual = values.query("chosen and measure == 'annual_surplus' and method == 'delta'")
    assert 0.85 < by_zone["annual_surplus"].sum() / annual["value"].iloc[0] < 0.95


def test_the_demand_curve_passes_through_the_mean_person() -> None:
    table = zones()
    sample = a_sample(table, "household_income")
    estimates, fit = demand(table, None, study=STUDY)
    for name in MODELS:
        model = fitted_models(estimates, fit)["fen", name]
        draws = parameter_draws(model, draws=1000, seed=1)
        curve = demand_curve(model, sample, draws, confidence=0.95)
        assert curve["travel_cost"].iloc[[0, -1]].tolist() == [0, sample.price.max()]
        assert (curve["rate"].diff().dropna() <= 0).all()
        inside = (curve["rate_ci_low"] <= curve["rate"]) & (curve["rate"] <= curve["rate_ci_high"])
        assert inside.all()
