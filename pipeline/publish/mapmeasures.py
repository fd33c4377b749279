"""The measures that a site's map can show, with their classes, and every zone's row in words."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.publish.classes import Classes, quantile_classes
from pipeline.publish.privacy import REASON
from pipeline.publish.results import Results
from pipeline.publish.words import number

MOST_ROWS = 20_000
"""Zones whose rows are written into the page for the map; more would make it heavy."""
ZONE_HEAD = (
    ("visits_per_1000", "Visits per 1,000"),
    ("visits", "Visits a year"),
    ("sampled_records", "Visit records"),
    ("sampled_visits", "Visits in the records"),
    ("population", "People"),
    ("household_income", "Household income"),
    ("travel_cost", "Travel cost"),
    ("distance_km", "Distance, km"),
    ("drive_time_min", "Drive, min"),
    ("annual_surplus", "Surplus a year"),
)


@dataclass(frozen=True)
class Measure:
    """One measure of a map: its figures, their classes, and words for the legend."""

    column: str
    title: str
    short: str
    zero: str
    missing: str
    values: npt.NDArray[np.float64]
    classes: Classes

    @property
    def places(self) -> npt.NDArray[np.int64]:
        """Class of every zone: −1 zero, −2 missing."""
        return self.classes.of(self.values)

    def letters(self) -> str:
        """One letter per zone: the colour of its class, z for zero, n for no figure."""
        colours = [colour_of(k, len(self.classes)) for k in range(len(self.classes))]
        letters = np.array([*(str(colour) for colour in colours), "n", "z"])
        return "".join(letters[self.places])


@dataclass(frozen=True)
class MapFigures:
    """Everything that the map of one site can show; zones in the order of the drawing."""

    site_id: str
    measures: tuple[Measure, ...]
    outside: npt.NDArray[np.bool_]
    names: Sequence[str]
    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...] | None

    def page_data(self) -> dict[str, Any]:
        """What the page's script needs to switch measures and to show a zone's row."""
        return {
            "measures": {
                m.column: {"title": m.title, "classes": m.letters()} for m in self.measures
            },
            "names": list(self.names) if self.rows is not None else [],
            "heads": list(self.heads),
            "rows": self.rows,
        }


def colour_of(place: int, total: int) -> int:
    """A class's colour out of five, spread when there are fewer classes."""
    return round(place * 4 / max(1, total - 1)) if total > 1 else 3


def map_figures(
    results: Results, site_id: str, figures: pd.DataFrame, names: dict[str, str]
) -> MapFigures:
    """Measures and rows of one site.

    Parameters
    ----------
    figures : the finished table's rows of the site, with surplus.
    names : name to show of every zone, in the order of the drawing.
    """
    rows = figures.set_index("zone_id").reindex(list(names))
    shown = [(column, words) for column, words in ZONE_HEAD if column in rows]
    listed = None
    if len(rows) * len(results.headlines) <= MOST_ROWS:
        columns = [[number(value, 4) for value in rows[column]] for column, _ in shown]
        listed = tuple(zip(*columns, strict=True))
    return MapFigures(
        site_id=site_id,
        measures=tuple(_measures(results, site_id, rows)),
        outside=_outside(rows),
        names=list(names.values()),
        heads=tuple(words for _, words in shown),
        rows=listed,
    )


def _measures(results: Results, site_id: str, rows: pd.DataFrame) -> list[Measure]:
    """Those that have a figure at all; the visit rate always, first."""
    money, name = results.currency, results.site_name(site_id)
    whose = results.visitor
    known = (
        ("visits_per_1000", "Visit rate", "Visits per 1,000 people and year", "no visit recorded"),
        ("travel_cost", "Travel cost", f"Travel cost, {money} per {whose} and trip", "none"),
        ("annual_surplus", "Surplus", f"Surplus a year, {money}", "none"),
        ("sampled_records", "Records", "Visit records", "no visit recorded"),
        (
            "sampled_visits",
            "Origin count",
            f"{whose.capitalize()}-visits in the records",
            "no visit recorded",
        ),
    )
    return [
        Measure(
            column=column,
            title=f"{title}: {name}",
            short=short,
            zero=zero,
            missing=_missing_words(rows, column),
            values=rows[column].to_numpy(dtype=np.float64),
            classes=quantile_classes(rows[column].to_numpy(dtype=np.float64)),
        )
        for column, short, title, zero in known
        if column in rows and (rows[column].notna().any() or column == "visits_per_1000")
    ]


def _missing_words(rows: pd.DataFrame, column: str) -> str:
    """Why zones are without a figure: hidden for privacy, or never known."""
    if REASON not in rows or rows[REASON].isna().all() or column == "travel_cost":
        return "no figure"
    known = rows[column].notna() | rows[REASON].notna()
    return "hidden: few records" if known.all() else "hidden, or no figure"


def _outside(rows: pd.DataFrame) -> npt.NDArray[np.bool_]:
    if "in_market" not in rows:
        return np.zeros(len(rows), dtype=bool)
    left_out = ~rows["in_market"].astype("boolean")
    return left_out.fillna(value=False).to_numpy(dtype=bool)
