"""Zones, visit records and roads for the walk in docs/new_site.md: the small study's, invented."""

from __future__ import annotations

import sys
from pathlib import Path

from tests.ministudy import visits, write_roads, zones


def write_files(folder: Path) -> None:
    """Write zones.csv, visits.csv and roads.osm.pbf under the names that a new study expects."""
    zones().rename(columns={"code": "postal_code"}).to_csv(folder / "zones.csv", index=False)
    names = {"permit": "record_id", "home": "postal_code", "people": "party_size"}
    records = visits().rename(columns=names).assign(site_id="shore")
    records.to_csv(folder / "visits.csv", index=False)
    write_roads(folder / "roads.osm.pbf")


if __name__ == "__main__":
    write_files(Path(sys.argv[1]))
