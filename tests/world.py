"""A small world in memory: two roads, sixty zones, one site and one substitute.

::

      side road, 40 km/h                    o z60
                                            |  ...
    fen ==o=====o=====o== ... ==o=====o=====+== z22 ... z48 ===== mere
         z01   z02   z03       z20   z21    km 32                km 80
                  main road, 80 km/h

Zones lie every 3 km on the main road (z01 at km 3 to z24 at km 72) and every 4 km on the side
road, which leaves it at km 32 (z25 to z60). ``fen`` is valued; ``mere`` is its substitute. All
distances are sums that can be done in the head, so routes are written down, not searched.

``draw_origins`` draws visit records from ``TRUTH``; ``estimate`` runs join, demand and surplus
on them. Parties in a zone scatter as NB2, their sizes are independent of the zone. To look at
many draws, ``fen`` stands there many times (fen000, fen001, ...), all at the same place, each
with the records of its own seed: one table, one run of the stages.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import TypeAlias

import geopandas as gpd
import numpy as np
import pandas as pd
from numpy.typing import NDArray

from pipeline.costs import cost
from pipeline.demand import demand
from pipeline.finished import join
from pipeline.study import Study, study_from
from pipeline.surplus import surplus
from pipeline.tables import Routes, Sites, Zones

FloatArray: TypeAlias = NDArray[np.float64]

MAIN_KM, SIDE_KM, FORK_KM, MERE_KM = 1.5, 2.0, 32.0, 80.0
ON_MAIN, ON_SIDE = 48, 12
PARTY_SIZES = np.array([1, 2, 3, 4])
PARTY_SHARES = np.array([0.3, 0.4, 0.2, 0.1])
MEAN_PARTY = 2.1


@dataclass(frozen=True)
class Truth:
    """Visits per head and year = exp(constant + travel_cost x price + ...); NB2 with alpha."""

    constant: float = -0.6
    travel_cost: float = -0.125
    household_income: float = 1e-5
    substitute_cost: float = 0.02
    alpha: float = 0.08

    @property
    def surplus_per_trip(self) -> float:
        """-1 / travel_cost: the surplus per trip of an exponential demand curve."""
        return -1 / self.travel_cost


TRUTH = Truth()


def study(**demand_keys: object) -> Study:
    """The world's study; keys of [demand] can be set."""
    raw = {
        "study": {
            "name": "world",
            "title": "A fen",
            "currency": "EUR",
            "price_year": 2025,
            "folder": "world",
        },
        "costs": {"vehicle_cost_per_km": 0.25, "party_size": MEAN_PARTY, "wage_fraction": 0.3333},
        "demand": {
            "models": ["poisson", "negative_binomial"],
            "covariates": ["household_income", "substitute_cost"],
            **demand_keys,
        },
        "surplus": {"draws": 1000, "fees": [5.0]},
    }
    return study_from(raw, base=Path(), source="world")


@cache
def zones() -> gpd.GeoDataFrame:
    """Sixty zones of 2,000 to 6,500 people; income goes up and down along the roads."""
    number = np.arange(1, ON_MAIN + ON_SIDE + 1)
    main_km, side_km = _where()
    frame = pd.DataFrame(
        {
            "zone_id": [f"z{n:02d}" for n in number],
            "postal_code": [f"00{n:02d}" for n in number],
            "zone_name": [f"Zone {n}" for n in number],
            "population": 2_000.0 + 500.0 * (number * 7 % 10),
            "household_income": 28_000.0 + 2_000.0 * (number * 5 % 8),
            "lon": 10.0 + main_km / 100,
            "lat": 50.0 + side_km / 100,
            "centroid_source": "given",
        }
    )
    places = gpd.points_from_xy(frame["lon"], frame["lat"], crs="EPSG:4326")
    return gpd.GeoDataFrame(Zones.checked(frame), geometry=places)


def fens(count: int) -> list[str]:
    """Names of `count` copies of the site."""
    return [f"fen{number:03d}" for number in range(count)]


@cache
def sites(count: int = 1) -> pd.DataFrame:
    """Copies of `fen` at the western end of the main road, `mere` at the eastern."""
    names = [*fens(count), "mere"]
    is_mere = np.array([name == "mere" for name in names])
    return Sites.checked(
        pd.DataFrame(
            {
                "site_id": names,
                "access_id": "1",
                "site_name": names,
                "role": np.where(is_mere, "substitute", "site"),
                "lon": np.where(is_mere, 10.0 + MERE_KM / 100, 10.0),
                "lat": 50.0,
                "fee": np.where(is_mere, 1.0, 0.0),
            }
        )
    )


