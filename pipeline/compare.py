"""Two runs side by side: inputs, assumptions, values, and a map of differences.

It reads what two runs have published, nothing else, and makes one HTML page.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.errors import PublishError
from pipeline.publish.differences import difference_map
from pipeline.publish.markup import Html, join, table, tag
from pipeline.publish.report import plain_page
from pipeline.publish.words import figure, interval, is_known, number, percent

KEYS = ["zone_id", "site_id"]
COMPARED = ("travel_cost", "visits", "visits_per_1000", "distance_km", "drive_time_min")


@dataclass(frozen=True)
class PublishedRun:
    """What a finished run left in its output folder."""

    folder: Path
    manifest: dict[str, Any]
    zones: gpd.GeoDataFrame | None
    table: pd.DataFrame | None

    @property
    def title(self) -> str:
        """Title of the study."""
        return str(self.manifest["study"]["title"])


def read_run(folder: Path) -> PublishedRun:
    """Read a run's output folder, or that of the study whose folder is given.

    Raises
    ------
    PublishError
        There is no finished run.
    """
    found = [place for place in (folder, folder / "output") if (place / "run.json").is_file()]
    if not found:
        raise PublishError(
            f"{folder} holds no finished run (no run.json there or in output/); run the study "
            "first, or name its folder or its output folder."
        )
    place = found[0]
    manifest = json.loads((place / "run.json").read_text(encoding="utf-8"))
    zones, rows = place / "geoparquet" / "zones.parquet", place / "tables" / "zone_table.parquet"
    return PublishedRun(
        folder=place,
        manifest=manifest,
        zones=gpd.read_parquet(zones) if zones.is_file() else None,
        table=pd.read_parquet(rows) if rows.is_file() else None,
    )


def compare_runs(a: PublishedRun, b: PublishedRun) -> str:
    """One page: what differs between two runs, and by how much."""
    parts = [
        tag("p", "Two runs side by side", class_="kind"),
        tag("h1", a.title if a.title == b.title else f"{a.title} / {b.title}"),
        tag("p", f"A: {a.folder}", tag("br"), f"B: {b.folder}"),
        _section("Values", _values(a, b)),
        _section("Assumptions that differ", _settings(a, b)),
        _section("Inputs", _inputs(a, b)),
        _section("Zones", _zones(a, b)),
    ]
    return plain_page(f"{a.title}: two runs", join(parts))


def _section(title: str, *body: object) -> Html:
    return join([tag("h2", title), *body])


def _values(a: PublishedRun, b: PublishedRun) -> Html:
    """Headline values of every site that either run has."""
    of_a, of_b = _headlines(a), _headlines(b)
    currencies = [run.manifest["study"]["currency"] for run in (a, b)]
    rows: list[tuple[object, ...]] = []
    for site_id in dict.fromkeys([*of_a, *of_b]):
        for measure, words in (("annual_surplus", "a year"), ("surplus_per_trip", "per visit")):
            pair = [(of.get(site_id) or {}).get(measure) for of in (of_a, of_b)]
            name = (of_a.get(site_id) or of_b[site_id])["site_name"]
            cells = [
                _money(value, currency) for value, currency in zip(pair, currencies, strict=True)
            ]
            rows.append((f"{name}, {words}", *cells, _change(pair, currencies)))
    head = ("Value", "A", "B", "B against A")
    return table(head, rows, caption="Values with their intervals", numbers=(1, 2, 3))


def _headlines(run: PublishedRun) -> dict[str, dict[str, Any]]:
    return {headline["site_id"]: headline for headline in run.manifest["headline"]}


def _money(value: dict[str, Any] | None, currency: str) -> object:
    if value is None or value["value"] is None:
        return "–"
    amounts = [np.nan if value[k] is None else value[k] for k in ("value", "ci_low", "ci_high")]
    ends = interval(amounts[1], amounts[2], amounts[0])
    return join([f"{currency} {figure(*amounts)}", tag("small", f"({ends})")])


def _change(pair: list[dict[str, Any] | None], currencies: list[str]) -> str:
    values = [None if item is None else item["value"] for item in pair]
    if not is_known(*values) or currencies[0] != currencies[1] or not values[0]:
        return "–"
    change = float(values[1] or 0) / float(values[0]) - 1
    sign = "+" if change >= 0 else "−"
    return "no change" if change == 0 else f"{sign}{percent(abs(change))}"


def _settings(a: PublishedRun, b: PublishedRun) -> Html:
    """Every setting that is not the same in both."""
    of_a, of_b = (dict(_flat(run.manifest["settings"])) for run in (a, b))
    rows = [
        (tag("code", key), _shown(of_a.get(key)), _shown(of_b.get(key)))
        for key in dict.fromkeys([*of_a, *of_b])
        if of_a.get(key) != of_b.get(key)
    ]
    if not rows:
        return tag("p", "All settings are the same.")
    return table(("Setting", "A", "B"), rows, caption="Settings that differ")


def _flat(settings: Any, prefix: str = "") -> list[tuple[str, Any]]:
    if isinstance(settings, dict):
        return [pair for key, value in settings.items() for pair in _flat(value, f"{prefix}{key}.")]
    return [(prefix.rstrip("."), settings)]


def _shown(value: Any) -> str:
    if isinstance(value, list):
        return ", ".join(str(item) for item in value) or "none"
    return "none" if value is None else str(value)


def _inputs(a: PublishedRun, b: PublishedRun) -> Html:
    of_a, of_b = ({file["role"]: file for file in run.manifest["inputs"]} for run in (a, b))
    rows = []
    for role in dict.fromkeys([*of_a, *of_b]):
        pair = [of.get(role, {}) for of in (of_a, of_b)]
        same = pair[0].get("sha256") == pair[1].get("sha256")
        names = [file.get("name", "–") for file in pair]
        rows.append((role, *names, "same" if same else "differs"))
    return table(("Input", "A", "B", "Content"), rows, caption="Input files by digest")


def _zones(a: PublishedRun, b: PublishedRun) -> Html:
    """Differences of the zones both runs have, as figures and as a map."""
    if a.table is None or b.table is None:
        return tag("p", "At least one of the runs has no table of zones.")
    both = a.table.merge(b.table, on=KEYS, suffixes=("_a", "_b"), validate="one_to_one")
    alone = len(a.table) + len(b.table) - 2 * len(both)
    rows = []
    for column in COMPARED:
        if f"{column}_a" in both:
            change = (both[f"{column}_b"] - both[f"{column}_a"]).dropna()
            moved = int((change.abs() > 1e-9).sum())
            rows.append((column, moved, *(number(change.quantile(q)) for q in (0, 0.5, 1))))
    words = f"{len(both):,} rows are in both runs; {alone:,} in one only."
    head = ("Column", "Rows that changed", "Least change", "Median", "Greatest")
    grid = table(head, rows, caption="Change from A to B", numbers=range(1, 5))
    maps = [
        difference_map(a.zones, both[both["site_id"] == site], column, site)
        for site in dict.fromkeys(both["site_id"])
        for column in ("travel_cost", "visits_per_1000")
        if a.zones is not None
    ]
    return join([tag("p", words), grid, *maps])
