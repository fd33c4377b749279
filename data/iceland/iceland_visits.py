"""Draws the invented visits to places in Iceland from a stated demand function."""

from __future__ import annotations

import numpy as np
import pandas as pd

SEED = 2019
SURPLUS_PER_TRIP = 8_000.0
"""ISK; the truth: one over minus the coefficient of the travel cost."""
PER_COST = -1 / SURPLUS_PER_TRIP
PER_SUBSTITUTE_COST = 1 / 60_000
ALPHA = 0.10
ANNUAL_VISITS = {"thingvellir": 400_000, "skaftafell": 90_000}
SAMPLED_SHARE = {"thingvellir": 0.025, "skaftafell": 0.10}
PARTY_SIZES = (1, 2, 3, 4, 5)
PARTY_SHARES = (0.20, 0.38, 0.20, 0.16, 0.06)
MEAN_PARTY = 2.5


def draw_visits(costs: pd.DataFrame, zones: pd.DataFrame) -> pd.DataFrame:
    """Draw the records of a year: one row per party.

    Person-visits per head = exp(constant + PER_COST x price + PER_SUBSTITUTE_COST x price of the
    cheapest substitute); the constant makes the expected visits the annual total. Parties in a
    zone scatter as NB2 with ALPHA; their sizes do not depend on the zone.

    Parameters
    ----------
    costs : the `costs` table.
    zones : `zone_id, postal_code, population`.

    Returns
    -------
    `record_id, site_id, postal_code, party_size`.
    """
    rng = np.random.default_rng(SEED)
    prices = costs.pivot_table(index="zone_id", columns="site_id", values="travel_cost").round(0)
    people = zones.set_index("zone_id")
    substitute = prices.drop(columns=list(ANNUAL_VISITS)).min(axis="columns")
    tables = []
    for site, total in ANNUAL_VISITS.items():
        log_rate = PER_COST * prices[site] + PER_SUBSTITUTE_COST * substitute
        drawn = (people["population"] * np.exp(log_rate.reindex(people.index))).fillna(0.0)
        expected = total * SAMPLED_SHARE[site] / MEAN_PARTY * drawn / drawn.sum()
        parties = rng.poisson(expected * rng.gamma(1 / ALPHA, ALPHA, len(expected)))
        codes = np.repeat(people["postal_code"].to_numpy(), parties)
        sizes = rng.choice(PARTY_SIZES, len(codes), p=PARTY_SHARES)
        table = pd.DataFrame({"site_id": site, "postal_code": codes, "party_size": sizes})
        tables.append(table.sample(frac=1, random_state=rng))
    visits = pd.concat(tables, ignore_index=True)
    visits.insert(0, "record_id", [f"IS{number:06d}" for number in range(1, len(visits) + 1)])
    return visits
