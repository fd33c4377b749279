"""Post-stratification: weights raked to known margins."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.errors import GeocodingError
from pipeline.origins.raking import rake, rake_weights
from tests.visit_world import make_origins, make_study


def raked(origins: pd.DataFrame, margins: dict[str, dict[str, float]], **visits: Any) -> Any:
    section = make_study(visits={"margins": margins, **visits}).visits
    return rake_weights(origins, section)


def test_one_margin_is_post_stratification() -> None:
    """3 young and 1 old answered; half the people are old: weights of 2/3 and 2."""
    origins = make_origins(["west"] * 4, trips=[5, 1, 1, 9]).assign(age=["young"] * 3 + ["old"])
    table = raked(origins, {"age": {"young": 2, "old": 2}}, kind="household")
    assert table["weight"].tolist() == pytest.approx([2 / 3] * 3 + [2])
    assert table["weight_before_raking"].tolist() == [1] * 4


def test_a_worked_table_of_deming_and_stephans_method() -> None:
    """Counts [[30, 10], [20, 40]], rows to 50 and 50, columns to 60 and 40.

    First round: rows × 1.25 and 50/60; then columns to 60 and 40; and so on. The limit keeps the
    odds ratio of the counts, 30 × 40 ÷ (10 × 20) = 6, which with the margins fixes the table:
    x (x − 10) = 6 (50 − x)(60 − x) for its first cell x.
    """
    counts = np.array([30.0, 10, 20, 40])
    factors = rake(
        counts,
        [np.array([0, 0, 1, 1]), np.array([0, 1, 0, 1])],
        [np.array([50.0, 50]), np.array([60.0, 40])],
    )
    assert factors is not None
    cells = counts * factors
    x = min(np.roots([5, -650, 18_000]))
    assert cells == pytest.approx([x, 50 - x, 60 - x, x - 10])


@given(st.lists(st.tuples(st.integers(0, 1), st.integers(0, 2), st.floats(0.2, 5)), max_size=30))
@settings(derandomize=True, max_examples=40, deadline=None)
def test_every_margin_is_met(rows: list[tuple[int, int, float]]) -> None:
    rows = [(i, j, 1.0) for i in range(2) for j in range(3)] + rows
    first, second, weights = (np.array(column) for column in zip(*rows, strict=True))
    goals = [np.array([40.0, 60]), np.array([20.0, 30, 50])]
    factors = rake(weights.astype(float), [first, second], goals)
    assert factors is not None
    for position, goal in zip((first, second), goals, strict=True):
        assert np.bincount(position, weights * factors) == pytest.approx(goal, rel=1e-8)


def test_shares_and_foreign_records() -> None:
    """The second column's shares are taken of the first's total; abroad keeps its weight."""
    origins = make_origins(
        ["west", "west", None], origin_status=["matched", "matched", "foreign"]
    ).assign(age=["young", "old", np.nan], day=["sunday", "monday", "sunday"])
    table = raked(
        origins, {"age": {"young": 30, "old": 10}, "day": {"sunday": 0.75, "monday": 0.25}}
    )
    assert table["weight"].tolist() == pytest.approx([30, 10, 1])


@pytest.mark.parametrize(
    ("margins", "message"),
    [
        ({"agee": {"young": 1.0}}, "'agee', which is no column .* nearest is 'age'"),
        ({"age": {"young": 1.0}}, "'r1' has 'old', of which no total is known"),
        ({"age": {"young": 1.0, "old": 1.0, "odd": 1.0}}, "no record is of the class 'odd'"),
        ({"day": {"monday": 1.0}}, "'r1' has no value in column 'day'"),
        (
            {"age": {"young": 1.0, "old": 3.0}, "copy": {"young": 2.0, "old": 2.0}},
            "no weights give all",
        ),
    ],
)
def test_margins_that_do_not_fit(margins: dict[str, dict[str, float]], message: str) -> None:
    origins = make_origins(["west", "west"]).assign(
        age=["young", "old"], copy=["young", "old"], day=["monday", np.nan]
    )
    with pytest.raises(GeocodingError, match=message):
        raked(origins, margins)
