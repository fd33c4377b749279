"""Areas under demand curves against closed forms and numerical integration."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad

from pipeline.demand.family import Family
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray
from tests.demand.worlds import bare_sample

#: 1,000, 2,000 and 500 people at costs 2, 5 and 20.
SAMPLE = bare_sample([30, 20, 1], [2, 5, 20], [1000, 2000, 500])
THETA = {
    "poisson": np.array([-3.0, -0.2]),
    "negative_binomial": np.array([-3.0, -0.2, 0.7]),
    "negative_binomial_1": np.array([-3.0, -0.2, 0.7]),
    "quasi_poisson": np.array([-3.0, -0.2]),
    "zero_inflated_poisson": np.array([-3.0, -0.2, 0.4]),
    "zero_inflated_negative_binomial": np.array([-3.0, -0.2, 0.4, 0.7]),
    "truncated_poisson": np.array([-3.0, -0.2]),
    "truncated_negative_binomial": np.array([-3.0, -0.2, 0.7]),
    "on_site_poisson": np.array([-3.0, -0.2]),
    "on_site_negative_binomial": np.array([-3.0, -0.2, 0.7]),
    "hurdle": np.array([-3.0, -0.2, 0.5, -0.15, 0.7]),
    "log_linear": np.array([-3.0, -0.2, 1.3]),
    "linear": np.array([40.0, -2.5]),
    "weighted_log_linear": np.array([-3.0, -0.2, 1.3]),
    "weighted_linear": np.array([40.0, -2.5]),
}


@pytest.mark.parametrize("name", FAMILIES)
def test_areas_are_the_integral_of_visits(name: str) -> None:
    """What is left beyond a fee and lost up to it: quadrature of the visits at every fee."""
    family, theta = FAMILIES[name], THETA[name]

    def visits(fee: float) -> float:
        return float(family.predict(theta, SAMPLE, fee)[0].sum())

    kinks = [11.0, 14.0]  # choke price 16 less the costs 5 and 2
    totals = family.totals(theta[None, :], SAMPLE, np.array([0.0, 3.0]))
    end = 200.0
    for column, fee in enumerate((0.0, 3.0)):
        left, _ = quad(visits, fee, end, points=kinks, limit=200)
        lost, _ = quad(visits, 0, fee)
        assert totals.visits[0, column] == pytest.approx(visits(fee))
        assert totals.left[0, column] == pytest.approx(left, rel=1e-7)
        assert totals.lost[0, column] == pytest.approx(lost, rel=1e-9)
        assert family.predict(theta, SAMPLE, fee)[1].sum() == pytest.approx(left, rel=1e-7)


def test_semi_log_surplus_per_trip_is_minus_one_over_b() -> None:
    totals = FAMILIES["poisson"].totals(THETA["poisson"][None, :], SAMPLE, np.zeros(1))
    assert totals.left[0, 0] / totals.visits[0, 0] == pytest.approx(1 / 0.2)


def test_linear_surplus_is_half_the_squared_rate_over_b() -> None:
    """Rates 35, 27.5 and 0 per 1,000 (−10 is no rate): q²/(2 × 2.5) for 1 and 2 thousand."""
    visits, area = FAMILIES["linear"].predict(THETA["linear"], SAMPLE)
    np.testing.assert_allclose(visits, [35, 55, 0])
    np.testing.assert_allclose(area, [35**2 / 5, 2 * 27.5**2 / 5, 0])


def test_linear_choke_cost_is_where_the_line_ends() -> None:
    choke = FAMILIES["linear"].choke_cost(THETA["linear"][None, :], SAMPLE)
    assert choke is not None
    assert choke[0] == pytest.approx(16)


@pytest.mark.parametrize("name", FAMILIES)
@pytest.mark.parametrize("price", [0.0, 0.1])
def test_demand_that_does_not_fall_bounds_no_area(name: str, price: float) -> None:
    family = FAMILIES[name]
    theta = THETA[name].copy()
    theta[1] = price
    totals = family.totals(theta[None, :], SAMPLE, np.array([0.0, 2.0]))
    assert np.isinf(totals.left).all()
    assert np.isinf(family.predict(theta, SAMPLE)[1]).all()
    lost, _ = quad(lambda fee: float(family.predict(theta, SAMPLE, fee)[0].sum()), 0, 2)
    assert totals.lost[0, 1] == pytest.approx(lost)


@pytest.mark.parametrize("name", FAMILIES)
def test_the_elasticity_is_that_of_all_visits(name: str) -> None:
    """Every cost up by a millionth; for the semi-log at visits that are the predicted ones."""
    family: Family = FAMILIES[name]
    theta: FloatArray = THETA[name]
    visits = family.predict(theta, SAMPLE)[0]
    sample = replace(SAMPLE, visits=visits)
    dearer = replace(sample, design=sample.design * [1, 1 + 1e-6])
    change = family.predict(theta, dearer)[0].sum() / visits.sum() - 1
    assert family.elasticity(theta[None, :], sample)[0] == pytest.approx(change / 1e-6, rel=1e-4)


def test_many_draws_in_blocks_equal_one_by_one(monkeypatch: pytest.MonkeyPatch) -> None:
    random = np.random.default_rng(0)
    for name in ("poisson", "linear", "log_linear"):
        draws = THETA[name] * random.uniform(0.5, 1.5, (50, len(THETA[name])))
        fees = np.array([0.0, 1.0])
        whole = FAMILIES[name].totals(draws, SAMPLE, fees)
        monkeypatch.setattr("pipeline.demand.curves._BLOCK", 7)
        parts = FAMILIES[name].totals(draws, SAMPLE, fees)
        monkeypatch.undo()
        np.testing.assert_allclose(parts.left, whole.left)
        np.testing.assert_allclose(parts.lost, whole.lost)
