"""Every family of demand models, by the name that a study file uses."""

from __future__ import annotations

from pipeline.demand.counts import NegativeBinomial, Poisson
from pipeline.demand.family import Family
from pipeline.demand.least_squares import Linear, LogLinear

FAMILIES: dict[str, Family] = {
    family.name: family for family in (Poisson(), NegativeBinomial(), LogLinear(), Linear())
}
