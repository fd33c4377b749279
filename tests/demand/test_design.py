"""Standardising, and what makes a fit impossible: named."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.demand.design import (
    caution_notes,
    collinear_terms,
    require_fittable,
    separated_terms,
    standardise,
)
from pipeline.demand.registry import FAMILIES
from pipeline.errors import DemandError
from tests.demand.worlds import bare_sample


def test_coefficients_come_back_in_the_units_of_the_table() -> None:
    """y = 2 + 3a − 5b exactly; the standardised fit gives 2, 3, −5 back."""
    design = np.column_stack([np.ones(4), [1.0, 2, 3, 5], [10_000.0, 70_000, 20_000, 10_000]])
    response = design @ [2.0, 3.0, -5.0]
    standard = standardise(design)
    np.testing.assert_allclose(standard.matrix[:, 1:].mean(axis=0), 0, atol=1e-12)
    np.testing.assert_allclose(standard.matrix[:, 1:].std(axis=0), 1)
    found = standard.back @ np.linalg.solve(
        standard.matrix.T @ standard.matrix, standard.matrix.T @ response
    )
    np.testing.assert_allclose(found, [2, 3, -5], rtol=1e-9)


COST = [1.0, 2.0, 3.0, 4.0, 5.0, 6.0]
PEOPLE = [100.0] * 6
COUNTS = [9.0, 7.0, 5.0, 3.0, 2.0, 0.0]


def test_a_covariate_that_never_varies_is_named() -> None:
    sample = bare_sample(COUNTS, COST, PEOPLE, flat=[7.0] * 6)
    with pytest.raises(DemandError, match="'flat' has the same value in every row"):
        require_fittable(sample)


def test_a_covariate_that_is_the_cost_in_other_money_is_named_with_it() -> None:
    sample = bare_sample(
        COUNTS, COST, PEOPLE, cents=[100 * c + 3 for c in COST], other=[1.0, 5, 2, 8, 1, 0]
    )
    assert collinear_terms(sample.design, sample.terms) == ("travel_cost", "cents")
    with pytest.raises(DemandError, match="'travel_cost', 'cents' are collinear"):
        FAMILIES["poisson"].fit(sample, errors="HC1")


def test_too_few_rows_and_no_visits_are_said() -> None:
    with pytest.raises(DemandError, match=r"2 usable row\(s\) for 2 coefficients"):
        require_fittable(bare_sample([1, 0], [1, 2], [5, 5]))
    with pytest.raises(DemandError, match="no visit in 6 usable rows"):
        require_fittable(bare_sample([0.0] * 6, COST, PEOPLE))


def test_a_covariate_that_only_marks_rows_without_visits_is_separation() -> None:
    """No visit comes from the two island zones: the island's coefficient has no end.

    ======  =  =  =  =  =  =
    island  0  0  0  0  1  1
    visits  9  7  5  3  0  0
    ======  =  =  =  =  =  =
    """
    sample = bare_sample([9, 7, 5, 3, 0, 0], COST, PEOPLE, island=[0.0, 0, 0, 0, 1, 1])
    assert separated_terms(sample) == ("island",)
    with pytest.raises(DemandError, match="separation: 'island'"):
        FAMILIES["poisson"].fit(sample, errors="HC1")
    with pytest.raises(DemandError, match="separation: 'island'"):
        FAMILIES["negative_binomial"].fit(sample, errors="HC1")


def test_one_visit_from_the_island_ends_the_separation() -> None:
    sample = bare_sample([9, 7, 5, 3, 0, 1], COST, PEOPLE, island=[0.0, 0, 0, 0, 1, 1])
    assert separated_terms(sample) == ()
    assert FAMILIES["poisson"].fit(sample, errors="HC1").converged


def test_all_visits_from_one_cost_is_separation_by_cost() -> None:
    sample = bare_sample([9, 8, 0, 0, 0, 0], [1, 1, 2, 3, 4, 5], PEOPLE)
    assert separated_terms(sample) == ("travel_cost",)


def test_visits_from_the_middle_only_are_not_separated() -> None:
    """A direction that is up on one side and down on the other bounds the likelihood."""
    sample = bare_sample([0, 9, 8, 0], [1, 2, 2, 3], [100.0] * 4)
    assert separated_terms(sample) == ()


def test_few_rows_and_near_twins_are_cautioned() -> None:
    twins = [1.1, 2.0, 3.1, 4.0, 5.1, 6.0]
    sample = bare_sample(COUNTS, COST, PEOPLE, substitute_cost=twins)
    notes = " ".join(caution_notes(sample, "HC3"))
    assert "Only 6 rows for 3 coefficients" in notes
    assert "travel_cost and substitute_cost move together (r = 1.00)" in notes
    assert "intervals with HC3 errors held 94 to 98" in notes
    assert "use HC3 errors" in caution_notes(sample, "model")[0]
    assert "Student's t allows" in caution_notes(sample, "model", student=True)[0]
