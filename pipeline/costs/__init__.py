"""Costs: what a visit costs a person, item by item.

==============  ==============================================================================
module          what it holds
==============  ==============================================================================
``stage``       the stage itself: every zone and site priced; and every record's own trip
``trips``       round trips from routes: kilometres and hours by what they are spent on
``people``      parties, their adults, who bears the cost, and the nights they stay
``driving``     the vehicle's cost per km: flat, or built up by class of vehicle
``wages``       the hourly wage, and the share of it that each kind of hour costs
``items``       the price of a trip from all of these, item by item
``modes``       shares of the modes by distance: the cost that is to be expected
``figures``     a study's figure for every row: its own, or its zone's; in one year's prices
``reported``    reported distances, times and spending against the routed ones
==============  ==============================================================================
"""

from pipeline.costs.items import ITEMS
from pipeline.costs.stage import cost, cost_and_check, own_trip_costs, summarise_cost

__all__ = ["ITEMS", "cost", "cost_and_check", "own_trip_costs", "summarise_cost"]
