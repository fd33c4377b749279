"""What a demand curve is worth, as functions of its parameters.

One convention for every model: the observed (expanded) visits are what happened, the model says
what a visit is worth. So ``annual_surplus`` is observed visits × surplus per trip, and the area
under the predicted curve stands beside it as ``annual_surplus_predicted``. For a Poisson with a
constant the two are equal, since its predicted visits add up to the observed ones.
"""

from __future__ import annotations

import numpy as np

from pipeline.demand.family import Family
from pipeline.demand.sample import FloatArray, Sample

PER_TRIP = "surplus_per_trip"
ANNUAL = "annual_surplus"
ANNUAL_PREDICTED = "annual_surplus_predicted"
PER_PERSON = "surplus_per_person_per_year"
ELASTICITY = "price_elasticity"
VISITS_OBSERVED = "annual_visits_observed"
VISITS_PREDICTED = "annual_visits_predicted"
CHOKE = "choke_cost"

#: Measures that have no value where visits do not fall with cost.
AREAS = (PER_TRIP, ANNUAL, ANNUAL_PREDICTED, PER_PERSON, CHOKE)


def measure_values(family: Family, sample: Sample, theta: FloatArray) -> dict[str, FloatArray]:
    """Every measure for each parameter vector.

    Parameters
    ----------
    theta : (vectors, parameters).

    Returns
    -------
    Measure → (vectors,); infinite where no area is bounded.
    """
    totals = family.totals(theta, sample, np.zeros(1))
    visits, area = totals.visits[:, 0], totals.left[:, 0]
    some = visits > 0
    # Area and visits share their level; where the curve has no visit left it has no area.
    per_trip = np.where(some, area / np.where(some, visits, 1.0), 0.0)
    annual = per_trip * sample.annual_visits
    values = {
        PER_TRIP: per_trip,
        ANNUAL: annual,
        ANNUAL_PREDICTED: area,
        PER_PERSON: annual / sample.people.sum(),
        ELASTICITY: family.elasticity(theta, sample),
        VISITS_OBSERVED: np.full(len(theta), sample.annual_visits),
        VISITS_PREDICTED: visits,
    }
    choke = family.choke_cost(theta, sample)
    return values if choke is None else {**values, CHOKE: choke}


def measure_units(currency: str) -> dict[str, str]:
    """Unit of each measure."""
    return {
        PER_TRIP: f"{currency}/visit",
        ANNUAL: f"{currency}/year",
        ANNUAL_PREDICTED: f"{currency}/year",
        PER_PERSON: f"{currency}/person/year",
        ELASTICITY: "% per %",
        VISITS_OBSERVED: "visits/year",
        VISITS_PREDICTED: "visits/year",
        CHOKE: f"{currency}/visit",
    }


def measure_notes(family: Family, sample: Sample) -> dict[str, str]:
    """How each measure is made."""
    return {
        PER_TRIP: family.surplus_words,
        ANNUAL: f"Observed visits ({sample.annual_visits:,.0f} a year) × surplus per trip.",
        ANNUAL_PREDICTED: "Area under the predicted demand of all rows.",
        PER_PERSON: f"annual_surplus ÷ the market's {sample.people.sum():,.0f} people.",
        ELASTICITY: family.elasticity_words,
        VISITS_OBSERVED: "As counted or expanded, in the rows of the regression; taken as known.",
        VISITS_PREDICTED: "Expected visits of all rows by the model.",
        CHOKE: "Cost at which an average resident stops visiting.",
    }
