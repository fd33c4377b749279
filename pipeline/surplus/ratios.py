"""Fieller's interval of a ratio of two normal estimates.

Fieller, Journal of the Royal Statistical Society B 16, 1954: the ratios that a t test at the
estimates does not reject. For −1/b it is −1/(b ± z·se), and has no upper end where b + z·se ≥ 0.
"""

from __future__ import annotations

import numpy as np

from pipeline.demand.sample import FloatArray


def fieller(
    above: float, below: float, covariance: FloatArray, quantile: float
) -> tuple[float, float]:
    """Ends of the interval of above / below; infinite where it has no end.

    Parameters
    ----------
    covariance : (2, 2) of the numerator and the denominator.
    quantile : of the normal or t distribution, two-sided.

    Returns
    -------
    (low, high) that hold the ratio. Where the denominator may be zero the set is not bounded: an
    end is infinite, on the side where the set has none; where all ratios are possible, both.
    """
    z2 = quantile**2
    a = below**2 - z2 * covariance[1, 1]
    b = -2 * (above * below - z2 * covariance[0, 1])
    c = above**2 - z2 * covariance[0, 0]
    root = b**2 - 4 * a * c
    if a > 0:
        half = np.sqrt(max(root, 0.0))
        return float((-b - half) / (2 * a)), float((-b + half) / (2 * a))
    if root <= 0 or a == 0:
        return -np.inf, np.inf
    half = np.sqrt(root)
    # The set is what lies outside the two roots; the ratio is on one side of it.
    first, second = sorted(((-b - half) / (2 * a), (-b + half) / (2 * a)))
    return (float(second), np.inf) if above / below >= second else (-np.inf, float(first))
