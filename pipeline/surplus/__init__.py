"""Surplus: what the demand curve is worth, with intervals.

=============  =========================================================================
module         what it holds
=============  =========================================================================
``measures``   every measure as a function of the parameters
``draws``      parameter draws
``intervals``  delta method and simulated intervals
``fees``       response to an added fee; the demand curve for a figure
``zones``      surplus of each zone
``stage``      the stage itself
=============  =========================================================================
"""

from pipeline.surplus.draws import parameter_draws
from pipeline.surplus.fees import FeeResponse, demand_curve, fee_response
from pipeline.surplus.stage import summarise_surplus, surplus

__all__ = [
    "FeeResponse",
    "demand_curve",
    "fee_response",
    "parameter_draws",
    "summarise_surplus",
    "surplus",
]