@cache
def routes(count: int = 1) -> pd.DataFrame:
    """Kilometres and minutes of every zone to every site, added up along the two roads."""
    main_km, side_km = _where()
    to_fen = _route_rows(main_km, side_km)
    to_mere = _route_rows(MERE_KM - main_km, side_km)
    tables = [to_fen.assign(site_id=fen) for fen in fens(count)]
    return Routes.checked(pd.concat([*tables, to_mere.assign(site_id="mere")], ignore_index=True))


def _route_rows(main_km: FloatArray, side_km: FloatArray) -> pd.DataFrame:
    """Routes to one site: that far on the main road and that far on the side road."""
    km, minutes = main_km + side_km, main_km / 80 * 60 + side_km / 40 * 60
    return pd.DataFrame(
        {
            "zone_id": zones()["zone_id"],
            "access_id": "1",
            "distance_km": km,
            "drive_time_min": minutes,
            "shortest_distance_km": km,
            "return_distance_km": km,
            "return_drive_time_min": minutes,
            **dict.fromkeys(("ferry_km", "ferry_min", "toll_km", "unpaved_km"), 0.0),
            **dict.fromkeys(("zone_snap_m", "site_snap_m"), 0.0),
            "route_status": "routed",
        }
    )


def _where() -> tuple[FloatArray, FloatArray]:
    """Km on the main road and on the side road, of each zone."""
    main = MAIN_KM * np.arange(1, ON_MAIN + 1)
    side = SIDE_KM * np.arange(1, ON_SIDE + 1)
    return (
        np.concatenate([main, np.full(ON_SIDE, FORK_KM)]),
        np.concatenate([np.zeros(ON_MAIN), side]),
    )


@cache
def prices(count: int = 1) -> pd.DataFrame:
    """The `costs` table: no draw of the visits changes it."""
    (costs,) = cost(routes(count), zones(), sites(count), None, study=study())
    return costs


@cache
def expected_visits(truth: Truth = TRUTH) -> FloatArray:
    """Person-visits a year to `fen` by zone."""
    price = prices().pivot_table(index="zone_id", columns="site_id", values="travel_cost")
    people = zones().set_index("zone_id")
    log_rate = (
        truth.constant
        + truth.travel_cost * price["fen000"]
        + truth.household_income * people["household_income"]
        + truth.substitute_cost * price["mere"]
    )
    return np.asarray(people["population"] * np.exp(log_rate), dtype=float)


def draw_origins(seed: int, truth: Truth = TRUTH, *, site_id: str = "fen000") -> pd.DataFrame:
    """Draw the visits of one year: the `origins` table.

    One record holds the trips of all parties of one size from one zone.
    """
    rng = np.random.default_rng(seed)
    parties = expected_visits(truth) / MEAN_PARTY
    scatter = rng.gamma(1 / truth.alpha, truth.alpha, len(parties)) if truth.alpha else 1.0
    trips = rng.multinomial(rng.poisson(parties * scatter), PARTY_SHARES)
    sizes = len(PARTY_SIZES)
    records = pd.DataFrame(
        {
            "zone_id": zones()["zone_id"].repeat(sizes).to_numpy(),
            "postal_code": zones()["postal_code"].repeat(sizes).to_numpy(),
            "trips": trips.ravel().astype(float),
            "party_size": np.tile(PARTY_SIZES, len(trips)).astype(float),
        }
    )
    return records.assign(
        record_id=[f"{site_id}-{number}" for number in range(len(records))],
        postal_code_raw=records["postal_code"],
        site_id=site_id,
        weight=1.0,
        counted_trips=records["trips"],
        origin_status="matched",
        origin_note=pd.Series(np.nan, index=records.index).astype("str"),
    )


def estimate(
    origins: pd.DataFrame, settings: Study, *, count: int = 1
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Join, demand and surplus: `estimates, fit, surplus`."""
    zone_table, _ = join(
        origins, prices(count), routes(count), zones(), sites(count), study=settings
    )
    estimates, fit = demand(zone_table, None, study=settings)
    values, _, _ = surplus(estimates, fit, zone_table, None, study=settings)
    return estimates, fit, values


def estimate_many(seeds: range, settings: Study, truth: Truth = TRUTH) -> pd.DataFrame:
    """Draw a year for every seed and estimate them together: the `surplus` table."""
    names = fens(len(seeds))
    years = [draw_origins(seed, truth, site_id=fen) for seed, fen in zip(seeds, names, strict=True)]
    _, _, values = estimate(pd.concat(years, ignore_index=True), settings, count=len(seeds))
    return values
