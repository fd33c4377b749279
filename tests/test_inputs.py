"""Reading the study's own files: every format gives the same table, every fault a clear error."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from pipeline.centroids import equal_area_crs, inside_points
from pipeline.errors import InputError, StudyError, TableError
from pipeline.inputs import (
    read_brought,
    read_crosswalk,
    read_sites,
    read_zones,
)
from pipeline.records import read_visit_records
from pipeline.study import Study
from pipeline.tables import Routes, TripTable, ZoneTable
from tests.visit_world import make_routes, make_study

SITES = (
    "site_id,site_name,role,lon,lat,fee\n"
    "reserve,Reserve,site,10.5,50.2,4\n"
    "lake,Lake,Substitute,10.6,50.3,0\n"
)
VISITS = "Nr,PLZ,Personen\n1,01001,2\n2,1002,\n3,,3\n"
ZONES = "PLZ,Einwohner,lon,lat\n01001,1000,10.0,50.0\n01002,2000,10.1,50.0\n"
VISIT_COLUMNS = {"record_id": "Nr", "postal_code": "PLZ", "party_size": "Personen"}
ZONE_COLUMNS = {"zone_id": "PLZ", "population": "Einwohner"}


def visits_study(folder: Path, visits: str = VISITS, sites: str = SITES, **keys: Any) -> Study:
    (folder / "sites.csv").write_text(sites, encoding="utf-8")
    (folder / "visits.csv").write_text(visits, encoding="utf-8")
    section = {"file": "visits.csv", "columns": VISIT_COLUMNS, **keys}
    return make_study(folder, visits=section, sites={"file": "sites.csv"})


def zones_study(folder: Path, zones: str = ZONES, **keys: Any) -> Study:
    (folder / "zones.csv").write_text(zones, encoding="utf-8")
    return make_study(folder, zones={"file": "zones.csv", "columns": ZONE_COLUMNS, **keys})


# --- visit records ---------------------------------------------------------------------------


def test_records_with_their_own_column_names_and_the_documented_defaults(tmp_path: Path) -> None:
    records = read_visit_records(visits_study(tmp_path))
    assert records["record_id"].tolist() == ["1", "2", "3"]
    assert records["postal_code_raw"].tolist()[:2] == ["01001", "1002"]
    assert records["postal_code_raw"].isna().tolist() == [False, False, True]
    assert records["site_id"].tolist() == ["reserve"] * 3  # the only one with the role 'site'
    assert records["party_size"].tolist() == pytest.approx([2, np.nan, 3], nan_ok=True)
    assert records["trips"].tolist() == records["weight"].tolist() == [1, 1, 1]


def as_csv(path: Path) -> Path:
    return path


def with_byte_order_mark(path: Path) -> Path:
    path.write_text(VISITS, encoding="utf-8-sig")
    return path


def with_semicolons(path: Path) -> Path:
    path.write_text(VISITS.replace(",", ";"), encoding="utf-8")
    return path


def with_tabs_and_windows_lines(path: Path) -> Path:
    path.write_bytes(VISITS.replace(",", "\t").replace("\n", "\r\n").encode())
    return path


def as_workbook(path: Path) -> Path:
    """Row 2's code is a number in the sheet, as spreadsheets like to have it."""
    frame = pd.DataFrame({"Nr": [1, 2, 3], "PLZ": ["01001", 1002, None], "Personen": [2, None, 3]})
    frame.to_excel(path.with_suffix(".xlsx"), index=False)
    return path.with_suffix(".xlsx")


def as_parquet(path: Path) -> Path:
    frame = pd.DataFrame(
        {"Nr": [1, 2, 3], "PLZ": ["01001", "1002", None], "Personen": [2, None, 3]}
    )
    frame.to_parquet(path.with_suffix(".parquet"))
    return path.with_suffix(".parquet")


@pytest.mark.parametrize(
    "written",
    [
        as_csv,
        with_byte_order_mark,
        with_semicolons,
        with_tabs_and_windows_lines,
        as_workbook,
        as_parquet,
    ],
)
def test_every_format_gives_the_same_table(tmp_path: Path, written: Callable[[Path], Path]) -> None:
    expected = read_visit_records(visits_study(tmp_path))
    path = written(tmp_path / "visits.csv")
    section = {"file": path.name, "columns": VISIT_COLUMNS}
    study = make_study(tmp_path, visits=section, sites={"file": "sites.csv"})
    pd.testing.assert_frame_equal(read_visit_records(study), expected)


