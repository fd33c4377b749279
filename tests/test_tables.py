"""Declared tables: their checks, and errors that a person can act on."""

from __future__ import annotations

from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest

from pipeline.errors import TableError
from pipeline.schema import Source
from pipeline.tables import TABLES, Fit, OriginSummary, VisitRecords, Zones, data_dictionary
from tests.visit_world import make_records, make_zones

FILE = Source("visits.csv", {"party_size": "Personen", "record_id": "Nr"}, first_line=2)


def test_every_column_has_a_meaning_and_the_names_are_unique() -> None:
    dictionary = data_dictionary()
    assert (dictionary["meaning"].str.len() > 3).all()
    assert not dictionary.duplicated(["table", "column"]).any()
    assert dictionary["type"].isin(["number", "integer", "boolean", "string"]).all()


def test_physical_columns_say_their_unit() -> None:
    dictionary = data_dictionary()
    for ending, unit in {"_km": "km", "_min": "min", "_m": "m", "_hours": "h"}.items():
        names = dictionary["column"]
        named = dictionary[names.str.endswith(ending) & ~names.str.contains("_per_")]
        assert not named.empty
        assert (named["unit"] == unit).all(), named


def test_declared_columns_come_first_and_others_stay() -> None:
    """A table's own columns come before those that it shares with others."""
    records = make_records(["1"], lon=1.0, lat=2.0, adults=2.0)
    checked = VisitRecords.checked(records.assign(day="Monday")[["day", *records.columns[::-1]]])
    names = [*VisitRecords.columns()[:8], "adults", "day"]
    assert checked.columns.tolist() == names
    assert names[:8] == ["record_id", "postal_code_raw", "site_id", "trips", "party_size",
                         "weight", "lon", "lat"]  # fmt: skip


def test_whole_numbers_become_numbers_and_missing_stays_missing() -> None:
    checked = make_records(["1", None], party_size=[2, None])
    assert checked["party_size"].dtype == np.float64
    assert checked["party_size"].isna().tolist() == [False, True]
    assert checked["postal_code_raw"].isna().tolist() == [False, True]


def test_a_table_with_geometry_stays_one() -> None:
    points = gpd.points_from_xy([1, 2, 3], [4, 5, 6], crs="EPSG:4326")
    checked = Zones.checked(gpd.GeoDataFrame(make_zones(), geometry=points))
    assert isinstance(checked, gpd.GeoDataFrame)
    assert checked.crs == "EPSG:4326"


@pytest.mark.parametrize(
    ("column", "values", "message"),
    [
        ("party_size", [2.0, 0.0], r"1 value in column 'Personen' is not greater than 0; first: "),
        ("party_size", [2.0, 0.0], r"first: 0.0 in row 2 \(line 3\)"),
        ("party_size", [-1.0, 0.0], r"2 values in column 'Personen' are not greater than 0"),
        ("party_size", [2.0, "x"], r"'Personen' is not of type number; first: 'x' in row 2"),
        ("site_id", ["a", None], r"'site_id' is missing; first: in row 2"),
        (
            "record_id",
            ["a", "a"],
            r"2 rows share a key .*\(Nr\); first: Nr 'a' in row 1 .* in row 2",
        ),
    ],
)
def test_errors_speak_of_the_file_as_its_owner_knows_it(
    column: str, values: list[Any], message: str
) -> None:
    frame = pd.DataFrame(make_records(["1", "2"])).assign(**{column: values})
    with pytest.raises(TableError, match=message) as caught:
        VisitRecords.checked(frame, source=FILE)
    assert str(caught.value).startswith("visits.csv: ")


def test_a_missing_column_is_named_with_those_that_are_there() -> None:
    with pytest.raises(TableError, match=r"origin_summary: column 'records' is missing .*share"):
        OriginSummary.checked(pd.DataFrame({"site_id": [], "origin_status": [], "share": []}))


def test_a_value_out_of_a_list_is_shown_with_the_list() -> None:
    zones = make_zones().assign(centroid_source="guessed")
    with pytest.raises(TableError, match="'centroid_source' are not one of 'given', 'inside_pol"):
        Zones.checked(zones, source="zones")


def test_a_fraction_is_no_count() -> None:
    row = dict.fromkeys(Fit.columns(), "x") | {"nobs": 1.5, "converged": True, "chosen": True}
    row |= dict.fromkeys(("log_likelihood", "aic", "bic", "dispersion", "r_squared"), 0.5)
    row |= {"overdispersion_p": 0.5}
    with pytest.raises(TableError, match=r"'nobs' are no whole numbers; first: 1.5 in row 1"):
        Fit.checked(pd.DataFrame([row]))


def test_table_names_are_snake_case_of_the_class() -> None:
    names = [table.table_name() for table in TABLES]
    assert len(set(names)) == len(names)
    assert "zone_table" in names
