"""Families whose rows depend on the parameters through a few indices; see ``local``."""

from __future__ import annotations

from abc import abstractmethod

import numpy as np

from pipeline.demand.covariance import leverages
from pipeline.demand.likelihood import LikelihoodFamily, Rows
from pipeline.demand.local import Local
from pipeline.demand.sample import FloatArray

#: Log of the dispersion beyond which a maximum is none: the likelihood is flat there.
_FAR = np.log(1e5)


class IndexedFamily(LikelihoodFamily):
    """A family given by its rows' log-likelihood in η, ζ (part about zeros) and log α.

    Parameters stand in the order β, γ (where `has_zero_part`), log α (where `extra_terms`).
    """

    has_zero_part = False

    @abstractmethod
    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """Log-likelihood of the rows in η, (ζ), (log α), with derivatives in that order."""

    def at(self, theta: FloatArray, rows: Rows) -> Local:
        """`local` at a parameter vector."""
        size, zeros = rows.design.shape[1], rows.zero.shape[1]
        indices: tuple[FloatArray, ...] = (rows.design @ theta[:size] + rows.offset,)
        if self.has_zero_part:
            indices = (*indices, rows.zero @ theta[size : size + zeros])
        return self.local(indices, float(theta[-1]) if self.extra_terms else np.nan, rows)

    def _matrices(self, rows: Rows) -> list[FloatArray]:
        found = [rows.design]
        if self.has_zero_part:
            found.append(rows.zero)
        if self.extra_terms:
            found.append(np.ones((len(rows.counts), 1)))
        return found

    def log_likelihood(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Log-likelihood of each row."""
        return self.at(theta, rows).value

    def scores(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Gradient of each row."""
        return self._scores(self.at(theta, rows), rows)

    def hessian(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Hessian by the chain rule."""
        return self._hessian(self.at(theta, rows), rows)

    def evaluate(self, theta: FloatArray, rows: Rows) -> tuple[float, FloatArray, FloatArray]:
        """Value, gradient and Hessian from one pass over the rows."""
        local = self.at(theta, rows)
        gradient = np.concatenate(
            [m.T @ (rows.weight * local.first[j]) for j, m in enumerate(self._matrices(rows))]
        )
        return float(rows.weight @ local.value), gradient, self._hessian(local, rows)

    def _scores(self, local: Local, rows: Rows) -> FloatArray:
        parts = [local.first[j][:, None] * m for j, m in enumerate(self._matrices(rows))]
        return np.concatenate(parts, axis=1)

    def _hessian(self, local: Local, rows: Rows) -> FloatArray:
        matrices = self._matrices(rows)
        return np.block(
            [
                [
                    (one.T * (rows.weight * local.second[i, j])) @ other
                    for j, other in enumerate(matrices)
                ]
                for i, one in enumerate(matrices)
            ]
        )

    def information(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Observed information about η, never below zero."""
        return np.asarray(np.maximum(-self.at(theta, rows).second[0, 0], 0), dtype=float)

    def leverage(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Pull on the count, and on the part about zeros where there is one."""
        second = self.at(theta, rows).second
        found = np.zeros(len(rows.counts))
        for j, matrix in enumerate(self._matrices(rows)[: 2 if self.has_zero_part else 1]):
            found += leverages(matrix, rows.weight * np.maximum(-second[j, j], 0))
        return found

    def natural(self, theta: FloatArray, size: int) -> tuple[FloatArray, FloatArray]:
        """The dispersion, and its derivative in its log, which is itself."""
        dispersion = np.exp(theta[size:])
        return dispersion, dispersion

    def runs_off(self, theta: FloatArray, rows: Rows) -> str:
        """A dispersion without end."""
        del rows
        if self.extra_terms and theta[-1] > _FAR:
            return f"{self.extra_terms[0]} grows without end; the likelihood has no maximum"
        return ""


def with_dispersion(
    family: LikelihoodFamily, simple: FloatArray, least: float, dispersion: float, rows: Rows
) -> FloatArray:
    """A start: the simpler model's maximum, its dispersion halved until the point beats `least`."""
    start = np.append(simple, np.log(max(dispersion, 1e-8)))
    for _ in range(40):
        if rows.weight @ family.log_likelihood(start, rows) > least:
            break
        start[-1] -= np.log(2)
    return start
