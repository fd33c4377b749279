"""The fee response of the page against the surplus stage's schedule."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pandas as pd
import pytest

from pipeline.publish.feecurve import MEASURES, fee_curves, slider_step
from pipeline.surplus import surplus
from tests.publish.conftest import SITE, make_estimates, make_fit, make_study, make_tables

FEES = [0.0, 2.5, 7.5, 20.0]


def linear() -> dict[str, Any]:
    """A straight line, rate = 120 − 8 × cost per 1,000, chosen at the fen."""
    covariance = np.array([[9.0, -0.6], [-0.6, 0.09]])
    estimates = pd.DataFrame(
        {
            "model": "linear",
            "site_id": SITE,
            "term": ["const", "travel_cost"],
            "estimate": [120.0, -8.0],
            "std_error": [3.0, 0.3],
            "ci_low": [114.0, -8.6],
            "ci_high": [126.0, -7.4],
            "p_value": 0.0,
            "covariance": [json.dumps(row.tolist()) for row in covariance],
        }
    )
    fit = make_fit().iloc[:1].assign(model="linear", chosen=True, overdispersion_p=np.nan)
    return {"estimates": estimates, "fit": fit}


@pytest.mark.parametrize("family", ["negative_binomial", "linear"])
def test_curve_equals_the_schedule_at_its_fees(family: str) -> None:
    study, table = make_study(surplus={"fees": FEES}), make_tables()["zone_table"]
    known = {"estimates": make_estimates(), "fit": make_fit()}
    if family == "linear":
        known = linear()
    _, schedule, _ = surplus(known["estimates"], known["fit"], table, None, study=study)
    curve = fee_curves(table, None, **known, fee_schedule=schedule, study=study)[SITE]
    assert (curve.prices is None) == (family == "linear")
    at_fees = curve.table[curve.table["fee"].isin(FEES)].reset_index(drop=True)
    columns = [f"{m}{end}" for m in MEASURES for end in ("", "_ci_low", "_ci_high")]
    expected = schedule[columns].to_numpy(dtype=float)
    np.testing.assert_allclose(at_fees[columns].to_numpy(), expected, atol=0.001, rtol=0)
    assert len(curve.table) > 50


@pytest.mark.parametrize(
    ("fees", "step"),
    [
        ([0.0, 1.0, 2.0, 7.5, 30.0], 0.5),
        ([0.0, 500.0, 10_000.0], 250.0),
        ([0.0, 0.99, 4.99], 0.01),
        ([0.0, 20.0], 0.5),
    ],
)
def test_slider_meets_every_fee(fees: list[float], step: float) -> None:
    assert slider_step(np.array(fees)) == step
