"""From records to a year: factors, standard errors and purposes of small samples, by hand.

The worlds are those of ``visit_world``: zones west (1,000 people), east (2,000) and isle (0), and
the site 'reserve'.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.errors import JoinError
from pipeline.expansion import expanded_records
from pipeline.finished import zone_visits
from pipeline.parties import counted_trips
from tests.visit_world import make_origins, make_study, make_zones

SITES = pd.DataFrame({"site_id": ["reserve"], "role": ["site"]})


def expand(
    origins: pd.DataFrame, shared_by: str = "all", adults: float = 1.5, **visits: Any
) -> pd.DataFrame:
    """Expanded visits by zone, of zones with a record; parties have `adults` of 2 people."""
    section = make_study(visits=visits).visits
    origins = origins.assign(counted_trips=counted_trips(origins, section.kind))
    costs = pd.DataFrame({"site_id": ["reserve"], "party_size": [2.0], "adults": [adults]})
    records = expanded_records(
        origins, make_zones(), SITES, costs, visits=section, shared_by=shared_by
    )
    return zone_visits(records, origins, section).set_index("zone_id")


# --- whose a visit is ------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("shared_by", "west", "east"),
    [("all", 400, 600), ("adults", 300, 200), ("vehicle", 200, 100)],
)
def test_visits_of_persons_adults_and_vehicles(shared_by: str, west: float, east: float) -> None:
    """1,000 person-visits a year, and 10 in the sample: each stands for 100.

    West: parties of 2 and 2 with 1 and 2 adults; east: one of 6 with 2 adults.
    """
    origins = make_origins(["west", "west", "east"], party_size=[2, 2, 6])
    origins["adults"] = [1.0, 2.0, 2.0]
    table = expand(origins, shared_by, annual_visits={"reserve": 1000})
    assert table["visits"].to_dict() == pytest.approx({"west": west, "east": east})
    assert table["expansion_factor"].tolist() == pytest.approx([100, 100])


def test_adults_that_no_record_tells_of_are_the_site_s_share() -> None:
    """Three quarters of a party are adults: 4 person-visits are 3 of adults."""
    table = expand(make_origins(["west", "west"]), "adults")
    assert table["visits"].to_dict() == pytest.approx({"west": 3})


def test_respondents_of_a_household_survey_are_adults() -> None:
    """Trips of a respondent in a car of four are a quarter of the car's."""
    origins = make_origins(["west"], trips=[4], party_size=4.0)
    persons = expand(origins, kind="household")["visits"].to_dict()
    assert expand(origins, "adults", kind="household")["visits"].to_dict() == persons
    vehicles = expand(origins, "vehicle", kind="household")["visits"].to_dict()
    assert vehicles["west"] == pytest.approx(persons["west"] / 4)


# --- kinds of records ------------------------------------------------------------------------


def test_a_register_in_full_is_no_sample() -> None:
    """3 parties of 2 are 6 visits, for certain."""
    table = expand(make_origins(["west", "west", "east"]))
    assert table["visits"].to_dict() == {"west": 4, "east": 2}
    assert table["visits_se"].to_dict() == {"west": 0, "east": 0}
    assert table["sampled_records"].to_dict() == {"west": 2, "east": 1}


def test_an_interview_on_the_site_is_one_visit_however_often_the_respondent_comes() -> None:
    """Two interviews in the west (12 and 1 trips a year), one in the east; 900 visits a year."""
    origins = make_origins(["west", "west", "east"], trips=[12, 1, 2], party_size=1.0)
    table = expand(origins, kind="on_site", annual_visits={"reserve": 900})
    assert table["visits"].to_dict() == pytest.approx({"west": 600, "east": 300})


def test_interviews_that_stand_for_nobody_knows_how_many_are_refused() -> None:
    with pytest.raises(JoinError, match="unknown number of visits"):
        expand(make_origins(["west"]), kind="on_site")
    weighted = make_origins(["west", "east"], weight=[30, 10])
    assert expand(weighted, kind="on_site")["visits"].to_dict() == {"west": 60, "east": 20}