def test_codes_stored_as_numbers_come_out_without_a_fraction(tmp_path: Path) -> None:
    study = visits_study(tmp_path)
    frame = pd.DataFrame({"PLZ": [1001.0, np.nan], "Nr": [7.0, 8.0], "Personen": [1, 2]})
    frame.to_parquet(tmp_path / "v.parquet")
    section = {"file": "v.parquet", "columns": VISIT_COLUMNS}
    study = make_study(tmp_path, visits=section, sites={"file": "sites.csv"})
    records = read_visit_records(study)
    assert records["record_id"].tolist() == ["7", "8"]
    assert records.loc[0, "postal_code_raw"] == "1001"


def test_a_sheet_by_its_name(tmp_path: Path) -> None:
    visits_study(tmp_path)
    with pd.ExcelWriter(tmp_path / "v.xlsx") as book:
        pd.DataFrame({"note": ["nothing here"]}).to_excel(book, sheet_name="Info", index=False)
        pd.DataFrame({"PLZ": ["01001"]}).to_excel(book, sheet_name="2023", index=False)
    for sheet, problem in (("2023", None), ("2024", "no sheet '2024'; it has: Info, 2023")):
        section = {"file": "v.xlsx", "sheet": sheet, "columns": {"postal_code": "PLZ"}}
        study = make_study(tmp_path, visits=section, sites={"file": "sites.csv"})
        if problem is None:
            assert read_visit_records(study)["record_id"].tolist() == ["1"]
        else:
            with pytest.raises(TableError, match=problem):
                read_visit_records(study)


def test_blank_lines_are_no_records_but_count_as_rows(tmp_path: Path) -> None:
    study = visits_study(tmp_path, "PLZ,Personen,Nr\n01001,2,a\n,,\n\n01002,0,b\n")
    with pytest.raises(TableError, match=r"'Personen' is not greater than 0.*row 4 \(line 5\)"):
        read_visit_records(study)


@pytest.mark.parametrize(
    ("visits", "message"),
    [
        ("Nr,PLZ,Personen\n", "visits.csv: no visit record"),
        ("", "visits.csv: the file is empty"),
        ("Nr,Plz,Personen\n1,2,3\n", "column 'PLZ' .postal_code: .* is missing.*nearest is 'Plz'"),
        ("PLZ,Personen\n01001,2\n", "column 'Nr' .* is missing"),
        (VISITS + "4,01001,0\n", r"1 value in column 'Personen' is not.*: 0.0 in row 4 \(line 5"),
        (VISITS + "4,01001,two\n", r"'Personen' is no number; first: 'two' in row 4 \(line 5"),
        (VISITS + "4,01001,inf\n", "is no number; first: 'inf'"),
        (VISITS + "2,01001,1\n", r"unique \(Nr\); first: Nr '2' in row 2 .line 3. and in row 4"),
        (VISITS + "4,01001,1,9\n", "not a regular table.*line 5"),
        ("PLZ,PLZ\n1,2\n", "names column 'PLZ' twice"),
    ],
)  # fmt: skip
def test_bad_records_are_named_by_file_row_and_column(
    tmp_path: Path, visits: str, message: str
) -> None:
    with pytest.raises(TableError, match=message) as caught:
        read_visit_records(visits_study(tmp_path, visits))
    assert str(caught.value).startswith("visits.csv: ")


def test_negative_trips_and_weights_are_refused(tmp_path: Path) -> None:
    for column in ("trips", "weight"):
        study = visits_study(tmp_path, f"Nr,PLZ,Personen,{column}\n1,01001,2,-1\n")
        with pytest.raises(TableError, match=f"column '{column}' is below 0; first: -1.0 in row 1"):
            read_visit_records(study)


def test_a_site_that_is_not_in_the_sites_file(tmp_path: Path) -> None:
    study = visits_study(tmp_path, "Nr,PLZ,Personen,site_id\n1,01001,1,lake\n2,01001,1,bog\n")
    with pytest.raises(
        TableError, match=r"1 of 2 records .*site_id 'bog' in row 2 .*reserve, lake"
    ):
        read_visit_records(study)


