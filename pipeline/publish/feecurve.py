"""What any added fee would do, at a site's chosen model: for the charts and the page's slider.

Where demand is semi-logarithmic, visits(fee) = observed visits × exp(b × fee) with b the price
coefficient, and the surplus left is visits / −b. Visits, revenue, surplus left and surplus lost
all rise with b. So the ends of their intervals over the parameter draws are their values at the
draws of b that stand at those ranks, and a page that knows three coefficients can work out every
fee exactly. Other curves are worked out beforehand at many fees.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.demand.build import build_samples
from pipeline.demand.curves import SemiLogCurve
from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.rows import fitted_models
from pipeline.demand.sample import PRICE, Sample
from pipeline.study import Study
from pipeline.surplus.draws import parameter_draws
from pipeline.surplus.fees import fee_rows

Numbers = npt.NDArray[np.float64]
STEPS = 60
MOST_WORK = 2e9
FEWEST_STEPS = 40
MEASURES = ("visits", "revenue", "consumer_surplus", "surplus_lost")


@dataclass(frozen=True)
class FeeCurve:
    """Response of one site to an added fee.

    Attributes
    ----------
    table : like `fee_schedule`, at many fees, those of the schedule among them.
    visits : person-visits a year without an added fee.
    prices : price coefficient: the estimate, and the lower and upper end of its draws; None for
        a curve that is not semi-logarithmic.
    step : step of the slider, in currency; every fee of the schedule is a multiple of it where
        that leaves a step worth moving.
    """

    table: pd.DataFrame
    visits: float
    prices: tuple[float, float, float] | None
    step: float

    def page_data(self) -> dict[str, Any]:
        """What the page's script needs to work out any fee."""
        if self.prices is not None:
            return {"visits": self.visits, "prices": list(self.prices)}
        columns = [f"{m}{end}" for m in MEASURES for end in ("", "_ci_low", "_ci_high")]
        return {"fees": list(self.table["fee"]), **{c: list(self.table[c]) for c in columns}}


def fee_curves(
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    estimates: pd.DataFrame,
    fit: pd.DataFrame,
    fee_schedule: pd.DataFrame,
    *,
    study: Study,
) -> dict[str, FeeCurve]:
    """Fee responses by site; none for a site without a schedule of at least two fees.

    Parameters
    ----------
    zone_table, trip_table : the finished table, before small cells are hidden.
    """
    samples = {
        sample.site_id: sample
        for sample in build_samples(zone_table, trip_table, study.demand.covariates)
    }
    found = {}
    for (site_id, _), model in fitted_models(estimates, fit[fit["chosen"]]).items():
        schedule = fee_schedule[fee_schedule["site_id"] == site_id]
        fees = np.sort(schedule["fee"].to_numpy(dtype=np.float64))
        if len(fees) > 1:
            found[site_id] = _fee_curve(model, samples[site_id], schedule, study)
    return found


def _fee_curve(
    model: FittedModel, sample: Sample, schedule: pd.DataFrame, study: Study
) -> FeeCurve:
    fees = np.sort(schedule["fee"].to_numpy(dtype=np.float64))
    step, visits = slider_step(fees), sample.annual_visits
    draws = parameter_draws(model, draws=study.surplus.draws, seed=study.study.seed)
    grid = np.unique(np.concatenate([fees, np.linspace(0.0, fees[-1], STEPS + 1)]))
    if _is_semi_log(model.model):
        tails = [0.5 - study.surplus.confidence / 2, 0.5 + study.surplus.confidence / 2]
        slope = draws[:, model.terms.index(PRICE)]
        low, high = np.quantile(slope, tails, method="inverted_cdf")
        prices = (model.price_coefficient, float(low), float(high))
        return FeeCurve(_semi_log(visits, prices, grid), visits, prices, step)
    if len(grid) * len(draws) * sample.nobs > MOST_WORK:
        return FeeCurve(schedule.sort_values("fee").reset_index(drop=True), visits, None, step)
    settings = study.surplus.model_copy(update={"fees": tuple(float(fee) for fee in grid)})
    return FeeCurve(fee_rows(model, sample, draws, settings=settings), visits, None, step)


def _is_semi_log(name: str) -> bool:
    """Whether a family takes its totals from the semi-logarithmic curve as it stands."""
    owner = next(kind for kind in type(FAMILIES[name]).__mro__ if "totals" in vars(kind))
    return owner is SemiLogCurve


def _semi_log(visits: float, prices: tuple[float, float, float], fees: Numbers) -> pd.DataFrame:
    columns: dict[str, Numbers] = {"fee": fees}
    for end, price in zip(("", "_ci_low", "_ci_high"), prices, strict=True):
        at_fee = visits * np.exp(price * fees)
        lost = visits * fees if price == 0 else visits * np.expm1(price * fees) / price
        columns[f"visits{end}"] = at_fee
        columns[f"revenue{end}"] = at_fee * fees
        columns[f"consumer_surplus{end}"] = (
            at_fee / -price if price < 0 else np.full_like(fees, np.nan)
        )
        columns[f"surplus_lost{end}"] = lost
    return pd.DataFrame(columns)


def slider_step(fees: Numbers) -> float:
    """The largest round step that meets every fee and leaves at least forty steps."""
    top = float(fees[-1])
    power = math.floor(math.log10(top / FEWEST_STEPS))
    steps = [n * 10.0**p for p in range(power, power - 4, -1) for n in (5, 2.5, 1)]
    fine = [step for step in steps if step <= top / FEWEST_STEPS]
    meets = (step for step in fine if np.allclose(fees / step, np.rint(fees / step), atol=1e-6))
    return float(f"{next(meets, fine[-1]):.10g}")
