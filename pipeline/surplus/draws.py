"""Parameter draws for simulated intervals (Krinsky and Robb, Review of Economics and Statistics
68, 1986): from the normal distribution that the estimates have in large samples.
"""

from __future__ import annotations

import zlib

import numpy as np

from pipeline.demand.family import FittedModel
from pipeline.demand.sample import CONST, PRICE, FloatArray


def parameter_draws(model: FittedModel, *, draws: int, seed: int) -> FloatArray:
    """Draws of a model's parameters; (draws, parameters).

    The same seed gives the same draws in any units and after a constant is added to a
    covariate: the price coefficient is drawn first and the constant last, so that a change of
    units multiplies the draws and touches nothing else. A parameter without a covariance of its
    own (a dispersion at its bound) stays at its estimate.
    """
    stream = zlib.crc32(f"{model.model}|{model.site_id}".encode())
    random = np.random.default_rng([seed, stream])
    root = covariance_root(model)
    normal = random.standard_normal((draws, root.shape[1]))
    return np.asarray(model.estimate + normal @ root.T, dtype=float)


def covariance_root(model: FittedModel) -> FloatArray:
    """A root of the covariance, (p, parameters with a covariance): root @ root.T is it.

    Its columns are the directions in which independent errors move the parameters: the price
    coefficient first, the constant last.
    """
    free = np.isfinite(np.diag(model.covariance))
    order = sorted(np.flatnonzero(free), key=lambda i: _rank(model.terms[i]))
    covariance = model.covariance[np.ix_(order, order)]
    scale = np.sqrt(np.diag(covariance))
    root = np.zeros((len(model.terms), len(order)))
    root[order] = _root(covariance / np.outer(scale, scale)) * scale[:, None]
    return root


def _rank(term: str) -> int:
    return {PRICE: 0, CONST: 2}.get(term, 1)


def _root(correlation: FloatArray) -> FloatArray:
    """Cholesky factor; a correlation that is singular to the last digit is nudged."""
    try:
        root = np.linalg.cholesky(correlation)
    except np.linalg.LinAlgError:
        root = np.linalg.cholesky(correlation + 1e-10 * np.eye(len(correlation)))
    return np.asarray(root, dtype=float)
