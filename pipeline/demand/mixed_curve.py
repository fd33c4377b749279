"""Demand curve of a family with a part about zeros: expected visits of a row are not exp(x'β).

Where the travel cost is in the part about zeros the area has no closed form and is integrated
numerically, by Gauss–Legendre between fees and, beyond the last fee, in u = exp(−κ fee), which
turns an infinite tail into the unit interval. Only the participation part of a hurdle has one:
the area under a logistic curve, log(1 + exp ζ) / |g| (Small and Rosen, Econometrica 49, 1981).
"""

from __future__ import annotations

from abc import abstractmethod
from dataclasses import replace
from itertools import pairwise

import numpy as np

from pipeline.demand.curves import (
    SemiLogCurve,
    exponential_totals,
    index,
    price_column,
    row_blocks,
)
from pipeline.demand.family import Totals, mean_regressors
from pipeline.demand.sample import PRICE, FloatArray, Sample

_TAIL = 48
_PANEL = 8
_STEP = 1e-5


class MixedCurve(SemiLogCurve):
    """Visits and areas of a family that says its `rates`."""

    surplus_words = "Area under the expected visits beyond today's costs ÷ expected visits."
    elasticity_words = "Of all predicted visits, every cost rising by one per cent."

    @abstractmethod
    def zero_columns(self, sample: Sample) -> tuple[int, ...]:
        """Columns of the design in the part about zeros."""

    def is_minus_one_over_b(self, sample: Sample) -> bool:
        """Where the travel cost is not in the part about zeros."""
        return sample.terms.index(PRICE) not in self.zero_columns(sample)

    @abstractmethod
    def rates(self, theta: FloatArray, sample: Sample, fee: FloatArray) -> FloatArray:
        """Visits per person and year, (vectors, rows); `fee` broadcasts to that."""

    @abstractmethod
    def decay(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """Rate κ > 0 at which visits fall at high fees, per vector."""

    def zero_part(self, theta: FloatArray, sample: Sample) -> tuple[FloatArray, FloatArray]:
        """ζ of each vector and row, and its price coefficient per vector."""
        columns = self.zero_columns(sample)
        size = len(sample.terms)
        gamma = theta[:, size : size + len(columns)]
        price = np.zeros(len(theta))
        place = sample.terms.index(PRICE)
        if place in columns:
            price = gamma[:, columns.index(place)]
        return gamma @ sample.design[:, list(columns)].T, price

    def predict(
        self, theta: FloatArray, sample: Sample, fee: float = 0.0
    ) -> tuple[FloatArray, FloatArray]:
        """Visits per year of each row at an added fee, and the area beyond it."""
        vector = theta[None, :]
        visits = self.rates(vector, sample, np.array([[fee]]))[0] * sample.people
        if not self.falls(vector, sample)[0]:
            return visits, np.full_like(visits, np.inf)
        if self.is_minus_one_over_b(sample):
            return visits, visits / -float(price_column(theta, sample))
        kappa = float(self.decay(vector, sample)[0])
        area = np.zeros_like(visits)
        for u, weight in _unit_nodes(_TAIL):
            rate = self.rates(vector, sample, np.array([[fee - np.log(u) / kappa]]))[0]
            area += weight * rate / (u * kappa)
        return visits, area * sample.people

    def totals(self, theta: FloatArray, sample: Sample, fees: FloatArray) -> Totals:
        """The curve of all rows together; `theta` is (vectors, parameters)."""
        if self.is_minus_one_over_b(sample):
            return self._closed(theta, sample, fees)
        parts = [self._totals(block, sample, fees) for block in row_blocks(theta, sample)]
        visits, lost, tail = (np.concatenate(found) for found in zip(*parts, strict=True))
        whole = tail[:, None] + lost[:, [int(np.argmax(fees))]]
        left = np.where(self.falls(theta, sample)[:, None], whole - lost, np.inf)
        return Totals(visits=visits, left=left, lost=lost)

    def _closed(self, theta: FloatArray, sample: Sample, fees: FloatArray) -> Totals:
        """Where a fee multiplies all visits by exp(b × fee)."""
        blocks = row_blocks(theta, sample)
        none = np.zeros((1, 1))
        base = np.concatenate([self.rates(b, sample, none) @ sample.people for b in blocks])
        return exponential_totals(base[:, None], price_column(theta, sample)[:, None], fees)

    def _totals(
        self, theta: FloatArray, sample: Sample, fees: FloatArray
    ) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Visits and areas lost at each fee, and the area beyond the highest."""

        def visits(fee: FloatArray) -> FloatArray:
            with np.errstate(over="ignore", invalid="ignore"):
                return np.asarray(self.rates(theta, sample, fee) @ sample.people, dtype=float)

        at_fees = np.column_stack([visits(np.array([[fee]])) for fee in fees])
        edges = np.unique(np.append(fees, 0.0))
        upto = [np.zeros(len(theta))]
        for low, high in pairwise(edges):
            panel = [
                weight * visits(np.array([[low + u * (high - low)]]))
                for u, weight in _unit_nodes(_PANEL)
            ]
            upto.append(upto[-1] + (high - low) * np.sum(panel, axis=0))
        lost = np.column_stack(upto)[:, np.searchsorted(edges, fees)]
        kappa = np.where(self.falls(theta, sample), self.decay(theta, sample), 1.0)
        tail = np.zeros(len(theta))
        for u, weight in _unit_nodes(_TAIL):
            fee = edges[-1] - np.log(u) / kappa[:, None]
            tail += weight * visits(fee) / (u * kappa)
        return at_fees, lost, tail

    def elasticity(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """Elasticity of all predicted visits, by a central difference."""
        parts = []
        for block in row_blocks(theta, sample):
            up, down = (
                self.rates(block, sample, step * sample.price[None, :]) @ sample.people
                for step in (_STEP, -_STEP)
            )
            parts.append((up - down) / (_STEP * (up + down)))
        return np.concatenate(parts)

    def rate_curve(self, theta: FloatArray, sample: Sample, costs: FloatArray) -> FloatArray:
        """Visits per person and year at each cost, other regressors at their mean."""
        design = np.tile(mean_regressors(sample), (len(costs), 1))
        design[:, sample.terms.index(PRICE)] = costs
        return self.rates(theta, replace(sample, design=design), np.zeros((1, 1)))

    def count_index(self, theta: FloatArray, sample: Sample, fee: FloatArray) -> FloatArray:
        """x'β at an added fee, (vectors, rows)."""
        return index(theta, sample) + price_column(theta, sample)[:, None] * fee


def _unit_nodes(number: int) -> list[tuple[float, float]]:
    """Gauss–Legendre nodes and weights on (0, 1)."""
    nodes, weights = np.polynomial.legendre.leggauss(number)
    return [(float((x + 1) / 2), float(w / 2)) for x, w in zip(nodes, weights, strict=True)]
