"""Every kind of visit records through the whole flow, on the road of ``ministudy``.

Twelve zones on one road; the fen at its end has 9,000 person-visits a year. Each case writes its
own records and says how they are to be read; what is known of the year must come back.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pipeline.files import read_table
from pipeline.runner import Run
from pipeline.study import load_study
from pipeline.tables import Sensitivity, Surplus, TripTable, ZoneTable
from tests.ministudy import visits, write_ministudy, zones

YEAR = 9_000.0
PEOPLE = float(zones()["population"].sum())


def permits() -> pd.DataFrame:
    return visits()


def interviews() -> pd.DataFrame:
    """Respondents come 1 to 4 times a year, near ones more often."""
    frame = visits()
    near = frame["home"].str.slice(1, 3).astype(int) < 4
    times = 1 + np.arange(len(frame)) % 3 + near
    return frame.assign(times=times, people=1 + np.arange(len(frame)) % 3)


def household() -> pd.DataFrame:
    """Thirty respondents a zone; most of the far ones never came."""
    rows = [
        (
            f"R{zone:02d}{i:02d}",
            f"0{zone:02d}A",
            max(0, round(5 * np.exp(-0.25 * zone) + i % 4 - 2)),
        )
        for zone in range(1, 13)
        for i in range(30)
    ]
    frame = pd.DataFrame(rows, columns=["permit", "home", "times"])
    return frame.assign(people=2, site_id="fen")


def subset() -> pd.DataFrame:
    """A register of which every third record was asked whether the fen was all of the trip."""
    frame = visits()
    asked = np.arange(len(frame)) % 3 == 0
    share = np.where(asked, np.where(np.arange(len(frame)) % 2, 1.0, 0.5), np.nan)
    return frame.assign(asked=np.where(asked, "yes", "no"), share=share)


def counts() -> pd.DataFrame:
    """One row per zone: how many came, and how sure that is."""
    people = visits().groupby("home")["people"].sum()
    frame = people.rename("times").reset_index()
    return frame.assign(permit=frame["home"], site_id="fen", error=0.1 * frame["times"], people=1)


def overnight() -> pd.DataFrame:
    """One party in four stays a night or two, whatever its way."""
    frame = visits()
    place = np.arange(len(frame)) % 4
    return frame.assign(nights=np.where(place == 3, 1 + np.arange(len(frame)) % 2, 0))


@dataclass(frozen=True)
class Case:
    """Records, what they are, and what the finished table must add up to."""

    records: Callable[[], pd.DataFrame]
    kind: str
    total: float
    columns: str = ""
    visits: str = f"annual_visits = {{ fen = {YEAR:g} }}"
    more: str = ""
    demand: str = 'covariates = ["household_income"]'
    sites: str = ""
    share_left: float = 1.0
    stages: tuple[str, ...] = field(default=("surplus",))


PERSON = '[market]\nlevel = "person"\n'
CASES = {
    "permits": Case(permits, "census", YEAR),
    "on_site": Case(interviews, "on_site", YEAR, 'trips = "times"'),
    "on_site persons": Case(
        interviews,
        "on_site",
        YEAR,
        'trips = "times"',
        more=PERSON,
        demand='models = ["on_site_poisson"]\nchoose = "on_site_poisson"\nsampling = "on_site"',
    ),
    "household": Case(
        household, "household", float(household()["times"].mean()) * PEOPLE, 'trips = "times"',
        visits="",
    ),
    "household persons": Case(
        household, "household", float(household()["times"].mean()) * PEOPLE, 'trips = "times"',
        visits="", more=PERSON,
    ),
    "subset": Case(
        subset,
        "sample_of_register",
        YEAR,
        'surveyed = "asked"\npurpose_share = "share"',
        visits=f'annual_visits = {{ fen = {YEAR:g} }}\nother_purposes = "apportion_by_share"',
        share_left=0.75,
    ),
    "counts": Case(
        counts, "zone_counts", float(visits()["people"].sum()),
        'trips = "times"\ntrips_se = "error"', visits="",
    ),
    "overnight apart": Case(
        overnight, "census", YEAR, 'nights = "nights"', sites='stays = "apart"',
        stages=("publish",),
    ),
}  # fmt: skip


def run_case(folder: Path, case: Case) -> Path:
    """Write and run the study; return its folder."""
    path = write_ministudy(folder)
    case.records().to_csv(folder / "visits.csv", index=False)
    text = path.read_text(encoding="utf-8")
    for old, new in (
        ("annual_visits = { fen = 9000 }", f'kind = "{case.kind}"\n{case.visits}'),
        ('party_size = "people"\n', f'party_size = "people"\n{case.columns}\n'),
        ('file = "sites.csv"', f'file = "sites.csv"\n{case.sites}'),
        ("[demand]\n", f"{case.more}\n[demand]\n"),
        ('covariates = ["household_income"]', case.demand),
    ):
        assert text.count(old) == 1
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")
    Run(load_study(path), lambda _: None).upto(case.stages[-1])
    return folder / "mini"


@pytest.mark.parametrize("name", CASES)
def test_what_is_known_of_the_year_comes_back(tmp_path: Path, name: str) -> None:
    case = CASES[name]
    work = run_case(tmp_path, case) / "work"
    table = read_table(ZoneTable, work / "zone_table.parquet")
    whole = table["visits"].sum()
    if "other_purpose_visits" in table:
        assert whole == pytest.approx(
            case.share_left * case.total, rel=0.05
        )  # an even third was asked: three quarters of the trip on average
        whole += table["other_purpose_visits"].sum()
    assert whole == pytest.approx(case.total)
    sampled = table["visits"] > 0
    # Ready counts and samples are uncertain; a register expanded to a year is a sample, too.
    assert (table.loc[sampled, "visits_se"] > 0).all()
    assert (table.loc[~sampled, "visits_se"] == 0).all()
    values = read_table(Surplus, work / "surplus.parquet")
    chosen = values[values["chosen"] & (values["measure"] == "surplus_per_trip")]
    assert (chosen["value"] > 0).all()
    if case.more == PERSON:
        trips = read_table(TripTable, work / "trip_table.parquet")
        assert (trips["trips"] * trips["weight"]).sum() == pytest.approx(case.total)
    if name == "overnight apart":
        check_apart(tmp_path / "mini", table, values)


def check_apart(folder: Path, table: pd.DataFrame, values: pd.DataFrame) -> None:
    """Two demands, two rows of surplus; the place's year is shared between them."""
    assert sorted(values["site_id"].unique()) == ["fen_day", "fen_overnight"]
    by_site = table["visits"].groupby(table["site_id"]).sum()
    assert by_site.sum() == pytest.approx(YEAR)
    frame = overnight()
    stayed = frame.loc[frame["nights"] > 0, "people"].sum() / frame["people"].sum()
    assert by_site.to_dict()["fen_overnight"] == pytest.approx(YEAR * stayed)
    annual = values[values["chosen"] & (values["measure"] == "annual_surplus")]
    assert annual.groupby("site_id")["value"].first().gt(0).all()
    report = (folder / "output" / "report.html").read_text(encoding="utf-8")
    assert "The Fen, day trips" in report
    assert "The Fen, overnight trips" in report
    alternatives = read_table(Sensitivity, folder / "work" / "sensitivity.parquet")
    assert set(alternatives["site_id"]) == {"fen_day", "fen_overnight"}
