"""Exact welfare against numerical integration of compensated demand; Fieller; bootstrap."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import solve_ivp

from pipeline.demand import demand, fitted_models
from pipeline.demand.registry import FAMILIES
from pipeline.surplus import parameter_draws, surplus
from pipeline.surplus.intervals import delta_rows, simulated_rows
from pipeline.surplus.measures import Valuation
from pipeline.surplus.ratios import fieller
from pipeline.surplus.welfare import compensating, equivalent, exact_totals
from tests.demand.persons import drawn
from tests.demand.worlds import a_sample, a_study, bare_sample, number, zones

PRICE, COST, INCOME = -0.08, 10.0, 500.0


def paid_along(linear: bool, effect: float, *, from_income: float, prices: list[float]) -> float:
    """Income that keeps the visitor as well off while the price goes along `prices`.

    dy/dp = q(p, y): Shephard's lemma, integrated numerically.
    """

    def trips(price: float, income: float) -> float:
        index = 3.0 + PRICE * price + effect * (income - INCOME)
        return max(index, 0.0) if linear else float(np.exp(index))

    path = solve_ivp(
        lambda p, y: [trips(float(p), float(y[0]))],
        (prices[0], prices[-1]),
        [from_income],
        rtol=1e-10,
        atol=1e-10,
        max_step=abs(prices[-1] - prices[0]) / 200,
    )
    return float(path.y[0, -1])


@pytest.mark.parametrize("linear", [False, True])
@pytest.mark.parametrize("effect", [2e-3, -1e-3, 1e-6])
def test_closed_forms_are_the_integral_of_compensated_demand(linear: bool, effect: float) -> None:
    """Compensating: up the prices from today's income. Equivalent: back down from today's."""
    index = 3.0 + PRICE * COST
    trips = np.array(index if linear else np.exp(index))
    price, income = np.array(PRICE), np.array(effect)
    far = 400.0
    up = paid_along(linear, effect, from_income=INCOME, prices=[COST, far]) - INCOME
    assert float(compensating(trips, price, income, linear=linear)) == pytest.approx(up, rel=1e-5)
    start = COST - index / PRICE if linear else far
    down = INCOME - paid_along(linear, effect, from_income=INCOME, prices=[start, COST])
    assert float(equivalent(trips, price, income, linear=linear)) == pytest.approx(down, rel=1e-5)


@pytest.mark.parametrize("linear", [False, True])
def test_marshallian_surplus_lies_between_and_is_the_limit(linear: bool) -> None:
    trips, price = np.array(4.0), np.array(-0.5)
    plain = 16 / (2 * 0.5) if linear else 4 / 0.5
    for effect in (1e-2, 1e-9, 0.0):
        paid = float(compensating(trips, price, np.array(effect), linear=linear))
        given = float(equivalent(trips, price, np.array(effect), linear=linear))
        assert given <= plain * (1 + 1e-12)
        assert paid >= plain * (1 - 1e-12)
        if effect < 1e-8:
            assert paid == pytest.approx(plain, rel=1e-7)
            assert given == pytest.approx(plain, rel=1e-7)
    # An income effect so strong that no pay makes up for the loss.
    assert compensating(trips, price, np.array(0.2), linear=linear) == np.inf


def test_totals_are_sums_over_people() -> None:
    """1,000 and 500 people; per person −log(1 + δq/α)/δ."""
    sample = bare_sample([30, 20], [2, 5], [1000, 500], household_income=[30_000.0, 40_000.0])
    theta = np.array([-3.0, -0.2, 1e-5])
    trips = np.exp(sample.design @ theta)
    paid, given = exact_totals(
        FAMILIES["poisson"], sample, theta[None, :], income="household_income", unit=1.0
    )
    by_hand = -np.log1p(1e-5 * trips / -0.2) / 1e-5 @ [1000, 500]
    assert paid[0] == pytest.approx(by_hand)
    assert given[0] < trips @ [1000, 500] / 0.2 < paid[0]


def test_exact_welfare_of_a_zero_inflated_is_that_of_those_who_may_come() -> None:
    """A share of 1/(1 + e^0.4) never comes; the others' demand is the semi-log of the count."""
    sample = bare_sample([30, 20], [2, 5], [1000, 500], household_income=[30_000.0, 40_000.0])
    theta = np.array([-3.0, -0.2, 1e-5, -0.4])
    plain = exact_totals(
        FAMILIES["poisson"], sample, theta[None, :3], income="household_income", unit=1.0
    )
    found = exact_totals(
        FAMILIES["zero_inflated_poisson"],
        sample,
        theta[None, :],
        income="household_income",
        unit=1.0,
    )
    for one, other in zip(plain, found, strict=True):
        assert other[0] == pytest.approx(one[0] / (1 + np.exp(-0.4)))