def test_a_household_survey_of_all_zones() -> None:
    """4 of 3,000 people: 0, 3, 1 and 2 trips; each stands for 750, whatever the party."""
    origins = make_origins(["west", "west", "east", "east"], trips=[0, 3, 1, 2])
    table = expand(origins, kind="household")
    assert table["visits"].to_dict() == {"west": 2250, "east": 2250}
    assert (table["expansion_factor"] == 750).all()


def test_a_household_survey_zone_by_zone() -> None:
    """West: a mean of 1.5 trips × 1,000 people; east: 1 × 2,000."""
    origins = make_origins(["west", "west", "east"], trips=[0, 3, 1], weight=[1, 1, 7])
    table = expand(origins, kind="household", household_expansion="zone_population")
    assert table["visits"].to_dict() == {"west": 1500, "east": 2000}


def test_household_weights_that_are_people() -> None:
    origins = make_origins(["west", "east"], trips=[2, 1], weight=[400, 900])
    table = expand(origins, kind="household", household_expansion="weights")
    assert table["visits"].to_dict() == {"west": 800, "east": 900}


def test_ready_counts_keep_their_standard_errors() -> None:
    """West 300 ± 40 and 100 ± 30: 400 ± 50."""
    origins = make_origins(["west", "west", "east"], trips=[300, 100, 50], party_size=np.nan)
    table = expand(origins.assign(trips_se=[40, 30, np.nan]), kind="zone_counts")
    assert table["visits"].to_dict() == {"west": 400, "east": 50}
    assert table["visits_se"].to_dict() == pytest.approx({"west": 50, "east": 0})


def test_surveyed_records_stand_in_for_their_class() -> None:
    """Day permits: parties of 1 and 3 were surveyed, mean 2; season permits: 5 and 5.

    Unsurveyed: a day permit in the west (2) and a season permit in the east (5).
    """
    origins = make_origins(
        ["west", "west", "east", "east", "west", "east"], party_size=[1, 3, 5, 5, np.nan, np.nan]
    ).assign(activity=["day", "day", "season", "season", "day", "season"])
    table = expand(origins, kind="sample_of_register", register_classes=("activity",))
    assert table["visits"].to_dict() == {"west": 1 + 3 + 2, "east": 15}
    # s² of (1, 3) is 2, n = 2: the mean varies by 1, the record itself by 2 more.
    assert table["visits_se"].to_dict() == pytest.approx({"west": np.sqrt(3), "east": 0})


# --- known totals ----------------------------------------------------------------------------


def test_a_counter_with_a_standard_error() -> None:
    """All records are there and the counter is 10 % unsure, so every zone is."""
    origins = make_origins(["west", "west", "east"], party_size=1.0)
    table = expand(origins, annual_visits={"reserve": 3}, annual_visits_se={"reserve": 0.3})
    assert table["visits_se"].to_dict() == pytest.approx({"west": 0.2, "east": 0.1})


def test_a_sample_of_a_known_total_has_the_error_of_a_proportion() -> None:
    """100 of 10,000 visits, 30 of them from the west: the textbook's error of a share.

    se = N √(p (1 − p) ÷ (n − 1) × (1 − n ÷ N)) (Cochran, Sampling Techniques, 3rd edition 1977,
    equations 3.8 and 3.9, from memory).
    """
    origins = make_origins([*["west"] * 30, *["east"] * 70], party_size=1.0)
    table = expand(origins, annual_visits={"reserve": 10_000})
    expected = 10_000 * np.sqrt(0.3 * 0.7 / 99 * (1 - 100 / 10_000))
    assert table.loc["west", "visits"] == pytest.approx(3000)
    assert table.loc["west", "visits_se"] == pytest.approx(expected, rel=1e-9)
    assert table.loc["east", "visits_se"] == pytest.approx(expected, rel=1e-9)


