"""Puts the figures of a published table beside the columns of a layer that somebody already has."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

import geopandas as gpd
import pandas as pd

from pipeline.errors import PipelineError, PublishError

KEY = "zone_id"


def add_to_layer(layer: gpd.GeoDataFrame, table: pd.DataFrame, *, key: str) -> gpd.GeoDataFrame:
    """The layer with the table's columns; a column that both have gets the ending `_study`.

    Parameters
    ----------
    layer : any layer with the zones' identifiers, as text, in `key`.
    table : a published table with one row per zone (of one site).

    Raises
    ------
    PublishError
        The layer has no such column, it is not text, several rows have a zone, or none matches.
    """
    if key not in layer:
        raise PublishError(f"the layer has no column {key!r}; it has: {', '.join(layer.columns)}.")
    if table[KEY].duplicated().any():
        twice = table.loc[table[KEY].duplicated(), KEY].iloc[0]
        raise PublishError(
            f"zone {twice!r} has several rows in the table (one per site); keep one site's rows."
        )
    if pd.api.types.is_numeric_dtype(layer[key]):
        raise PublishError(
            f"column {key!r} of the layer holds numbers, so leading zeros are lost there; make it "
            "text first, for example: printf('%05d', code) in the layer's own software."
        )
    matched = int(layer[key].isin(table[KEY]).sum())
    if not matched:
        raise PublishError(
            f"no {key!r} of the layer is a zone of the table (first in the layer: "
            f"{layer[key].iloc[0]!r}, in the table: {table[KEY].iloc[0]!r})."
        )
    shown = table.rename(columns={KEY: key})
    joined = layer.merge(shown, on=key, how="left", suffixes=("", "_study"), validate="m:1")
    return gpd.GeoDataFrame(joined, geometry=layer.geometry.name, crs=layer.crs)


def main(arguments: list[str] | None = None) -> int:
    """Join a table into a layer and write a new GeoPackage; return the exit code."""
    parser = argparse.ArgumentParser(prog="python -m pipeline.publish.addto", description=__doc__)
    parser.add_argument("table", type=Path, help="a published table: tables/zone_table.csv")
    parser.add_argument("file", type=Path, help="the file that holds your layer")
    parser.add_argument("layer", help="the layer's name")
    parser.add_argument("key", help="its column with the zones' identifiers")
    parser.add_argument("to", type=Path, help="the GeoPackage to write")
    parser.add_argument("--site", help="the site whose rows to take, where there are several")
    options = parser.parse_args(arguments)
    try:
        table = pd.read_csv(options.table, dtype={KEY: "str", "site_id": "str"})
        if options.site:
            table = table[table["site_id"] == options.site]
        layer = gpd.read_file(options.file, layer=options.layer)
        joined = add_to_layer(layer, table, key=options.key)
    except (PipelineError, OSError, ValueError) as error:
        print(f"error: {error}", file=sys.stderr)
        return 1
    joined.to_file(options.to, layer=options.layer, driver="GPKG")
    rows = int(layer[options.key].isin(table[KEY]).sum())
    print(f"wrote {options.to}: {len(joined):,} rows, {rows:,} with figures")
    return 0


if __name__ == "__main__":
    sys.exit(main())
