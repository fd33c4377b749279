"""Draws the invented permits from a stated demand function, then spoils their postal codes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pandas as pd

PARTY_SIZES = (1, 2, 3, 4, 5, 6)
PARTY_SHARES = (0.22, 0.34, 0.16, 0.18, 0.07, 0.03)
CROSSWALK = {"0190": "0101", "TV90": "TV01", "0290": "0201", "0398": "0301"}
UNKNOWN_CODES = ("0999", "ZZ07", "0477", "QT11")
MALFORMED = ("unknown", "n/a", "Quenmouth", "see form", "01?2")
FOREIGN = ("OV-20177", "OV-11830", "N-40412", "OV-20955")


@dataclass(frozen=True)
class Demand:
    """The truth: person-visits a year per head of a zone, and how permits are sampled from them.

    visits per head = exp(constant + travel_cost x price + household_income x income
    + substitute_cost x price of the nearest substitute); prices per person in EUR, income per
    household in EUR a year. Parties in a zone scatter as NB2 with `alpha`.
    """

    constant: float = -0.06
    travel_cost: float = -1 / 12
    household_income: float = 1.0e-5
    substitute_cost: float = 0.02
    alpha: float = 0.10
    one_permit_in: int = 8

    @property
    def surplus_per_trip(self) -> float:
        """Consumer surplus per trip of an exponential demand function: -1 / travel_cost."""
        return -1 / self.travel_cost

    @property
    def mean_party(self) -> float:
        """Mean party size."""
        return float(np.dot(PARTY_SIZES, PARTY_SHARES))

    def expected_visits(self, zones: pd.DataFrame) -> pd.Series[float]:
        """Person-visits a year of each zone; none where there is no way to the site."""
        log_rate = (
            self.constant
            + self.travel_cost * zones["travel_cost"]
            + self.household_income * zones["household_income"]
            + self.substitute_cost * zones["substitute_cost"]
        )
        return (zones["population"] * np.exp(log_rate)).fillna(0.0)


def draw_permits(zones: pd.DataFrame, truth: Demand, seed: int) -> pd.DataFrame:
    """Draw the permits of a year and spoil their codes.

    Parameters
    ----------
    zones : `postal_code, population, household_income, travel_cost, substitute_cost`.
    truth : the demand function.
    seed : same seed, same permits.

    Returns
    -------
    `permit_no, issued, home_code, people`: one row per party, in the order of issue.
    """
    rng = np.random.default_rng([seed, 3])
    parties = truth.expected_visits(zones) / truth.one_permit_in / truth.mean_party
    scatter = rng.gamma(1 / truth.alpha, truth.alpha, len(zones))
    counts = rng.poisson(parties * scatter)
    codes = np.repeat(zones["postal_code"].to_numpy(dtype=object), counts)
    people = rng.choice(PARTY_SIZES, size=len(codes), p=PARTY_SHARES)
    written = [_spoil(str(code), rng) for code in codes]
    permits = pd.DataFrame({"issued": _days(len(codes), rng), "home_code": written})
    permits["people"] = people
    permits = permits.sample(frac=1, random_state=rng).sort_values("issued", kind="stable")
    permits["issued"] = permits["issued"].dt.strftime("%d.%m.%Y")
    permits.insert(0, "permit_no", [f"P25-{number:05d}" for number in range(1, len(permits) + 1)])
    return permits.reset_index(drop=True)


def _days(count: int, rng: np.random.Generator) -> pd.DatetimeIndex:
    """Days of 2025, most of them in the bird seasons of spring and autumn."""
    spring, autumn = rng.normal(125, 28, count), rng.normal(275, 24, count)
    day = np.where(rng.random(count) < 0.55, spring, autumn).round().clip(1, 365)
    return pd.Timestamp("2024-12-31") + pd.to_timedelta(day, unit="D")


def _spoil(code: str, rng: np.random.Generator) -> str:
    """A code as the gate's staff and their spreadsheet left it."""
    boxes = [box for box, zone in CROSSWALK.items() if zone == code]
    if boxes and rng.random() < 0.25:
        return boxes[0]
    ways: list[tuple[float, Callable[[str], str]]] = [
        (0.160, lambda text: text.lstrip("0")),
        (0.060, lambda text: text.lstrip("0") + ".0" if text.isdigit() else text.lower()),
        (0.040, lambda text: f" {text} "),
        (0.030, lambda text: f"{text[:2]} {text[2:]}"),
        (0.060, lambda text: text.lower()),
        (0.014, lambda _: ""),
        (0.012, lambda _: str(rng.choice(UNKNOWN_CODES))),
        (0.008, lambda _: str(rng.choice(MALFORMED))),
        (0.010, lambda _: str(rng.choice(FOREIGN))),
    ]
    dice = rng.random()
    for share, way in ways:
        if dice < share:
            return way(code)
        dice -= share
    return code
