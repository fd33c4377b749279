"""What a demand curve is worth, as functions of its parameters.

One convention for every model: the observed (expanded) visits are what happened, the model says
what a visit is worth. So ``annual_surplus`` is observed visits × surplus per trip, and the area
under the predicted curve stands beside it as ``annual_surplus_predicted``. For a Poisson with a
constant the two are equal, since its predicted visits add up to the observed ones.

Where the literature differs both are given: for a straight line the triangle over observed trips
beside that over predicted ones; for a hurdle −1/b of its count part beside the area under its
expected visits; the trapezoid rule over the fee schedule beside the integral.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.demand.curves import LinearCurve, SemiLogCurve, price_column
from pipeline.demand.family import Family
from pipeline.demand.mixed_curve import MixedCurve
from pipeline.demand.sample import FloatArray, Sample
from pipeline.surplus.welfare import exact_totals, has_closed_form

PER_TRIP = "surplus_per_trip"
PER_TRIP_OBSERVED = "surplus_per_trip_observed"
PER_TRIP_COUNT = "surplus_per_trip_count_part"
ANNUAL = "annual_surplus"
ANNUAL_PREDICTED = "annual_surplus_predicted"
ANNUAL_TRAPEZOID = "annual_surplus_trapezoid"
ACCESS = "access_value"
PER_PERSON = "surplus_per_person_per_year"
CV_TRIP = "compensating_variation_per_trip"
EV_TRIP = "equivalent_variation_per_trip"
CV_ANNUAL = "annual_compensating_variation"
EV_ANNUAL = "annual_equivalent_variation"
INCOME_ELASTICITY = "income_elasticity"
ELASTICITY = "price_elasticity"
VISITS_OBSERVED = "annual_visits_observed"
VISITS_PREDICTED = "annual_visits_predicted"
CHOKE = "choke_cost"

#: Measures that have no value where visits do not fall with cost.
AREAS = (
    PER_TRIP,
    PER_TRIP_OBSERVED,
    PER_TRIP_COUNT,
    ANNUAL,
    ANNUAL_PREDICTED,
    ANNUAL_TRAPEZOID,
    ACCESS,
    PER_PERSON,
    CV_TRIP,
    EV_TRIP,
    CV_ANNUAL,
    EV_ANNUAL,
    CHOKE,
)
#: Measures that need an expenditure function.
EXACT = (CV_TRIP, EV_TRIP, CV_ANNUAL, EV_ANNUAL)
#: Measures that grow with the observed visits.
BY_VISITS = (ANNUAL, ANNUAL_TRAPEZOID, ACCESS, PER_PERSON, CV_ANNUAL, EV_ANNUAL, VISITS_OBSERVED)


@dataclass(frozen=True)
class Valuation:
    """What is valued, and how.

    Attributes
    ----------
    fees : fees of the trapezoid rule, from zero upwards.
    income : covariate that is income, where it is in the regression; else None.
    income_unit : money that one unit of it stands for.
    """

    family: Family
    sample: Sample
    fees: FloatArray
    income: str | None
    income_unit: float = 1.0

    @property
    def has_closed_form(self) -> bool:
        """Whether exact welfare can be given."""
        return self.income is not None and has_closed_form(self.family, self.sample, self.income)

    @property
    def visits_se(self) -> float:
        """Standard error of the annual visits; zero where they are taken as known."""
        errors = self.sample.visits_se
        return 0.0 if errors is None else float(np.sqrt((errors**2).sum()))


def measure_values(
    valued: Valuation, theta: FloatArray, visits: FloatArray | float | None = None
) -> dict[str, FloatArray]:
    """Every measure for each parameter vector.

    Parameters
    ----------
    theta : (vectors, parameters).
    visits : (vectors,) annual visits; default: as observed.

    Returns
    -------
    Measure → (vectors,); infinite where no area is bounded.
    """
    family, sample = valued.family, valued.sample
    fees = np.unique(np.append(0.0, valued.fees))
    totals = family.totals(theta, sample, fees)
    predicted, area = totals.visits[:, 0], totals.left[:, 0]
    observed = np.broadcast_to(sample.annual_visits if visits is None else visits, predicted.shape)
    some = predicted > 0
    # Area and visits share their level; where the curve has no visit left it has no area.
    each = np.where(some, predicted, 1.0)
    per_trip = np.where(some, area / each, 0.0)
    annual = per_trip * observed
    trapezoid = np.trapezoid(totals.visits, fees, axis=1) if len(fees) > 1 else None
    values = {
        PER_TRIP: per_trip,
        **_per_trip_otherwise(family, sample, theta),
        ANNUAL: annual,
        ANNUAL_PREDICTED: area,
        ACCESS: annual,
        PER_PERSON: annual / sample.people.sum(),
        ELASTICITY: family.elasticity(theta, sample),
        VISITS_OBSERVED: observed,
        VISITS_PREDICTED: predicted,
    }
    if trapezoid is not None:
        values[ANNUAL_TRAPEZOID] = np.where(some, trapezoid / each, 0.0) * observed
    choke = family.choke_cost(theta, sample)
    if choke is not None:
        values[CHOKE] = choke
    if valued.income is not None:
        values |= _exact(valued, theta, predicted, observed)
    return values


def _per_trip_otherwise(family: Family, sample: Sample, theta: FloatArray) -> dict[str, FloatArray]:
    """The other convention of the literature, where there is one."""
    price = price_column(theta, sample)
    bounded = np.where(price < 0, price, -1.0)
    if isinstance(family, LinearCurve):
        rate = sample.rate * sample.per
        visits = sample.people / sample.per * rate
        if visits.sum() <= 0:
            return {}
        triangle = float(visits @ rate) / (-2 * bounded * float(visits.sum()))
        return {PER_TRIP_OBSERVED: np.where(price < 0, triangle, np.inf)}
    if isinstance(family, MixedCurve) and not family.is_minus_one_over_b(sample):
        return {PER_TRIP_COUNT: np.where(price < 0, -1 / bounded, np.inf)}
    return {}


def _exact(
    valued: Valuation, theta: FloatArray, predicted: FloatArray, observed: FloatArray
) -> dict[str, FloatArray]:
    sample, income = valued.sample, str(valued.income)
    if not valued.has_closed_form:
        return dict.fromkeys(EXACT, np.full(len(theta), np.nan))
    paid, given = exact_totals(valued.family, sample, theta, income=income, unit=valued.income_unit)
    each = np.where(predicted > 0, predicted, 1.0)
    incomes = sample.design[:, sample.terms.index(income)]
    effect = theta[:, sample.terms.index(income)]
    if isinstance(valued.family, SemiLogCurve):
        elasticity = effect * float(sample.visits @ incomes / sample.visits.sum())
    else:
        people = float(sample.people @ incomes) / sample.per
        elasticity = effect * people / each
    return {
        CV_TRIP: paid / each,
        EV_TRIP: given / each,
        CV_ANNUAL: paid / each * observed,
        EV_ANNUAL: given / each * observed,
        INCOME_ELASTICITY: elasticity,
    }


def measure_units(currency: str) -> dict[str, str]:
    """Unit of each measure, in the order of the table."""
    trip, year = f"{currency}/visit", f"{currency}/year"
    return {
        PER_TRIP: trip,
        PER_TRIP_OBSERVED: trip,
        PER_TRIP_COUNT: trip,
        ANNUAL: year,
        ANNUAL_PREDICTED: year,
        ANNUAL_TRAPEZOID: year,
        ACCESS: year,
        PER_PERSON: f"{currency}/person/year",
        CV_TRIP: trip,
        EV_TRIP: trip,
        CV_ANNUAL: year,
        EV_ANNUAL: year,
        INCOME_ELASTICITY: "% per %",
        ELASTICITY: "% per %",
        VISITS_OBSERVED: "visits/year",
        VISITS_PREDICTED: "visits/year",
        CHOKE: trip,
    }


def measure_notes(valued: Valuation) -> dict[str, str]:
    """How each measure is made."""
    family, sample = valued.family, valued.sample
    exact = "closed form by Hausman (1981); income effect from the income coefficient."
    no_form = {} if valued.has_closed_form else dict.fromkeys(EXACT, NO_CLOSED_FORM)
    known = "taken as known"
    if valued.visits_se:
        known = "with its standard error"
    return {
        PER_TRIP: family.surplus_words,
        PER_TRIP_OBSERVED: "Triangle over observed trips: Σ people q² ÷ (2|b| visits), q observed.",
        PER_TRIP_COUNT: "−1 / coefficient of travel_cost in the count part, as many papers report.",
        ANNUAL: f"Observed visits ({sample.annual_visits:,.0f} a year) × surplus per trip.",
        ANNUAL_PREDICTED: "Area under the predicted demand of all rows.",
        ANNUAL_TRAPEZOID: (
            f"Trapezoid rule over the fee schedule, 0 to {valued.fees.max():,.10g}; what lies "
            "beyond the last fee is not in it."
        ),
        ACCESS: (
            "What visitors would lose in a year if the site closed and nothing took its place: "
            "the whole area beyond today's costs, as annual_surplus."
        ),
        PER_PERSON: f"annual_surplus ÷ the market's {sample.people.sum():,.0f} people.",
        CV_TRIP: f"Pay that would make up for losing the site, per predicted visit; {exact}",
        EV_TRIP: f"What visitors would give up to keep the site, per predicted visit; {exact}",
        CV_ANNUAL: "Observed visits × compensating variation per trip.",
        EV_ANNUAL: "Observed visits × equivalent variation per trip.",
        INCOME_ELASTICITY: "Per cent more visits where household income is one per cent higher.",
        ELASTICITY: family.elasticity_words,
        VISITS_OBSERVED: f"As counted or expanded, in the rows of the regression; {known}.",
        VISITS_PREDICTED: "Expected visits of all rows by the model.",
        CHOKE: "Cost at which an average resident stops visiting.",
    } | no_form


NO_CLOSED_FORM = (
    "Not given: expected visits where the chance of any trip depends on cost or income integrate "
    "to no expenditure function in closed form. The surplus stands alone; with a small income "
    "effect it lies close (Willig, American Economic Review 66, 1976)."
)
