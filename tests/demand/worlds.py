"""Small invented worlds: zones on a line, visits drawn from a demand that is stated."""

from __future__ import annotations

from collections.abc import Hashable
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.demand.build import build_samples
from pipeline.demand.sample import FloatArray, Sample
from pipeline.study import Study, study_from


def a_study(**sections: dict[str, Any]) -> Study:
    """A study with the given sections; what it must have besides is made up."""
    raw: dict[str, Any] = {
        "study": {
            "name": "line",
            "title": "Zones on a line (invented)",
            "currency": "EUR",
            "price_year": 2024,
            "folder": "line",
        },
        "costs": {"vehicle_cost_per_km": 0.2, "wage_fraction": 0.33},
    }
    return study_from(raw | sections, base=Path(), source="line.toml")


def zones(
    *,
    seed: int = 1,
    count: int = 80,
    price: float = -0.06,
    shape: float | None = 2.0,
    expansion: float = 1.0,
    site_id: str = "fen",
) -> pd.DataFrame:
    """A zone_table: rate = exp(-4.5 + price × cost + 0.2 × (income − 40,000) / 10,000).

    `shape` is 1/alpha of a negative binomial; None draws a Poisson.
    """
    random = np.random.default_rng(seed)
    cost = random.uniform(2, 60, count)
    population = random.lognormal(7.5, 0.8, count).round()
    income = random.normal(40_000, 10_000, count).clip(10_000)
    mean = population * np.exp(-4.5 + price * cost + 0.2 * (income - 40_000) / 10_000)
    drawn = (
        random.poisson(mean)
        if shape is None
        else random.negative_binomial(shape, shape / (shape + mean))
    )
    return pd.DataFrame(
        {
            "zone_id": [f"{i:04d}" for i in range(count)],
            "site_id": site_id,
            "population": population,
            "household_income": income,
            "sampled_visits": drawn.astype(float),
            "visits": drawn * expansion,
            "travel_cost": cost,
            "in_market": True,
        }
    )


def a_sample(table: pd.DataFrame, *covariates: str) -> Sample:
    """The sample of the only site of a zone_table."""
    (sample,) = build_samples(table, None, covariates)
    return sample


def bare_sample(
    counts: npt.ArrayLike, cost: npt.ArrayLike, people: npt.ArrayLike, **covariates: npt.ArrayLike
) -> Sample:
    """A sample straight from numbers, without expansion."""
    counted, inhabitants = (np.array(values, dtype=float) for values in (counts, people))
    n = len(counted)
    columns: list[FloatArray] = [np.ones(n), np.array(cost, dtype=float)]
    columns += [np.array(values, dtype=float) for values in covariates.values()]
    return Sample(
        site_id="fen",
        zone_ids=tuple(f"{i:04d}" for i in range(n)),
        terms=("const", "travel_cost", *covariates),
        design=np.column_stack(columns),
        counts=counted,
        exposure=inhabitants,
        weight=np.ones(n),
        people=inhabitants,
        visits=counted,
        per=1000.0,
        notes=(),
    )


def number(frame: pd.DataFrame, row: Hashable, column: str) -> float:
    """One figure of a table, by the label of its row."""
    return float(frame[column].astype(float).to_dict()[row])