def test_records_without_a_site_need_a_single_one(tmp_path: Path) -> None:
    study = visits_study(tmp_path, sites=SITES.replace("Substitute", "site"))
    with pytest.raises(TableError, match="column 'site_id'"):
        read_visit_records(study)


def test_another_encoding_is_named_not_guessed(tmp_path: Path) -> None:
    visits_study(tmp_path)
    (tmp_path / "visits.csv").write_bytes("Nr,PLZ,Personen,Ort\n1,01001,2,Köln\n".encode("latin-1"))
    columns = {"columns": VISIT_COLUMNS, "file": "visits.csv"}
    sites = {"file": "sites.csv"}
    with pytest.raises(TableError, match=r'not text in utf-8 near line 2 .*encoding = "latin-1"'):
        read_visit_records(make_study(tmp_path, visits=columns, sites=sites))
    study = make_study(tmp_path, visits={**columns, "encoding": "latin-1"}, sites=sites)
    assert len(read_visit_records(study)) == 1
    study = make_study(tmp_path, visits={**columns, "encoding": "klingon"}, sites=sites)
    with pytest.raises(TableError, match="no encoding 'klingon'"):
        read_visit_records(study)


def test_a_decimal_comma_belongs_to_semicolons(tmp_path: Path) -> None:
    study = visits_study(tmp_path, "Nr;PLZ;Personen\n1;01001;2,5\n")
    assert read_visit_records(study)["party_size"].tolist() == [2.5]
    study = visits_study(tmp_path, 'Nr,PLZ,Personen\n1,01001,"2,5"\n')
    with pytest.raises(TableError, match="no number; first: '2,5'"):
        read_visit_records(study)


@pytest.mark.parametrize("name", ["visits.docx", "visits.xlsx", "visits.parquet", "visits.gpkg"])
def test_a_file_that_is_not_what_its_name_says(tmp_path: Path, name: str) -> None:
    visits_study(tmp_path)
    (tmp_path / name).write_bytes(b"neither fish nor fowl")
    study = make_study(tmp_path, visits={"file": name}, sites={"file": "sites.csv"})
    with pytest.raises(InputError, match=f"{name}: "):
        read_visit_records(study)


def test_a_section_without_a_file() -> None:
    with pytest.raises(StudyError, match=r"\[zones\] file is needed"):
        read_zones(make_study())


