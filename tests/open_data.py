"""Open data that some tests read and no part of the project holds.

They are looked for in the folder that the environment variable ROADWORTH_OPEN_DATA names, or in
a folder ``shared/data`` beside the checkout; tests that need them are skipped without.
"""

from __future__ import annotations

import os
from pathlib import Path

FOLDER = Path(os.environ.get("ROADWORTH_OPEN_DATA", Path(__file__).parents[2] / "shared" / "data"))
OHIO_ZIPS = FOLDER / "tables" / "ohio_zip_population_income.csv"
"""ZIP codes of Ohio with point, population and household income (US Census Bureau)."""
ICELAND_CODES = FOLDER / "tables" / "iceland_postcode_points.csv"
"""Postal codes of Iceland with the mean of their addresses (open address registry)."""
COLUMBUS_ROADS = FOLDER / "osm" / "columbus_ohio.osm.pbf"
"""Roads in and around Columbus, Ohio (OpenStreetMap, ODbL 1.0)."""
MISSING = "needs open data beside the checkout, or in the folder that ROADWORTH_OPEN_DATA names"
