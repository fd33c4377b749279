"""What the columns of the GIS layers are called and mean, for people who open them."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass

from pipeline.publish.privacy import REASON
from pipeline.publish.words import words_of
from pipeline.tables import (
    Costs,
    RoadLines,
    Routes,
    Sites,
    Zones,
    ZoneSurplus,
    ZoneTable,
    data_dictionary,
)

DECLARED = (ZoneTable, Zones, ZoneSurplus, Routes, Costs, Sites, RoadLines)
"""Tables whose columns stand in layers; the first that has a column says what it means."""

OWN = {
    REASON: ("why the zone's visits are hidden", ""),
    "zones": ("zones whose routes run over the stretch", "zones"),
    "annual_surplus": ("consumer surplus per year", "currency/year"),
    "annual_surplus_ci_low": ("lower end of its interval", "currency/year"),
    "annual_surplus_ci_high": ("upper end of its interval", "currency/year"),
    "surplus_per_trip": ("consumer surplus per visit", "currency/visit"),
    "surplus_per_trip_ci_low": ("lower end of its interval", "currency/visit"),
    "surplus_per_trip_ci_high": ("upper end of its interval", "currency/visit"),
}
UNIT_ENDING = re.compile(r"_(km|min|m|hours|kmh)$")


@dataclass(frozen=True)
class Label:
    """A column's title ('Distance, km'), its meaning, and its unit."""

    column: str
    title: str
    meaning: str
    unit: str


def column_labels(columns: Iterable[str], *, currency: str) -> list[Label]:
    """Labels of a layer's columns; one that the study brought itself is called by its name."""
    entries = data_dictionary(DECLARED).drop_duplicates("column").set_index("column")
    known = {str(name): (row["meaning"], row["unit"]) for name, row in entries.iterrows()}
    labels = []
    for column in columns:
        meaning, unit = {**known, **OWN}.get(column, ("column of the study's own", ""))
        unit = str(unit).replace("currency", currency)
        labels.append(Label(column, _title(column, unit), str(meaning), unit))
    return labels


def _title(column: str, unit: str) -> str:
    """'distance_km' → 'Distance, km'; a unit that repeats the name is left out."""
    plain = words_of(UNIT_ENDING.sub("", column)).replace("ci low", "from").replace("ci high", "to")
    words = plain[:1].upper() + plain[1:]
    said = not unit or unit.split("/", maxsplit=1)[0].rstrip("s") in plain
    return words if said else f"{words}, {unit}"
