"""How the GIS layers look when they are opened: classes with their colours and legend labels.

A `Look` is a list of rules, each a condition on one column, a colour and a legend label. Every
row of a layer falls under exactly one rule: missing figures have a rule of their own, and the
first and last class reach as far as the data. ``stylefiles`` writes looks in open formats.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import geopandas as gpd
import numpy as np
import shapely

from pipeline.publish.classes import quantile_classes
from pipeline.publish.privacy import REASON

BLUES = ("#ffffcc", "#a1dab4", "#41b6c4", "#2c7fb8", "#253494")
"""YlGnBu, five classes: ColorBrewer (Harrower and Brewer, 2003)."""
BROWNS = ("#ffffd4", "#fed98e", "#fe9929", "#d95f0e", "#993404")
"""YlOrBr, five classes: ColorBrewer (Harrower and Brewer, 2003)."""
ZERO, MISSING, BORDER, SIGNAL = "#e4e7ee", "#ffffff", "#8b95a9", "#a8480a"


@dataclass(frozen=True)
class Rule:
    """One class: rows of `column` from `low` to `high`, equal to `value`, or missing.

    A bound that is None is open; `top` takes in the upper bound; `size` is a width or diameter
    in mm. A rule without any condition holds for every row.
    """

    label: str
    colour: str
    column: str = ""
    low: float | None = None
    high: float | None = None
    top: bool = False
    value: str | float | None = None
    missing: bool = False
    size: float = 0.26
    border: str = BORDER
    border_size: float = 0.26
    square: bool = False


@dataclass(frozen=True)
class Look:
    """One style of a layer; `shape` is 'area', 'line' or 'point'."""

    name: str
    shape: str
    rules: tuple[Rule, ...]


def looks_of(name: str, layer: gpd.GeoDataFrame, *, currency: str) -> list[Look]:
    """The styles of a layer, the default first."""
    shape = ("point", "line", "area")[int(shapely.get_dimensions(layer.geometry.iloc[0]))]
    if name.startswith("zone"):
        size = 3.0 if shape == "point" else 0.26
        found = [
            _graded(layer, "visits_per_1000", "Visit rate", "visits per 1,000 people", BLUES),
            _graded(layer, "travel_cost", "Travel cost", f"{currency} per visit", BROWNS),
        ]
        looks = [look for look in found if look]
        looks = looks or [Look("Plain", shape, (Rule("zone", BLUES[1]),))]
        return [_sized(replace(look, shape=shape), size) for look in looks]
    if name == "roads_used":
        graded = _graded(layer, "visits", "Visits carried", "visits a year", BROWNS)
        return [_widening(replace(graded, shape=shape))] if graded else [_lines(shape)]
    if name == "sites":
        return [Look("Sites", shape, _site_rules(layer))]
    if name == "routes":
        graded = _graded(layer, "travel_cost", "Travel cost", f"{currency} per visit", BROWNS)
        return [_sized(replace(graded, shape=shape), 0.5)] if graded else [_lines(shape)]
    plain = Rule(name.replace("_", " "), SIGNAL, size=0.7)
    return [Look("Plain", shape, (plain,))]


def _lines(shape: str) -> Look:
    return Look("Plain", shape, (Rule("route", SIGNAL, size=0.5),))


def _graded(
    layer: gpd.GeoDataFrame, column: str, name: str, unit: str, colours: tuple[str, ...]
) -> Look | None:
    """A look by classes of a column; None where the layer has no figure of it."""
    if column not in layer or layer[column].notna().sum() == 0:
        return None
    values = layer[column].to_numpy(dtype=np.float64)
    classes = quantile_classes(values)
    steps = np.rint(np.linspace(0, len(colours) - 1, max(1, len(classes)))).astype(int)
    rules = [
        Rule(f"{label} {unit}", colours[step], column, low=low, high=high)
        for label, step, (low, high) in zip(
            classes.labels(), steps, pairwise(classes.bounds), strict=True
        )
    ]
    if rules:
        rules[-1] = replace(rules[-1], top=True)
    if (values == 0).any():
        rules.insert(0, Rule(f"0 {unit}", ZERO, column, value=0.0))
    if np.isnan(values).any():
        words = "hidden, or no figure" if _hides(layer) else "no figure"
        rules.append(Rule(words, MISSING, column, missing=True))
    return Look(name, "area", tuple(rules))


def _hides(layer: gpd.GeoDataFrame) -> bool:
    return REASON in layer and bool(layer[REASON].notna().any())


def _sized(look: Look, size: float) -> Look:
    return replace(look, rules=tuple(replace(rule, size=size) for rule in look.rules))


def _widening(look: Look) -> Look:
    """Lines that grow with their class; a thin grey one where there is no figure."""
    sizes = np.linspace(0.4, 1.8, len(look.rules))
    return replace(
        look,
        rules=tuple(
            replace(rule, size=0.2, colour=BORDER)
            if rule.missing or rule.value is not None
            else replace(rule, size=round(float(size), 2))
            for rule, size in zip(look.rules, sizes, strict=True)
        ),
    )


def _site_rules(layer: gpd.GeoDataFrame) -> tuple[Rule, ...]:
    kinds = (("site", "site", False), ("substitute", "substitute", True))
    return tuple(
        Rule(
            words,
            MISSING,
            "role",
            value=role,
            size=3.4,
            border=SIGNAL,
            border_size=0.6,
            square=square,
        )
        for role, words, square in kinds
        if layer["role"].eq(role).any()
    )