@pytest.mark.parametrize(
    ("name", "zero_terms", "exact"),
    [
        ("poisson", None, True),
        ("zero_inflated_poisson", None, True),
        ("zero_inflated_poisson", ("const", "age"), True),
        ("zero_inflated_negative_binomial", ("const", "travel_cost"), False),
        ("zero_inflated_poisson", ("const", "household_income"), False),
        ("hurdle", None, False),
    ],
)
def test_where_there_is_no_closed_form_it_is_said(
    name: str, zero_terms: tuple[str, ...] | None, exact: bool
) -> None:
    """What may come must not hang on cost or income; a hurdle's expected visits never do it."""
    sample = drawn("hurdle", seed=1, count=400)
    income = np.random.default_rng(2).normal(40_000, 8_000, 400)
    sample = replace(
        sample,
        terms=(*sample.terms, "household_income"),
        design=np.column_stack([sample.design, income]),
        zero_terms=zero_terms,
    )
    model = FAMILIES[name].fit(sample, errors="model")
    assert model.converged, model.problem
    valued = Valuation(FAMILIES[name], sample, np.array([0.0, 5.0]), "household_income")
    draws = parameter_draws(model, draws=200, seed=1)
    rows = pd.DataFrame(
        [*delta_rows(model, valued, 0.95), *simulated_rows(model, valued, draws, 0.95, seed=1)]
    )
    own = rows[rows["measure"] == "compensating_variation_per_trip"]
    assert own["method"].tolist() == (["delta", "simulated"] if exact else ["delta"])
    assert own["value"].notna().all() == exact
    assert own["note"].str.startswith("Not given: expected visits").all() != exact


def test_a_hurdle_of_single_trips_is_worth_the_area_of_its_logit() -> None:
    """Small and Rosen (1981): log(1 + exp ζ) / |g|, where whoever comes comes once."""
    sample = replace(bare_sample([1, 0, 1], [2, 5, 20], [10, 20, 30]), per=1.0)
    for slope in (-0.15, -0.6):
        theta = np.array([-60.0, -0.1, 0.8, slope, 0.5])
        family = FAMILIES["hurdle"]
        zeta = 0.8 + slope * sample.price
        expected = np.logaddexp(0, zeta) / -slope
        visits, area = family.predict(theta, sample)
        np.testing.assert_allclose(area, expected * sample.people, rtol=1e-6)
        totals = family.totals(theta[None, :], sample, np.zeros(1))
        assert totals.left[0, 0] == pytest.approx(area.sum(), rel=1e-9)
        np.testing.assert_allclose(visits, sample.people / (1 + np.exp(-zeta)))


def test_a_hurdle_whose_participation_does_not_fall_has_no_area() -> None:
    sample = replace(bare_sample([1, 0, 1], [2, 5, 20], [10, 20, 30]), per=1.0)
    theta = np.array([-3.0, -0.1, 0.8, 0.01, 0.5])
    assert not FAMILIES["hurdle"].falls(theta[None, :], sample)[0]
    assert np.isinf(FAMILIES["hurdle"].totals(theta[None, :], sample, np.zeros(1)).left).all()


def test_fieller_of_minus_one_over_b_and_of_a_ratio() -> None:
    """Against the definition: at the ends a t statistic of above − ratio × below is ±z."""
    low, high = fieller(-1.0, -0.5, np.diag([0.0, 0.01]), 1.96)
    assert (low, high) == pytest.approx((1 / 0.696, 1 / 0.304))
    spread = np.array([[0.04, 0.006], [0.006, 0.01]])
    for ratio in fieller(3.0, 0.8, spread, 1.96):
        variance = spread[0, 0] - 2 * ratio * spread[0, 1] + ratio**2 * spread[1, 1]
        assert abs(3.0 - ratio * 0.8) / np.sqrt(variance) == pytest.approx(1.96)


def test_fieller_without_upper_end_is_open() -> None:
    low, high = fieller(-1.0, -0.1, np.diag([0.0, 0.01]), 1.96)
    assert low == pytest.approx(1 / 0.296)
    assert high == np.inf
    assert fieller(0.01, 0.1, np.diag([1.0, 1.0]), 1.96) == (-np.inf, np.inf)


STUDY = a_study(
    demand={
        "covariates": ("household_income",),
        "models": ("poisson", "negative_binomial", "linear"),
    },
    surplus={"bootstrap": 300},
)


def figures(values: pd.DataFrame, model: str, method: str) -> pd.DataFrame:
    rows = values[(values["model"] == model) & (values["method"] == method)]
    return rows.set_index("measure")


