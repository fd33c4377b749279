"""The two shapes of demand curve, and the areas under them.

Semi-log, rate = exp(x'β) with price coefficient b < 0: the area beyond any price is
rate / −b, so the surplus of a trip is −1/b at every price. Linear, rate q = x'β: the area up to
the choke price, where q is zero, is q² / (2|b|). Both from Haab and McConnell, Valuing
Environmental and Natural Resources, 2002, chapter 7 (from memory; both are plain integrals).
A coefficient b ≥ 0 bounds no area: the surplus is infinite, never a number.
"""

from __future__ import annotations

import numpy as np

from pipeline.demand.family import Totals, mean_regressors
from pipeline.demand.sample import PRICE, BoolArray, FloatArray, Sample

_BLOCK = 2_000_000


def price_column(theta: FloatArray, sample: Sample) -> FloatArray:
    """Price coefficient of each parameter vector."""
    return theta[..., sample.terms.index(PRICE)]


def row_blocks(theta: FloatArray, sample: Sample) -> list[FloatArray]:
    """Parameter vectors in blocks that keep vectors × rows within memory."""
    parts = max(1, -(-len(theta) * sample.nobs // _BLOCK))
    return np.array_split(theta, parts)


def index(theta: FloatArray, sample: Sample) -> FloatArray:
    """x'β for each parameter vector and row; parameters after the regressors are ignored."""
    return np.asarray(theta[:, : len(sample.terms)] @ sample.design.T, dtype=float)


def exponential_totals(base: FloatArray, price: FloatArray, fees: FloatArray) -> Totals:
    """Areas under visits base × exp(price × fee); base and price are (vectors, 1)."""
    with np.errstate(over="ignore"):
        visits = base * np.exp(price * fees)
        bounded = np.where(price < 0, price, -1.0)
        left = np.where(price < 0, visits / -bounded, np.inf)
        slope = np.where(price == 0, 1.0, price)
        lost = np.where(price == 0, base * fees, base * np.expm1(price * fees) / slope)
    return Totals(visits=visits, left=left, lost=lost)


class FallingCurve:
    """What every curve knows: whether it falls."""

    def falls(self, theta: FloatArray, sample: Sample) -> BoolArray:
        """Whether visits fall with cost without end, per parameter vector."""
        return np.asarray(price_column(theta, sample) < 0, dtype=bool)


class SemiLogCurve(FallingCurve):
    """Curve of every family whose expected visits are exp(x'β)."""

    surplus_words = "−1 / coefficient of travel_cost."
    elasticity_words = "Coefficient of travel_cost × mean cost of the observed visits."

    def is_minus_one_over_b(self, sample: Sample) -> bool:
        """Whether the surplus of a trip is −1/b at every parameter vector."""
        del sample
        return True

    def level(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """Factor on exp(x'β) that makes it the expected rate, per parameter vector."""
        del sample
        return np.ones(len(theta))

    def predict(
        self, theta: FloatArray, sample: Sample, fee: float = 0.0
    ) -> tuple[FloatArray, FloatArray]:
        """Visits per year of each row at an added fee, and the area beyond it."""
        price = float(price_column(theta, sample))
        vectors = theta[None, :]
        with np.errstate(over="ignore"):
            rate = np.exp(index(vectors, sample)[0] + price * fee)
        visits = sample.people * rate * self.level(vectors, sample)[0]
        return visits, visits / -price if price < 0 else np.full_like(visits, np.inf)

    def totals(self, theta: FloatArray, sample: Sample, fees: FloatArray) -> Totals:
        """The curve of all rows together; `theta` is (vectors, parameters)."""
        with np.errstate(over="ignore"):
            base = np.concatenate(
                [
                    self.level(block, sample) * (np.exp(index(block, sample)) @ sample.people)
                    for block in row_blocks(theta, sample)
                ]
            )[:, None]
        return exponential_totals(base, price_column(theta, sample)[:, None], fees)

    def elasticity(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """Price coefficient times the mean cost of the observed visits."""
        mean_cost = float(sample.visits @ sample.price / sample.visits.sum())
        return price_column(theta, sample) * mean_cost

    def choke_cost(self, theta: FloatArray, sample: Sample) -> FloatArray | None:
        """No cost brings an exponential to zero."""
        del theta, sample
        return None

    def rate_curve(self, theta: FloatArray, sample: Sample, costs: FloatArray) -> FloatArray:
        """Visits per person and year at each cost, other regressors at their mean."""
        level = self.level(theta, sample)[:, None]
        return np.asarray(level * np.exp(at_costs(theta, sample, costs)), dtype=float)


class LinearCurve(FallingCurve):
    """Curve of a rate that is a straight line, zero beyond the choke price."""

    surplus_words = "Area under the predicted line up to the choke price ÷ predicted visits."
    elasticity_words = "Of all predicted visits, every cost rising by one per cent."

    def predict(
        self, theta: FloatArray, sample: Sample, fee: float = 0.0
    ) -> tuple[FloatArray, FloatArray]:
        """Visits per year of each row at an added fee, and the area beyond it."""
        price = float(price_column(theta, sample))
        rate = index(theta[None, :], sample)[0] + price * fee
        people = sample.people / sample.per
        rate = np.maximum(rate, 0)
        if price >= 0:
            return people * rate, np.full_like(rate, np.inf)
        return people * rate, people * rate**2 / (-2 * price)

    def totals(self, theta: FloatArray, sample: Sample, fees: FloatArray) -> Totals:
        """The curve of all rows together; `theta` is (vectors, parameters)."""
        blocks = [self._block_totals(b, sample, fees) for b in row_blocks(theta, sample)]
        visits, area = (np.vstack(parts) for parts in zip(*blocks, strict=True))
        price = price_column(theta, sample)[:, None]
        falls = price < 0
        bounded = np.where(falls, price, -1.0)
        none = np.zeros(1)
        at_zero = np.vstack(
            [self._block_totals(b, sample, none)[1] for b in row_blocks(theta, sample)]
        )
        # The antiderivative of max(q, 0) is max(q, 0)² / 2b, whatever the sign of b.
        slope = np.where(price == 0, 1.0, price)
        lost = np.where(price == 0, visits * fees, (area - at_zero) / (2 * slope))
        return Totals(visits=visits, left=np.where(falls, area / (-2 * bounded), np.inf), lost=lost)

    def _block_totals(
        self, theta: FloatArray, sample: Sample, fees: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Visits and people-weighted squared rates, (vectors, fees)."""
        base = index(theta, sample)
        price = price_column(theta, sample)[:, None]
        people = sample.people / sample.per
        visits, squares = [], []
        for fee in fees:
            rate = np.maximum(base + price * fee, 0)
            visits.append(rate @ people)
            squares.append(rate**2 @ people)
        return np.column_stack(visits), np.column_stack(squares)

    def elasticity(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """Elasticity of all predicted visits."""
        price = price_column(theta, sample)
        rate = index(theta, sample)
        spent = (rate > 0) @ (sample.people * sample.price)
        visits = np.maximum(rate, 0) @ sample.people
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(price * spent / visits, dtype=float)

    def choke_cost(self, theta: FloatArray, sample: Sample) -> FloatArray | None:
        """Cost at which the line of an average resident meets zero; infinite where it rises."""
        price = price_column(theta, sample)
        free = at_costs(theta, sample, np.zeros(1))[:, 0]
        bounded = np.where(price < 0, price, -1.0)
        return np.where(price < 0, free / -bounded, np.inf)

    def rate_curve(self, theta: FloatArray, sample: Sample, costs: FloatArray) -> FloatArray:
        """Visits per person and year at each cost, other regressors at their mean."""
        return np.maximum(at_costs(theta, sample, costs), 0) / sample.per


def at_costs(theta: FloatArray, sample: Sample, costs: FloatArray) -> FloatArray:
    """x'β at each cost, other regressors at their mean over people; (vectors, costs)."""
    regressors = np.tile(mean_regressors(sample), (len(costs), 1))
    regressors[:, sample.terms.index(PRICE)] = costs
    return np.asarray(theta[:, : len(sample.terms)] @ regressors.T, dtype=float)
