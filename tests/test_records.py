"""Survey columns of the visit records: each is read, and each fault is named by row and column."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest

from pipeline.errors import StudyError, TableError
from pipeline.records import read_visit_records
from pipeline.study import Study
from tests.visit_world import make_study

SITES = "site_id,lon,lat\nfen,10.5,50.2\n"


def survey(folder: Path, columns: dict[str, list[Any]], **keys: Any) -> Study:
    """A study whose records have the postal code 1 and the given columns, mapped by their names."""
    rows = len(next(iter(columns.values())))
    frame = pd.DataFrame({"code": ["01001"] * rows, **columns})
    frame.to_csv(folder / "visits.csv", index=False)
    (folder / "sites.csv").write_text(SITES)
    mapped = {name: name for name in columns if name not in keys.get("covariates", ())}
    section = {"file": "visits.csv", "columns": {"postal_code": "code", **mapped}, **keys}
    return make_study(folder, visits=section, sites={"file": "sites.csv"})


def test_what_a_survey_tells(tmp_path: Path) -> None:
    columns: dict[str, list[Any]] = {
        "adults": [2, 1],
        "children": [3, ""],
        "vehicle": ["electric", "petrol"],
        "mode": ["Car", "foot"],
        "nights": [0, 2],
        "hours_on_site": [3.5, ""],
        "stops": [0, 4],
        "purpose_share": [1, 0.25],
        "activity": ["birds", "walk"],
        "household_income": [52000, ""],
        "surveyed": ["yes", "no"],
        "reported_distance_km": [84, ""],
        "age": [41, 7],
    }
    records = read_visit_records(survey(tmp_path, columns, covariates=("age",)))
    assert records["mode"].tolist() == ["car", "foot"]
    assert records["surveyed"].tolist() == [True, False]
    assert records["purpose_share"].tolist() == [1, 0.25]
    assert records["age"].tolist() == [41, 7]
    # Two adults and three children are five; without the children nobody knows.
    assert records["party_size"].tolist() == pytest.approx([5, np.nan], nan_ok=True)


def test_columns_that_the_study_does_not_name_are_not_read(tmp_path: Path) -> None:
    columns: dict[str, list[Any]] = {"party_size": [2], "date": ["yesterday"], "mode": ["sleigh"]}
    study = survey(tmp_path, columns)
    silent = study.visits.columns.model_copy(update={"date": None, "mode": None})
    study = study.model_copy(update={"visits": study.visits.model_copy(update={"columns": silent})})
    assert "date" not in read_visit_records(study)


@pytest.mark.parametrize(
    ("columns", "message"),
    [
        ({"party_size": [2, 0]}, r"is not greater than 0; first: 0.0 in row 2 \(line 3\)"),
        ({"adults": [2, -1]}, "'adults' is below 0; first: -1.0 in row 2"),
        ({"children": [2, -1]}, "'children' is below 0; first: -1.0 in row 2"),
        ({"nights": [0, 400]}, "'nights' is above 366; first: 400.0 in row 2"),
        ({"hours_on_site": [-2, 1]}, "'hours_on_site' is below 0; first: -2.0 in row 1"),
        ({"trip_hours": [0, 1]}, "'trip_hours' is not greater than 0; first: 0.0 in row 1"),
        ({"stops": [-1, 1]}, "'stops' is below 0; first: -1.0 in row 1"),
        ({"purpose_share": [0.5, 1.2]}, "'purpose_share' is above 1; first: 1.2 in row 2"),
        ({"purpose_share": ["half", 1]}, "'purpose_share' is no number; first: 'half' in row 1"),
        ({"mode": ["car", "sleigh"]}, "'mode' is not one of 'car', .*; first: 'sleigh' in row 2"),
        ({"household_income": [0, 1]}, "'household_income' is not greater than 0"),
        ({"weight": [1, -1]}, "'weight' is below 0; first: -1.0 in row 2"),
        ({"weight": [0, 0]}, "'weight' of the 2 records of site 'fen' sum to nothing; .* in row 1"),
        ({"trips": [1, -2]}, "'trips' is below 0; first: -2.0 in row 2"),
        ({"surveyed": ["yes", "maybe"]}, "'surveyed' are neither true .* 'maybe' in row 2"),
        ({"date": ["2025-07-01", "1.7.2025"]}, "'date' are no day .* first: '1.7.2025' in row 2"),
        ({"date": ["2025-02-30"]}, "first: '2025-02-30' in row 1"),
        ({"country": ["IS", "Narnia"]}, "'country' are no country; first: 'Narnia' in row 2"),
        ({"reported_distance_km": [-1]}, "'reported_distance_km' is below 0"),
        ({"reported_time_min": [-1]}, "'reported_time_min' is below 0"),
        ({"reported_cost": [-1]}, "'reported_cost' is below 0; first: -1.0 in row 1"),
        ({"trips_se": [-1]}, "'trips_se' is below 0"),
        (
            {"adults": [1, 3], "party_size": [2, 2]},
            "first: 3 in column 'adults', but 2 in column 'party_size' in row 2",
        ),
        (
            {"adults": [2, 2], "children": [0, 1], "party_size": [2, 4]},
            r"2 \+ 1 in columns 'adults' and 'children', but 4 in column 'party_size' in row 2",
        ),
    ],
)  # fmt: skip
def test_each_field_out_of_range_is_named_by_row_and_column(
    tmp_path: Path, columns: dict[str, list[Any]], message: str
) -> None:
    with pytest.raises(TableError, match=message) as caught:
        read_visit_records(survey(tmp_path, columns))
    assert str(caught.value).startswith("visits.csv: ")


def test_an_interview_without_a_trip(tmp_path: Path) -> None:
    with pytest.raises(TableError, match="less than one trip in column 'trips'; first: 0 in row 2"):
        read_visit_records(survey(tmp_path, {"trips": [3, 0]}, kind="on_site"))


def test_a_column_that_is_named_but_not_there(tmp_path: Path) -> None:
    study = survey(tmp_path, {"nights": [1]})
    pd.DataFrame({"code": ["01001"]}).to_csv(tmp_path / "visits.csv", index=False)
    with pytest.raises(TableError, match=r"column 'nights' \(nights: nights away from home\)"):
        read_visit_records(study)


def test_days_and_seasons(tmp_path: Path) -> None:
    """Winter runs over the turn of the year."""
    days = {"date": ["01.05.2025", "30.09.2025", "01.10.2025", "15.01.2026"]}
    seasons = {"summer": ("05-01", "09-30"), "winter": ("10-01", "04-30")}
    records = read_visit_records(survey(tmp_path, days, date_format="%d.%m.%Y", seasons=seasons))
    assert records["date"].tolist()[0] == "2025-05-01"
    assert records["season"].tolist() == ["summer", "summer", "winter", "winter"]
    with pytest.raises(TableError, match="fall into no season; first: '2025-10-01' in row 3"):
        read_visit_records(
            survey(tmp_path, days, date_format="%d.%m.%Y", seasons={"s": ("05-01", "09-30")})
        )
    with pytest.raises(StudyError, match="needs the day of each visit"):
        read_visit_records(survey(tmp_path, {"nights": [1]}, seasons=seasons))


def test_countries_by_code_name_or_the_studys_own_word(tmp_path: Path) -> None:
    words = {"country": ["is", "Germany", "USA", "the Isles", None]}
    study = survey(tmp_path, words, country_words={"The Isles": "GB", "USA": "US"})
    assert read_visit_records(study)["country"].fillna("").tolist() == ["IS", "DE", "US", "GB", ""]


def test_points_in_any_crs(tmp_path: Path) -> None:
    """500 km east and 0 km north in UTM zone 32 is 9 degrees east on the equator."""
    study = survey(tmp_path, {"lon": [500_000.0, ""], "lat": [0.0, 0.0]}, crs="EPSG:32632")
    records = read_visit_records(study)
    assert records[["lon", "lat"]].iloc[0].tolist() == pytest.approx([9, 0], abs=1e-9)
    assert records.loc[1, ["lon", "lat"]].isna().all()
    with pytest.raises(StudyError, match="names only one of lon and lat"):
        read_visit_records(survey(tmp_path, {"lon": [1.0]}))


def test_a_layer_of_points_needs_no_codes(tmp_path: Path) -> None:
    points = gpd.GeoDataFrame(
        {"people": [2]}, geometry=gpd.points_from_xy([9.0], [50.0]), crs="EPSG:4326"
    )
    points.to_file(tmp_path / "visits.gpkg")
    (tmp_path / "sites.csv").write_text(SITES)
    section = {"file": "visits.gpkg", "columns": {"party_size": "people"}}
    study = make_study(tmp_path, visits=section, sites={"file": "sites.csv"})
    records = read_visit_records(study)
    assert records[["lon", "lat"]].iloc[0].tolist() == [9, 50]
    assert records["postal_code_raw"].isna().all()


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        ({"annual_visits_se": {"fen": 1.0}}, "annual_visits_se names 'fen', of which no total"),
        (
            {"annual_visits": {"fen": 1.0}, "season_visits": {"s": {"fen": 1.0}}},
            "'fen' has a total in annual_visits and in season_visits",
        ),
        (
            {"seasons": {"s": ("01-01", "12-31")}, "season_visits": {"t": {"fen": 1.0}}},
            "season_visits names 't'",
        ),
        ({"season_visits_se": {"s": {"fen": 1.0}}}, "no total of 'fen' in 's'"),
        ({"seasons": {"s": ("1 May", "12-31")}}, "String should match pattern"),
        ({"kind": "guesses"}, "'census'"),
    ],
)
def test_settings_that_contradict_each_other(keys: dict[str, Any], message: str) -> None:
    with pytest.raises(StudyError, match=message):
        make_study(visits=keys)
