"""The regressors: standardised for the fit, and checked for what makes a fit impossible.

A model is fitted on regressors with mean 0 and standard deviation 1, so that costs in cents,
pounds or thousands lead to the same maximum by the same path; estimates and covariances are
then transformed back to the units of the table.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.optimize import linprog

from pipeline.demand.sample import CONST, PRICE, FloatArray, Sample
from pipeline.errors import DemandError

_SINGULAR = 1e-8
_LOADING = 1e-4
FEW_ROWS = 40


@dataclass(frozen=True)
class Standardised:
    """A design matrix on a common scale.

    Attributes
    ----------
    matrix : rows × terms; the constant stays 1.
    back : terms × terms; ``back @ coefficients`` are the coefficients in the table's units.
    """

    matrix: FloatArray
    back: FloatArray

    def full_back(self, others: int) -> FloatArray:
        """`back`, with further parameters that are not scaled standing last."""
        size = len(self.back) + others
        full = np.eye(size)
        full[: len(self.back), : len(self.back)] = self.back
        return full


def standardise(design: FloatArray) -> Standardised:
    """Give every column but the first (the constant) mean 0 and standard deviation 1."""
    centre = design[:, 1:].mean(axis=0)
    spread = design[:, 1:].std(axis=0)
    matrix = design.copy()
    matrix[:, 1:] = (design[:, 1:] - centre) / spread
    back = np.diag(np.concatenate([[1.0], 1.0 / spread]))
    back[0, 1:] = -centre / spread
    return Standardised(matrix=matrix, back=back)


def require_fittable(sample: Sample, rows: int | None = None) -> None:
    """Say why no model can be fitted to the sample, if none can.

    Parameters
    ----------
    rows : rows that the model can use, where it is not all of them.

    Raises
    ------
    DemandError
        Too few rows, no visits, or regressors that cannot be told apart.
    """
    nobs = sample.nobs if rows is None else rows
    needed = len(sample.terms) + 1
    if nobs < needed:
        raise DemandError(
            f"site {sample.site_id!r}: {nobs} usable row(s) for {len(sample.terms)} coefficients; "
            f"at least {needed} are needed. Widen the market or drop covariates."
        )
    if sample.counts.sum() <= 0:
        raise DemandError(
            f"site {sample.site_id!r}: no visit in {nobs} usable rows; there is no demand to fit. "
            "Check site_id in the visit records and the market's extent."
        )
    collinear = collinear_terms(sample.design, sample.terms)
    if collinear:
        raise DemandError(f"site {sample.site_id!r}: {_collinear_words(collinear)}")


def collinear_terms(design: FloatArray, terms: tuple[str, ...]) -> tuple[str, ...]:
    """Terms that cannot be told apart: one that never varies, or a set that adds up to another."""
    spread = np.ptp(design[:, 1:], axis=0)
    size = np.abs(design[:, 1:]).max(axis=0)
    constant = [t for t, s, m in zip(terms[1:], spread, size, strict=True) if s <= 1e-12 * m]
    if constant:
        return (constant[0],)
    _, singular, right = np.linalg.svd(standardise(design).matrix, full_matrices=False)
    if singular[-1] > _SINGULAR * singular[0]:
        return ()
    return tuple(t for t, v in zip(terms, right[-1], strict=True) if abs(v) > _LOADING)


def _collinear_words(terms: tuple[str, ...]) -> str:
    if terms == (PRICE,):
        return (
            f"{PRICE!r} is the same in every row, so there is no demand curve to see; "
            "look at the costs, or widen the market."
        )
    if len(terms) == 1:
        return (
            f"{terms[0]!r} has the same value in every row, so it explains nothing; "
            "drop it from demand.covariates."
        )
    return (
        f"{', '.join(map(repr, terms))} are collinear (each is a sum of multiples of the others), "
        "so their effects cannot be told apart; drop one of them from demand.covariates."
    )


def separated_terms(sample: Sample) -> tuple[str, ...]:
    """Terms along which a count model has no maximum, because only rows without visits differ.

    The likelihood of a log-linear mean has no maximum when a combination of regressors is zero
    in every row with visits and of one sign in the rows without (Santos Silva and Tenreyro,
    Economics Letters 107, 2010). Found exactly, by a linear programme.
    """
    visited = sample.counts > 0
    matrix = standardise(sample.design).matrix
    positive, empty = matrix[visited], matrix[~visited]
    if len(empty) == 0 or np.linalg.matrix_rank(positive, tol=_SINGULAR * len(matrix)) == len(
        sample.terms
    ):
        return ()
    solution = linprog(
        -empty.sum(axis=0),
        A_ub=np.vstack([-empty, empty]),
        b_ub=np.concatenate([np.zeros(len(empty)), np.ones(len(empty))]),
        A_eq=positive,
        b_eq=np.zeros(len(positive)),
        bounds=(None, None),
    )
    direction = np.zeros(len(sample.terms)) if solution.x is None else solution.x
    if empty.sum(axis=0) @ direction < _LOADING:
        return ()
    return tuple(
        term
        for term, value in zip(sample.terms, direction, strict=True)
        if abs(value) > _LOADING and term != CONST
    )


def logit_separated_terms(
    design: FloatArray, some: npt.NDArray[np.bool_], terms: tuple[str, ...]
) -> tuple[str, ...]:
    """Terms that tell rows with and without visits apart without error, so a logit has no maximum.

    There is a combination of regressors that is never negative in rows with visits and never
    positive in the others (Albert and Anderson, Biometrika 71, 1984). By a linear programme.
    """
    matrix = standardise(design).matrix if design.shape[1] > 1 else design
    signed = np.where(some[:, None], matrix, -matrix)
    solution = linprog(
        -signed.sum(axis=0),
        A_ub=-signed,
        b_ub=np.zeros(len(signed)),
        bounds=(-1, 1),
    )
    direction = np.zeros(len(terms)) if solution.x is None else solution.x
    if signed.sum(axis=0) @ direction < _LOADING:
        return ()
    found = tuple(
        term
        for term, value in zip(terms, direction, strict=True)
        if abs(value) > _LOADING and term != CONST
    )
    return found or terms


def require_overlap(sample: Sample) -> None:
    """Stop a count model that has no maximum.

    Raises
    ------
    DemandError
        Rows with visits do not vary along a regressor: separation, with its terms named.
    """
    separated = separated_terms(sample)
    if separated:
        raise DemandError(
            f"site {sample.site_id!r}: separation: {', '.join(map(repr, separated))} sets apart "
            "rows that have no visit at all, so its coefficient runs to infinity; "
            "drop it, merge its categories, or leave those rows out of the market."
        )


def is_small(sample: Sample) -> bool:
    """Whether there are too few rows to rely on intervals made for large samples."""
    return sample.nobs < max(FEW_ROWS, 10 * len(sample.terms))


#: Found by simulation (tests/validation/test_small_worlds.py): zones drawn from an NB2.
_FEW_ROWS = {
    "HC3": (
        "a few of them decide. In simulated worlds of 15 to 30 zones 95 % intervals with HC3 "
        "errors held 94 to 98 times in 100."
    ),
    "student": "a few of them decide; Student's t allows for the few where the errors are even.",
    "model": (
        "intervals are too narrow in samples this small (in simulated worlds of 15 to 20 zones "
        "95 % intervals held 81 to 92 times in 100); use HC3 errors."
    ),
}


def caution_notes(sample: Sample, errors: str, *, student: bool = False) -> tuple[str, ...]:
    """What a reader should know about the regressors: few rows, strong correlation.

    Parameters
    ----------
    errors : kind of errors, which decides whether intervals hold in small samples.
    student : whether intervals use Student's t on a variance that was estimated.
    """
    notes = []
    if is_small(sample):
        kind = "HC3" if errors == "HC3" else "student" if student else "model"
        notes.append(
            f"Only {sample.nobs} rows for {len(sample.terms)} coefficients: {_FEW_ROWS[kind]}"
        )
    if len(sample.terms) > 2:
        correlation = np.atleast_2d(np.corrcoef(sample.design[:, 1:], rowvar=False))[0, 1:]
        worst = int(np.argmax(np.abs(correlation)))
        if abs(correlation[worst]) > 0.9:
            notes.append(
                f"travel_cost and {sample.terms[2 + worst]} move together "
                f"(r = {correlation[worst]:.2f}): the price coefficient is poorly determined."
            )
    return tuple(notes)