@pytest.fixture(scope="module")
def valued() -> tuple[pd.DataFrame, pd.DataFrame]:
    table = zones(expansion=4.0)
    estimates, fit = demand(table, None, study=STUDY)
    values, fees, _ = surplus(estimates, fit, table, None, study=STUDY)
    return values, fees


def test_the_bootstrap_stands_beside_the_others(
    valued: tuple[pd.DataFrame, pd.DataFrame],
) -> None:
    values = valued[0]
    drawn = figures(values, "negative_binomial", "bootstrap").loc["surplus_per_trip"]
    delta = figures(values, "negative_binomial", "delta").loc["surplus_per_trip"]
    width = (drawn["ci_high"] - drawn["ci_low"]) / (delta["ci_high"] - delta["ci_low"])
    assert 0.7 < width < 1.4
    assert "300 bootstrap replicates" in drawn["note"]
    assert set(values.loc[values["method"] == "bootstrap", "model"]) == {"negative_binomial"}


def test_the_trapezoid_is_that_of_the_fee_schedule(
    valued: tuple[pd.DataFrame, pd.DataFrame],
) -> None:
    values, fees = valued
    expected = np.trapezoid(fees["visits"], fees["fee"])
    rows = figures(values, "negative_binomial", "delta")
    assert number(rows, "annual_surplus_trapezoid", "value") == pytest.approx(expected)
    assert number(rows, "access_value", "value") == number(rows, "annual_surplus", "value")


def test_a_line_is_valued_over_observed_and_over_predicted_trips(
    valued: tuple[pd.DataFrame, pd.DataFrame],
) -> None:
    """q² ÷ 2|b| of each zone's own rate, summed over its thousands of people."""
    table = zones(expansion=4.0)
    sample = a_sample(table, "household_income")
    estimates, fit = demand(table, None, study=STUDY)
    price = fitted_models(estimates, fit)["fen", "linear"].price_coefficient
    rate = 1000 * table["visits"] / table["population"]
    triangle = (table["population"] / 1000 * rate**2).sum() / (-2 * price) / table["visits"].sum()
    rows = figures(valued[0], "linear", "delta")
    assert number(rows, "surplus_per_trip_observed", "value") == pytest.approx(triangle)
    predicted, area = FAMILIES["linear"].predict(
        fitted_models(estimates, fit)["fen", "linear"].estimate, sample
    )
    assert number(rows, "surplus_per_trip", "value") == pytest.approx(area.sum() / predicted.sum())


def test_uncertain_visits_widen_the_annual_figures_and_no_other() -> None:
    """A tenth of the visits as standard error of each zone; errors add up as squares."""
    table = zones(expansion=4.0)
    unsure = table.assign(visits_se=table["visits"] / 10)
    estimates, fit = demand(table, None, study=STUDY)
    plain = figures(surplus(estimates, fit, table, None, study=STUDY)[0], "poisson", "delta")
    values, _, _ = surplus(estimates, fit, unsure, None, study=STUDY)
    wide = figures(values, "poisson", "delta")
    assert number(wide, "surplus_per_trip", "std_error") == pytest.approx(
        number(plain, "surplus_per_trip", "std_error")
    )
    visits_error = float(np.sqrt((unsure["visits_se"] ** 2).sum()))
    trip = number(plain, "surplus_per_trip", "value")
    both = np.hypot(number(plain, "annual_surplus", "std_error"), trip * visits_error)
    assert number(wide, "annual_surplus", "std_error") == pytest.approx(both, rel=1e-6)
    observed = figures(values, "poisson", "observed").loc["annual_visits_observed"]
    assert observed["std_error"] == pytest.approx(visits_error)
    one, two = (
        figures(v, "poisson", "simulated").loc["annual_surplus"]
        for v in (surplus(estimates, fit, table, None, study=STUDY)[0], values)
    )
    assert two["ci_high"] - two["ci_low"] > one["ci_high"] - one["ci_low"]


def test_the_income_effect_is_shown_where_income_is_in_the_regression() -> None:
    table = zones(count=300)
    estimates, fit = demand(table, None, study=STUDY)
    values, _, _ = surplus(estimates, fit, table, None, study=STUDY)
    rows = figures(values, "negative_binomial", "delta")["value"].astype(float).to_dict()
    assert (
        rows["equivalent_variation_per_trip"]
        < rows["surplus_per_trip"]
        < rows["compensating_variation_per_trip"]
    )
    effect = fitted_models(estimates, fit)["fen", "negative_binomial"].estimate[2]
    mean = (table["visits"] * table["household_income"]).sum() / table["visits"].sum()
    assert rows["income_elasticity"] == pytest.approx(effect * mean)
    without = a_study()
    estimates, fit = demand(table, None, study=without)
    values, _, _ = surplus(estimates, fit, table, None, study=without)
    assert not values["measure"].str.contains("variation|income").any()
