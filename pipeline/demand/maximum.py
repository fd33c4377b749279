"""Maximum of a log-likelihood, verified: nobody's word is taken for it.

A maximum is accepted when the log-likelihood is finite, the Hessian is negative definite and
well conditioned, and another Newton step would gain nothing. The gain, ½ g'(−H)⁻¹g, does not
depend on the units of the parameters.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import linalg

from pipeline.demand.sample import FloatArray

Likelihood = Callable[[FloatArray], tuple[float, FloatArray, FloatArray]]

MAX_STEPS = 200
CLOSE = 1e-6
VERIFIED_GAIN = 1e-9
WORST_CONDITION = 1e13


@dataclass(frozen=True)
class Maximum:
    """Where the search ended, and what is wrong with it (empty: a verified maximum)."""

    theta: FloatArray
    value: float
    gradient: FloatArray
    hessian: FloatArray
    problem: str


def maximise(likelihood: Likelihood, start: FloatArray) -> Maximum:
    """Climb by damped Newton steps, then verify.

    Parameters
    ----------
    likelihood : gives value, gradient (p,) and Hessian (p, p) at a point.
    start : (p,) a point where the value is finite.
    """
    theta = start
    value, gradient, hessian = likelihood(theta)
    for _ in range(MAX_STEPS):
        step = _ascent_step(gradient, hessian)
        gain = float(gradient @ step) / 2
        if not np.isfinite(gain) or gain < VERIFIED_GAIN * 1e-6:
            break
        candidate = _line_search(likelihood, theta, value, step, gain)
        if candidate is None:
            break
        theta, (value, gradient, hessian) = candidate
    return Maximum(theta, value, gradient, hessian, verify(value, gradient, hessian))


def verify(value: float, gradient: FloatArray, hessian: FloatArray) -> str:
    """What is wrong with a supposed maximum; empty where nothing is."""
    if not np.isfinite(value):
        return "the log-likelihood is not finite"
    if not (np.isfinite(gradient).all() and np.isfinite(hessian).all()):
        return "the gradient or the Hessian is not finite"
    curvature = -np.diag(hessian)
    if (curvature <= 0).any():
        return "the Hessian is not negative definite"
    scale = np.sqrt(curvature)
    scaled = -hessian / np.outer(scale, scale)
    eigenvalues = np.linalg.eigvalsh(scaled)
    if eigenvalues[0] <= eigenvalues[-1] / WORST_CONDITION:
        return "the Hessian is not negative definite"
    standardised = gradient / scale
    gain = float(standardised @ np.linalg.solve(scaled, standardised)) / 2
    # A log-likelihood in the millions is known to fewer decimals.
    if gain > VERIFIED_GAIN * max(1.0, abs(value) * 1e-4):
        return f"the gradient is not zero (a further step would gain {gain:.2g})"
    return ""


def _ascent_step(gradient: FloatArray, hessian: FloatArray) -> FloatArray:
    """Newton's step; where the Hessian is not negative definite, the nearest that climbs."""
    if not (np.isfinite(gradient).all() and np.isfinite(hessian).all()):
        return np.full_like(gradient, np.nan)
    try:
        factor = linalg.cho_factor(-hessian)
        return np.asarray(linalg.cho_solve(factor, gradient), dtype=float)
    except linalg.LinAlgError:
        values, vectors = np.linalg.eigh(-hessian)
        floor = max(1e-8 * float(np.abs(values).max()), 1e-12)
        bent = np.maximum(np.abs(values), floor)
        return np.asarray(vectors @ ((vectors.T @ gradient) / bent), dtype=float)


def _line_search(
    likelihood: Likelihood, theta: FloatArray, value: float, step: FloatArray, gain: float
) -> tuple[FloatArray, tuple[float, FloatArray, FloatArray]] | None:
    """The longest halved step that climbs; close to the top the plain Newton step."""
    size = 1.0
    for _ in range(60):
        candidate = theta + size * step
        found = likelihood(candidate)
        climbs = found[0] > value + 1e-4 * size * gain
        if np.isfinite(found[0]) and (climbs or gain < CLOSE):
            return candidate, found
        size /= 2
    return None