@pytest.mark.slow
def test_the_standard_error_is_the_spread_of_repeated_samples() -> None:
    """400 samples of 200 parties out of 20,000, parties of 1 to 4, a tenth without a code."""
    rng = np.random.default_rng(8)
    zone = rng.choice(["west", "east", "none"], 20_000, p=[0.2, 0.7, 0.1])
    people = np.where(zone == "west", rng.integers(1, 4, 20_000), rng.integers(2, 5, 20_000))
    total = {"reserve": float(people.sum())}
    estimates, errors = [], []
    for _ in range(400):
        drawn = rng.choice(20_000, 200, replace=False)
        places: list[str | None] = [None if name == "none" else str(name) for name in zone[drawn]]
        table = expand(make_origins(places, party_size=people[drawn]), annual_visits=total)
        estimates.append(table["visits"]["west"])
        errors.append(table["visits_se"]["west"])
    # 400 samples know a standard deviation to 3.5 %.
    assert np.mean(errors) == pytest.approx(np.std(estimates), rel=0.09)


def test_seasons_have_totals_of_their_own() -> None:
    """Summer: 2 of 3 from the west, 300 in all; winter: the one from the east, 80."""
    origins = make_origins(["west", "west", "east", "east"], party_size=1.0)
    origins = origins.assign(season=["summer", "summer", "summer", "winter"])
    table = expand(
        origins,
        season_visits={"summer": {"reserve": 300}, "winter": {"reserve": 80}},
        season_visits_se={"winter": {"reserve": 8}},
    )
    assert table["visits"].to_dict() == pytest.approx({"west": 200, "east": 180})


@pytest.mark.parametrize(
    ("columns", "visits", "message"),
    [
        ({}, {"season_visits": {"s": {"reserve": 1.0}}}, "the records have no season"),
        (
            {"season": "w"},
            {"season_visits": {"s": {"reserve": 1.0}}},
            "season without a known total; first: record 'r0', season 'w'",
        ),
        ({}, {"season_visits": {"s": {"lagoon": 1.0}}}, "season_visits.s names 'lagoon'"),
    ],
)
def test_totals_that_do_not_fit_the_records(
    columns: dict[str, Any], visits: dict[str, Any], message: str
) -> None:
    with pytest.raises(JoinError, match=message):
        expand(make_origins(["west"]).assign(**columns), **visits)


# --- other purposes --------------------------------------------------------------------------

TOLD = pd.DataFrame(
    {
        "purpose_share": [1.0, 0.4, 0.6],
        "stops": [0.0, 3.0, 1.0],
        "hours_on_site": [5.0, 6.0, 4.0],
        "nights": [0.0, 1.0, 0.0],
        "trip_hours": [np.nan, np.nan, 8.0],
    }
)


@pytest.mark.parametrize(
    ("treatment", "west", "elsewhere"),
    [
        ("keep", 30.0, None),
        ("indicator", 30.0, 0.0),
        ("drop", 10.0, 20.0),
        ("equal", 20.0, 10.0),
        ("apportion_by_share", 20.0, 10.0),
        ("by_stops", 10 + 2.5 + 5, 12.5),
        ("by_time", 10 + 2.5 + 5, 12.5),  # 6 of 24 hours, 4 of 8
    ],
)
def test_trips_with_other_purposes(treatment: str, west: float, elsewhere: float | None) -> None:
    """Three parties of 10 from the west: one single-purpose trip and two with other stops."""
    origins = pd.concat([make_origins(["west"] * 3, party_size=10.0), TOLD], axis=1)
    table = expand(origins, other_purposes=treatment).loc["west"]
    assert table["visits"] == pytest.approx(west)
    assert table.get("other_purpose_visits") == (
        elsewhere if elsewhere is None else pytest.approx(elsewhere)
    )
    if elsewhere is not None:
        assert table["multi_purpose"] == pytest.approx(2 / 3)


def test_a_record_that_does_not_say_its_share_takes_the_mean_of_the_others() -> None:
    """Shares of 0.2 and 0.4 are known; the third has stops and takes 0.3."""
    origins = make_origins(["west"] * 3, party_size=1.0).assign(
        stops=1.0, purpose_share=[0.2, 0.4, np.nan]
    )
    table = expand(origins, other_purposes="apportion_by_share")
    assert table.loc["west", "visits"] == pytest.approx(0.9)


