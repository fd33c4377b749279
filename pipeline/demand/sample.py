"""Rows that a demand model is fitted to: one sample per site, from zones or from records.

A model predicts a *rate*: visits per person and year. What is counted is the rate times the
*exposure*::

    expected count = exposure × rate          visits per year = people × rate

=========  ==========================================  ==============  =================
table      count                                       exposure        people
=========  ==========================================  ==============  =================
zones      person-visits in the records                population ÷    population
                                                       expansion
records    trips of the person in a year               1               weight
=========  ==========================================  ==============  =================

Expansion is the known annual total over the visits in the records. Visits that were multiplied
up are not counts: 400 visits that stand for 40,000 carry the information of 400. So the counts
before expansion are fitted, and the expansion stands in the exposure; predictions are per year.
Robust errors of a Poisson do not mind a constant factor; model errors, the negative binomial
and the overdispersion test do.

Person-visits come in parties, and the members of a party do not decide independently. Errors
that take the Poisson variance at its word are therefore too small; robust errors are the default.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.intp]
BoolArray = npt.NDArray[np.bool_]

CONST = "const"
PRICE = "travel_cost"
PER_ZONE_RATE = 1000.0
ROW_ARRAYS = ("design", "counts", "exposure", "weight", "people", "visits")
OPTIONAL_ARRAYS = ("clusters", "visits_se", "positions")


@dataclass(frozen=True)
class Sample:
    """The usable rows of one site; every array has one entry per row."""

    site_id: str
    zone_ids: tuple[str, ...]
    terms: tuple[str, ...]
    design: FloatArray
    counts: FloatArray
    exposure: FloatArray
    weight: FloatArray
    people: FloatArray
    visits: FloatArray
    per: float
    notes: tuple[str, ...]
    # What not every study has; see `SampleOptions`.
    zero_terms: tuple[str, ...] | None = None
    clusters: IntArray | None = None
    visits_se: FloatArray | None = None
    positions: FloatArray | None = None

    @property
    def zonal(self) -> bool:
        """Whether the rows are zones (else: records of persons)."""
        return self.per == PER_ZONE_RATE

    @property
    def nobs(self) -> int:
        """Number of rows."""
        return len(self.counts)

    @property
    def price(self) -> FloatArray:
        """Travel cost of each row, per person and trip."""
        return self.design[:, self.terms.index(PRICE)]

    @property
    def rate(self) -> FloatArray:
        """Observed visits per person and year."""
        return self.counts / self.exposure

    @property
    def annual_visits(self) -> float:
        """Observed visits per year, expanded."""
        return float(self.visits.sum())

    def rows(self, kept: npt.NDArray[Any]) -> Sample:
        """Some of the rows: a mask, or positions (which may repeat)."""
        index = np.arange(self.nobs)[kept]
        taken = {
            name: getattr(self, name)[index]
            for name in (*ROW_ARRAYS, *OPTIONAL_ARRAYS)
            if getattr(self, name) is not None
        }
        return replace(self, zone_ids=tuple(self.zone_ids[i] for i in index), **taken)


def stacked(samples: list[Sample]) -> Sample:
    """The samples of several sites as one, to be fitted together."""
    arrays: dict[str, Any] = {
        name: None
        if any(getattr(s, name) is None for s in samples)
        else np.concatenate([getattr(s, name) for s in samples])
        for name in (*ROW_ARRAYS, *OPTIONAL_ARRAYS)
    }
    notes = [f"Stacked with a constant of its own for each of {len(samples)} sites."]
    notes += [f"{s.site_id}: {note}" for s in samples for note in s.notes]
    return replace(
        samples[0],
        site_id="all sites",
        zone_ids=tuple(zone for s in samples for zone in s.zone_ids),
        notes=tuple(notes),
        **arrays,
    )
