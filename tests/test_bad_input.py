"""Bad input: one clear line, exit code 1, and nothing published.

Each case spoils one thing of a whole study (see ``ministudy``) and runs the command line.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable
from pathlib import Path
from typing import Any

import geopandas as gpd
import pandas as pd
import pytest

from pipeline.__main__ import main
from tests.ministudy import sites, visits, write_ministudy, zones

Spoil = Callable[[Path], None]


def missing_column(folder: Path) -> None:
    visits().drop(columns="home").to_csv(folder / "visits.csv", index=False)


def wrong_type(folder: Path) -> None:
    frame = zones().astype({"population": object})
    frame.loc[4, "population"] = "many"
    frame.to_csv(folder / "zones.csv", index=False)


def duplicate_zone(folder: Path) -> None:
    frame = zones()
    frame.loc[3, "zone_id"] = "01"
    frame.to_csv(folder / "zones.csv", index=False)


def negative_population(folder: Path) -> None:
    frame = zones()
    frame.loc[6, "population"] = -5
    frame.to_csv(folder / "zones.csv", index=False)


def site_outside_the_extract(folder: Path) -> None:
    frame = sites()
    frame.loc[0, "lon"] = 12.5
    frame.to_csv(folder / "sites.csv", index=False)


def truncated_pbf(folder: Path) -> None:
    path = folder / "roads.osm.pbf"
    content = path.read_bytes()
    path.write_bytes(content[: len(content) - 40])


def empty_visits(folder: Path) -> None:
    visits().head(0).to_csv(folder / "visits.csv", index=False)


def empty_file(folder: Path) -> None:
    (folder / "visits.csv").write_bytes(b"")


def unknown_key(folder: Path) -> None:
    path = folder / "mini.toml"
    path.write_text(path.read_text().replace("wage_fraction", "wage_share"))


def zones_without_crs(folder: Path) -> None:
    frame = zones()
    points = gpd.points_from_xy(frame.pop("lon"), frame.pop("lat"))
    layer = gpd.GeoDataFrame(frame, geometry=points.buffer(0.02))
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="'crs' was not provided")
        layer.to_file(folder / "zones.gpkg")
    path = folder / "mini.toml"
    path.write_text(path.read_text().replace("zones.csv", "zones.gpkg"))


def party_size_zero(folder: Path) -> None:
    frame = visits()
    frame.loc[7, "people"] = 0
    frame.to_csv(folder / "visits.csv", index=False)


def visits_to_an_unknown_site(folder: Path) -> None:
    visits().assign(site_id="bog").to_csv(folder / "visits.csv", index=False)


def mostly_unknown_codes(folder: Path) -> None:
    visits().assign(home="999Z").to_csv(folder / "visits.csv", index=False)


def _with_columns(folder: Path, columns: str, **values: list[Any]) -> None:
    """Visit records with further columns, named in the study file."""
    visits().assign(**values).to_csv(folder / "visits.csv", index=False)
    path = folder / "mini.toml"
    text = path.read_text()
    path.write_text(text.replace("[visits.columns]\n", f"[visits.columns]\n{columns}\n"))


def _with_costs(folder: Path, lines: str) -> None:
    path = folder / "mini.toml"
    path.write_text(path.read_text().replace("[costs]\n", f"[costs]\n{lines}\n"))


def purpose_share_over_one(folder: Path) -> None:
    share = [1.0] * len(visits())
    share[4] = 1.2
    _with_columns(folder, 'purpose_share = "ours"', ours=share)


def weights_of_nothing(folder: Path) -> None:
    visits().assign(weight=0.0).to_csv(folder / "visits.csv", index=False)


def unknown_vehicle(folder: Path) -> None:
    cars = ["petrol"] * len(visits())
    cars[5] = "tractor"
    _with_columns(folder, 'vehicle = "car"', car=cars)
    path = folder / "mini.toml"
    text = path.read_text().replace("vehicle_cost_per_km = 0.2\n", "energy_prices.oil = 1.6\n")
    path.write_text(
        f'{text}\n[costs.vehicles.petrol]\nenergy = "oil"\nconsumption_per_100km = 7.0\n'
    )


def negative_fare(folder: Path) -> None:
    _with_costs(folder, "ferry_fare_per_person = -2.0")


def missing_index_year(folder: Path) -> None:
    _with_costs(folder, "price_years = { vehicle_cost_per_km = 2019 }\nprice_index = { 2025 = 1 }")


CASES: list[tuple[Spoil, tuple[str, ...]]] = [
    (missing_column, ("visits.csv", "home", "postal_code")),
    (wrong_type, ("zones.csv", "population", "many", "row 5")),
    (duplicate_zone, ("zones.csv", "zone_id", "01")),
    (negative_population, ("zones.csv", "population", "-5", "row 7")),
    (site_outside_the_extract, ("fen", "km")),
    (truncated_pbf, ("roads.osm.pbf",)),
    (empty_visits, ("visits.csv", "no ")),
    (empty_file, ("visits.csv",)),
    (unknown_key, ("mini.toml", "wage_share", "wage_fraction")),
    (zones_without_crs, ("zones.gpkg", "coordinate reference system")),
    (party_size_zero, ("visits.csv", "people", "row 8")),
    (visits_to_an_unknown_site, ("bog",)),
    (purpose_share_over_one, ("visits.csv", "ours", "1.2", "row 5")),
    (weights_of_nothing, ("visits.csv", "weight", "sum to nothing", "row 1")),
    (unknown_vehicle, ("tractor", "vehicle", "row 6")),
    (negative_fare, ("mini.toml", "ferry_fare_per_person", "-2")),
    (missing_index_year, ("vehicle_cost_per_km", "2019", "price_index")),
    (mostly_unknown_codes, ("999Z", "max_unmatched_share")),
]


@pytest.mark.parametrize(
    ("spoil", "words"),
    [pytest.param(spoil, words, id=spoil.__name__) for spoil, words in CASES],
)
def test_one_clear_line_and_nothing_published(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], spoil: Spoil, words: tuple[str, ...]
) -> None:
    study = write_ministudy(tmp_path)
    spoil(tmp_path)
    assert main(["all", str(study)]) == 1
    said = capsys.readouterr().err
    assert said.startswith("error: ")
    assert said.rstrip("\n").count("\n") == 0, said
    for word in words:
        assert word in said
    assert not (tmp_path / "mini" / "output").exists()


def test_the_same_study_unspoiled_is_published(tmp_path: Path) -> None:
    study = write_ministudy(tmp_path)
    assert main(["all", str(study)]) == 0
    assert (tmp_path / "mini" / "output" / "report.html").is_file()
    assert len(pd.read_csv(tmp_path / "mini" / "output" / "tables" / "zone_table.csv")) == 12
