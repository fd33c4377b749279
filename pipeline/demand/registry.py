"""Every family of demand models, by the name that a study file uses."""

from __future__ import annotations

from pipeline.demand.counts import NegativeBinomial, Poisson
from pipeline.demand.dispersed import NegativeBinomial1, QuasiPoisson
from pipeline.demand.family import Family
from pipeline.demand.hurdle import Hurdle
from pipeline.demand.least_squares import Linear, LogLinear, WeightedLinear, WeightedLogLinear
from pipeline.demand.on_site import OnSiteNegativeBinomial, OnSitePoisson
from pipeline.demand.truncated import TruncatedNegativeBinomial, TruncatedPoisson
from pipeline.demand.zeros import ZeroInflatedNegativeBinomial, ZeroInflatedPoisson

FAMILIES: dict[str, Family] = {
    family.name: family
    for family in (
        Poisson(),
        NegativeBinomial(),
        NegativeBinomial1(),
        QuasiPoisson(),
        ZeroInflatedPoisson(),
        ZeroInflatedNegativeBinomial(),
        TruncatedPoisson(),
        TruncatedNegativeBinomial(),
        OnSitePoisson(),
        OnSiteNegativeBinomial(),
        Hurdle(),
        LogLinear(),
        Linear(),
        WeightedLogLinear(),
        WeightedLinear(),
    )
}
