"""A maximum is verified; a search that merely stopped is not one."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.demand.maximum import maximise, verify
from pipeline.demand.sample import FloatArray


def test_a_hill_is_climbed_from_far_away() -> None:
    """−cosh(x − 3) − (y + 1)²: top at (3, −1), where Newton's plain step from 12 overshoots."""

    def hill(theta: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        x, y = theta[0] - 3, theta[1] + 1
        value = -np.cosh(x) - y**2
        return value, np.array([-np.sinh(x), -2 * y]), np.diag([-np.cosh(x), -2.0])

    top = maximise(hill, np.array([12.0, 40.0]))
    assert top.problem == ""
    np.testing.assert_allclose(top.theta, [3, -1], atol=1e-9)


def test_a_slope_without_end_is_not_a_maximum() -> None:
    """−exp(−x) rises for ever; Newton creeps along it and the Hessian fades."""

    def slope(theta: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        e = np.exp(-theta)
        return float(-e[0] - 1e6), np.array([e[0], 0.0]), np.diag([-e[0], 0.0])

    assert "not negative definite" in maximise(slope, np.zeros(2)).problem


@pytest.mark.parametrize(
    ("value", "gradient", "hessian", "words"),
    [
        (np.nan, [0.0, 0.0], [[-1.0, 0.0], [0.0, -1.0]], "log-likelihood is not finite"),
        (1.0, [np.nan, 0.0], [[-1.0, 0.0], [0.0, -1.0]], "gradient or the Hessian is not finite"),
        (1.0, [0.0, 0.0], [[-1.0, 0.0], [0.0, 1.0]], "not negative definite"),
        (1.0, [0.0, 0.0], [[-1.0, 1.0], [1.0, -1.0]], "not negative definite"),
        (1.0, [0.1, 0.0], [[-1.0, 0.0], [0.0, -1.0]], "the gradient is not zero"),
    ],
)
def test_what_is_wrong_is_said(
    value: float, gradient: list[float], hessian: list[list[float]], words: str
) -> None:
    assert words in verify(value, np.array(gradient), np.array(hessian))


def test_a_true_maximum_passes() -> None:
    assert verify(-10.0, np.array([1e-9, 0.0]), np.array([[-1.0, 0.5], [0.5, -1e6]])) == ""