@given(st.lists(st.text("0123456789ABC -", min_size=1, max_size=8), min_size=1, max_size=8))
@settings(
    derandomize=True,
    max_examples=40,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
def test_codes_survive_the_file_as_they_are(tmp_path: Path, codes: list[str]) -> None:
    """Only spaces at the ends go; zeros, hyphens and 'E's stay."""
    frame = pd.DataFrame({"Nr": range(len(codes)), "PLZ": codes, "Personen": 1})
    study = visits_study(tmp_path, frame.to_csv(index=False))
    read = read_visit_records(study)["postal_code_raw"]
    assert read.fillna("").tolist() == [code.strip() for code in codes]


# --- zones -----------------------------------------------------------------------------------


def test_zones_with_points(tmp_path: Path) -> None:
    zones = read_zones(zones_study(tmp_path))
    assert zones.crs == "EPSG:4326"
    assert zones["zone_id"].tolist() == zones["postal_code"].tolist() == ["01001", "01002"]
    assert zones["zone_name"].tolist() == ["01001", "01002"]
    assert zones["household_income"].isna().all()
    assert zones["centroid_source"].tolist() == ["given", "given"]
    assert zones.geometry.x.tolist() == zones["lon"].tolist() == [10.0, 10.1]


SQUARE = shapely.box(0, 0, 4000, 4000)
HORSESHOE = SQUARE.difference(shapely.box(500, 500, 3500, 4000))


def centroids_inside(zones: gpd.GeoDataFrame) -> bool:
    points = gpd.GeoSeries(gpd.points_from_xy(zones["lon"], zones["lat"], crs=zones.crs))
    return bool(zones.geometry.contains(points).all())


def polygon_zones(**columns: Any) -> gpd.GeoDataFrame:
    """A square of 4 km, and a horseshoe whose centroid lies outside it, in UTM zone 32."""
    shapes = [
        shapely.transform(s, lambda xy: np.add(xy, (500_000, 5_540_000)))
        for s in (SQUARE, HORSESHOE)
    ]
    shapes[1] = shapely.transform(shapes[1], lambda xy: np.add(xy, (4000, 0)))
    frame = {"PLZ": ["01001", "01002"], "Einwohner": [1000, 2000], **columns}
    return gpd.GeoDataFrame(frame, geometry=shapes, crs="EPSG:32632")


@pytest.mark.parametrize("name", ["z.gpkg", "z.shp", "z.geojson", "z.fgb", "z.parquet"])
def test_every_layer_gives_the_same_zones(tmp_path: Path, name: str) -> None:
    layer = polygon_zones()
    if name.endswith("parquet"):
        layer.to_parquet(tmp_path / name)
    elif name.endswith("geojson"):
        layer.to_crs("EPSG:4326").to_file(tmp_path / name)
    else:
        layer.to_file(tmp_path / name)
    study = make_study(tmp_path, zones={"file": name, "columns": ZONE_COLUMNS})
    zones = read_zones(study).sort_values("zone_id", ignore_index=True)
    assert zones.crs == "EPSG:4326"
    assert zones["zone_id"].tolist() == ["01001", "01002"]
    assert zones["centroid_source"].tolist() == ["inside_polygon"] * 2
    assert centroids_inside(zones)
    expected = layer.to_crs("EPSG:4326").geometry
    same = zones.geometry.normalize().geom_equals_exact(expected.normalize(), tolerance=1e-6)
    assert same.all()
    assert not zones.geometry.iloc[1].contains(expected.iloc[1].centroid)


def test_given_centroids_come_first_and_gaps_are_filled(tmp_path: Path) -> None:
    layer = polygon_zones(lon=[9.01, np.nan], lat=[50.02, np.nan])
    layer.to_file(tmp_path / "z.gpkg")
    study = make_study(tmp_path, zones={"file": "z.gpkg", "columns": ZONE_COLUMNS})
    zones = read_zones(study)
    assert zones["centroid_source"].tolist() == ["given", "inside_polygon"]
    assert zones["lon"].iloc[0] == 9.01


def test_a_layer_of_points(tmp_path: Path) -> None:
    layer = polygon_zones()
    points = layer.set_geometry(layer.representative_point())
    points.to_file(tmp_path / "z.gpkg")
    study = make_study(tmp_path, zones={"file": "z.gpkg", "columns": ZONE_COLUMNS})
    zones = read_zones(study)
    assert zones["centroid_source"].tolist() == ["given", "given"]
    expected = points.to_crs("EPSG:4326").geometry.x.to_list()
    assert zones["lon"].tolist() == pytest.approx(expected)


def test_a_layer_without_crs_is_refused(tmp_path: Path) -> None:
    polygon_zones().to_file(tmp_path / "z.shp")
    (tmp_path / "z.prj").unlink()
    study = make_study(tmp_path, zones={"file": "z.shp", "columns": ZONE_COLUMNS})
    with pytest.raises(TableError, match=r"z\.shp: .*coordinate reference system"):
        read_zones(study)


def test_a_layer_of_lines_and_an_empty_geometry_are_refused(tmp_path: Path) -> None:
    layer = polygon_zones()
    layer.set_geometry(layer.boundary).to_file(tmp_path / "lines.gpkg")
    layer.loc[1, "geometry"] = None
    layer.to_file(tmp_path / "none.gpkg")
    for name, message in (
        ("lines.gpkg", "2 of 2 features are neither point nor polygon"),
        ("none.gpkg", "1 of 2 features are without a geometry; first: in row 2"),
    ):
        study = make_study(tmp_path, zones={"file": name, "columns": ZONE_COLUMNS})
        with pytest.raises(TableError, match=message):
            read_zones(study)


def test_one_layer_of_several(tmp_path: Path) -> None:
    polygon_zones().to_file(tmp_path / "z.gpkg", layer="zones")
    polygon_zones().to_file(tmp_path / "z.gpkg", layer="old")
    for layer, message in ((None, "several layers"), ("new", "no layer 'new'"), ("zones", None)):
        keys = {"file": "z.gpkg", "columns": ZONE_COLUMNS, "layer": layer}
        study = make_study(tmp_path, zones=keys)
        if message is None:
            assert len(read_zones(study)) == 2
        else:
            with pytest.raises(TableError, match=message):
                read_zones(study)


def test_a_polygon_that_crosses_itself_is_repaired(tmp_path: Path) -> None:
    """A bow tie: two triangles that share a corner."""
    bow = shapely.Polygon([(9, 50), (9.1, 50.1), (9.1, 50), (9, 50.1)])
    layer = gpd.GeoDataFrame({"PLZ": ["1"], "Einwohner": [5]}, geometry=[bow], crs="EPSG:4326")
    layer.to_file(tmp_path / "z.gpkg")
    zones = read_zones(make_study(tmp_path, zones={"file": "z.gpkg", "columns": ZONE_COLUMNS}))
    assert zones.geometry.is_valid.all()
    assert centroids_inside(zones)


def test_points_inside_are_found_across_the_date_line() -> None:
    """Two zones, at 179° E and 179° W: their middle is at 180°, not at Greenwich."""
    shapes = gpd.GeoSeries(
        [shapely.box(178.5, -17, 179.5, -16), shapely.box(-179.5, -17, -178.5, -16)],
        crs="EPSG:4326",
    )
    operation = equal_area_crs(shapes).coordinate_operation
    assert operation is not None
    middle = {value.name: float(value.value) for value in operation.params}
    assert abs(middle["Longitude of natural origin"]) == pytest.approx(180)
    assert middle["Latitude of natural origin"] == pytest.approx(-16.5, abs=0.01)
    assert shapes.contains(inside_points(shapes)).all()


@pytest.mark.parametrize(
    ("zones", "message"),
    [
        (ZONES.replace("2000", "-5"), r"'Einwohner' is below 0; first: -5.0 in row 2 \(line 3\)"),
        (ZONES.replace("2000", "many"), "column 'Einwohner' is no number; first: 'many' in row 2"),
        (ZONES.replace("2000", ""), "column 'Einwohner' is missing; first: in row 2"),
        (ZONES + "01001,5,10,50\n", r"unique \(PLZ\); first: PLZ '01001' in row 1 .* in row 3"),
        (ZONES.replace("50.0", "95"), "column 'lat' are above 90; first: 95.0 in row 1"),
        (ZONES.replace("lon", "x"), "column 'lon' .* is missing"),
        ("PLZ,Einwohner,lon,lat\n", "no zone"),
    ],
)
def test_bad_zones_are_named_by_file_row_and_column(
    tmp_path: Path, zones: str, message: str
) -> None:
    with pytest.raises(TableError, match=message) as caught:
        read_zones(zones_study(tmp_path, zones))
    assert str(caught.value).startswith("zones.csv: ")


def test_covariates_are_numbers_under_their_own_names(tmp_path: Path) -> None:
    zones = ZONES.replace("lat\n", "lat,cars\n").replace("50.0\n", "50.0,7\n")
    assert read_zones(zones_study(tmp_path, zones, covariates=["cars"]))["cars"].tolist() == [7, 7]
    with pytest.raises(TableError, match=r"'shops' \(named in \[zones\] covariates\) is missing"):
        read_zones(zones_study(tmp_path, zones, covariates=["shops"]))
    with pytest.raises(TableError, match="column 'cars' is no number; first: 'few' in row 2"):
        read_zones(zones_study(tmp_path, zones[:-2] + "few\n", covariates=["cars"]))
    with pytest.raises(StudyError, match="'population' is a column of our own"):
        read_zones(zones_study(tmp_path, zones, covariates=["population"]))


# --- crosswalk, sites ------------------------------------------------------------------------


def test_crosswalk(tmp_path: Path) -> None:
    (tmp_path / "c.csv").write_text("box,PLZ\n00900,01001\n")
    columns = {"postal_code": "box", "zone_id": "PLZ"}
    study = make_study(tmp_path, visits={"crosswalk": "c.csv", "crosswalk_columns": columns})
    crosswalk = read_crosswalk(study)
    assert crosswalk is not None
    assert crosswalk.to_dict("records") == [{"postal_code": "00900", "zone_id": "01001"}]
    assert read_crosswalk(make_study()) is None


def test_sites_and_the_documented_defaults(tmp_path: Path) -> None:
    (tmp_path / "s.csv").write_text("site_id,lon,lat\nfen,1,2\nfen,3,4\nbog,5,6\n")
    sites = read_sites(make_study(tmp_path, sites={"file": "s.csv"}))
    assert sites["access_id"].tolist() == ["1", "2", "1"]
    assert sites["site_name"].tolist() == ["fen", "fen", "bog"]
    assert sites["role"].tolist() == ["site"] * 3
    assert sites["fee"].tolist() == [0, 0, 0]


@pytest.mark.parametrize(
    ("sites", "message"),
    [
        ("site_id,lon,lat,role\na,1,2,park\n", "column 'role' is not one of 'site', 'substitute'"),
        ("site_id,lon,lat,role\na,1,2,substitute\n", "no row has the role 'site'"),
        ("site_id,lon,lat,role\na,1,2,site\na,1,2,substitute\n", "'a' is both"),
        ("site_id,lon,lat,fee\na,1,2,-1\n", "column 'fee' is below 0"),
        ("site_id,lon,lat,access_id\na,1,2,g\na,1,2,g\n", "site_id 'a', access_id 'g'"),
        ("site_id,lon,lat\n,1,2\n", "column 'site_id' is missing; first: in row 1"),
    ],
)
def test_bad_sites(tmp_path: Path, sites: str, message: str) -> None:
    (tmp_path / "s.csv").write_text(sites)
    with pytest.raises(TableError, match=message):
        read_sites(make_study(tmp_path, sites={"file": "s.csv"}))


# --- brought tables --------------------------------------------------------------------------


def test_a_zone_table_needs_only_five_columns(tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    path.write_text(
        "zone_id,site_id,population,visits,travel_cost,cars,area_code,in_market\n"
        "007,1,1000,400,0,3,01,true\n008,1,2000,400,,4,02,No\n"
    )
    table = read_brought(ZoneTable, path)
    assert table["zone_id"].tolist() == ["007", "008"]
    assert table["site_id"].tolist() == ["1", "1"]
    assert table["cars"].tolist() == [3, 4]
    assert table["area_code"].tolist() == ["01", "02"]
    assert table["in_market"].tolist() == [True, False]
    table.to_parquet(tmp_path / "table.parquet")
    pd.testing.assert_frame_equal(read_brought(ZoneTable, tmp_path / "table.parquet"), table)


def test_brought_routes_come_back_as_they_were(tmp_path: Path) -> None:
    routes = make_routes()
    routes.to_csv(tmp_path / "routes.csv", index=False)
    pd.testing.assert_frame_equal(read_brought(Routes, tmp_path / "routes.csv"), routes)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("zone_id,site_id,population,visits\n1,a,1,1\n", "t.csv: column 'travel_cost' is missing"),
        ("zone_id,site_id,population,visits,travel_cost\n1,a,x,1,1\n",
         r"t.csv: .*'population' is no number; first: 'x' in row 1 \(line 2\)"),
        ("zone_id,site_id,population,visits,travel_cost\n1,a,1,-1,1\n", "t.csv: .*'visits' is"),
        ("zone_id,site_id,population,visits,travel_cost,in_market\n1,a,1,1,1,maybe\n",
         "'in_market' are neither true nor false; first: 'maybe'"),
        ("zone_id,site_id,population,visits,travel_cost\n", "t.csv: the table has no row"),
    ],
)  # fmt: skip
def test_bad_brought_tables(tmp_path: Path, text: str, message: str) -> None:
    (tmp_path / "t.csv").write_text(text)
    with pytest.raises(TableError, match=message):
        read_brought(ZoneTable, tmp_path / "t.csv")


def test_a_brought_table_is_csv_or_parquet(tmp_path: Path) -> None:
    (tmp_path / "t.xlsx").write_bytes(b"")
    with pytest.raises(InputError, match="trip_table is read from CSV or Parquet"):
        read_brought(TripTable, tmp_path / "t.xlsx")