@pytest.mark.parametrize(
    ("columns", "treatment", "message"),
    [
        ({}, "drop", "do not say which trips had other purposes"),
        ({"stops": 1.0}, "by_time", "needs the column hours_on_site"),
        ({"stops": 1.0}, "apportion_by_share", "needs the column purpose_share"),
        (
            {"stops": 1.0, "purpose_share": np.nan},
            "apportion_by_share",
            "no record says what share is the site's; first: record 'r0'",
        ),
    ],
)
def test_a_treatment_that_the_records_do_not_allow(
    columns: dict[str, Any], treatment: str, message: str
) -> None:
    with pytest.raises(JoinError, match=message):
        expand(make_origins(["west"]).assign(**columns), other_purposes=treatment)


def test_the_purposes_of_unsurveyed_records_are_the_mean_of_the_surveyed() -> None:
    origins = make_origins(["west"] * 3, party_size=1.0).assign(purpose_share=[1.0, 0.5, np.nan])
    table = expand(origins, kind="sample_of_register", other_purposes="apportion_by_share")
    assert table.loc["west", "visits"] == pytest.approx(1 + 0.5 + 0.75)


# --- identities ------------------------------------------------------------------------------

RECORD = st.tuples(
    st.sampled_from(["west", "east", "isle", None]),
    st.sampled_from(["matched", "foreign"]),
    st.integers(1, 5),
    st.integers(1, 9),
    st.floats(0.1, 10),
    st.floats(0, 1),
    st.sampled_from(["summer", "winter"]),
)
TREATMENTS = ("drop", "apportion_by_share", "by_stops", "equal", "indicator")


@given(st.lists(RECORD, max_size=20), st.sampled_from(TREATMENTS), st.floats(1, 1e7))
@settings(derandomize=True, max_examples=60, deadline=None)
def test_trips_are_conserved_through_weighting_apportioning_and_expansion(
    rows: list[tuple[str | None, str, int, int, float, float, str]], treatment: str, total: float
) -> None:
    """Visits and those left to other purposes are the domestic part of the known totals."""
    rows = [("west", "matched", 1, 2, 1.0, 0.5, season) for season in ("summer", "winter")] + rows
    zones, kinds, trips, sizes, weights, shares, seasons = (
        list(c) for c in zip(*rows, strict=True)
    )
    status = [
        kind if kind == "foreign" or zone else "unknown_code"
        for zone, kind in zip(zones, kinds, strict=True)
    ]
    placed = [z if s == "matched" else None for z, s in zip(zones, status, strict=True)]
    origins = make_origins(
        placed, trips=trips, party_size=sizes, weight=weights, origin_status=status
    ).assign(purpose_share=shares, stops=[round(10 * share) for share in shares], season=seasons)
    totals = {"summer": {"reserve": total}, "winter": {"reserve": 2 * total}}
    table = expand(origins, other_purposes=treatment, season_visits=totals)
    people = np.array(trips) * np.array(sizes) * np.array(weights)
    home = np.array(status) != "foreign"
    expected = 0.0
    for season, known in totals.items():
        here = np.array(seasons) == season
        expected += known["reserve"] * people[home & here].sum() / people[here].sum()
    everything = table["visits"].sum() + table["other_purpose_visits"].sum()
    assert everything == pytest.approx(expected, rel=1e-9)
    assert table["multi_purpose"].dropna().between(0, 1 + 1e-12).all()
    assert (table["visits_se"] >= 0).all()


@given(
    st.lists(
        st.tuples(st.sampled_from(["west", "east"]), st.integers(0, 30), st.floats(0.1, 5)),
        min_size=1,
        max_size=20,
    )
)
@settings(derandomize=True, max_examples=40, deadline=None)
def test_a_household_survey_stands_for_the_population_once(
    rows: list[tuple[str, int, float]],
) -> None:
    """With one trip each, the visits are the people: 3,000, or those of the zones with a reply."""
    zones, _, weights = (list(column) for column in zip(*rows, strict=True))
    origins = make_origins(zones, weight=weights)
    everyone = expand(origins, kind="household")
    assert everyone["visits"].sum() == pytest.approx(3000)
    by_zone = expand(origins, kind="household", household_expansion="zone_population")
    people = {"west": 1000, "east": 2000}
    assert by_zone["visits"].to_dict() == pytest.approx({z: people[z] for z in set(zones)})
    # One trip each, without exception, leaves nothing to be unsure of within a zone.
    assert by_zone["visits_se"].to_numpy() == pytest.approx(0, abs=1e-4)
