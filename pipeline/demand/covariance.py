"""Covariance of maximum-likelihood estimates: from the model, or robust to its variance.

``model``
    inverse of minus the Hessian.
``HC0`` … ``HC3``
    the sandwich of White (Econometrica 50, 1982), which holds when the variance is not the
    model's: plain; times n/(n − p); with each score over the root of one minus its row's
    leverage; over one minus its leverage. The last is the more careful in small samples.
``cluster``
    the sandwich over sums of scores within clusters (Liang and Zeger, Biometrika 73, 1986), times
    G/(G − 1) × (n − 1)/(n − p) for G clusters; holds when rows of a cluster move together.
"""

from __future__ import annotations

import numpy as np

from pipeline.demand.sample import FloatArray, IntArray


def covariance(
    hessian: FloatArray,
    scores: FloatArray,
    leverage: FloatArray,
    kind: str,
    clusters: IntArray | None = None,
) -> FloatArray:
    """Covariance of the estimates.

    Parameters
    ----------
    hessian : (p, p) of the log-likelihood at its maximum.
    scores : (n, p) gradient of each row, with its weight.
    leverage : (n,) each row's pull on its own prediction, 0 to 1.
    kind : 'model', 'HC0', 'HC1', 'HC2', 'HC3' or 'cluster'.
    clusters : (n,) cluster of each row, for 'cluster'.
    """
    bread = np.linalg.inv(-hessian)
    bread = (bread + bread.T) / 2
    if kind == "model":
        return np.asarray(bread, dtype=float)
    nobs, parameters = scores.shape
    if kind == "cluster" and clusters is not None:
        sums = cluster_sums(scores, clusters)
        groups = len(sums)
        factor = groups / (groups - 1) * (nobs - 1) / (nobs - parameters)
        return np.asarray(factor * bread @ (sums.T @ sums) @ bread, dtype=float)
    power = {"HC2": 0.5, "HC3": 1.0}.get(kind, 0.0)
    room = np.clip(1 - leverage, 1e-8, None)
    adjusted = scores / room[:, None] ** power
    factor = nobs / (nobs - parameters) if kind == "HC1" else 1.0
    return np.asarray(factor * bread @ (adjusted.T @ adjusted) @ bread, dtype=float)


def cluster_sums(scores: FloatArray, clusters: IntArray) -> FloatArray:
    """Sum of the scores of each cluster; (clusters, p)."""
    _, place = np.unique(clusters, return_inverse=True)
    sums = np.zeros((place.max() + 1, scores.shape[1]))
    np.add.at(sums, place, scores)
    return sums


def leverages(design: FloatArray, information: FloatArray) -> FloatArray:
    """Diagonal of the hat matrix of a regression with the given weight per row."""
    root = design * np.sqrt(information)[:, None]
    orthogonal, _ = np.linalg.qr(root)
    return np.asarray((orthogonal**2).sum(axis=1), dtype=float)
