"""Colours and marks of the map, and the legend that explains them."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from pipeline.publish.mapmeasures import Measure, colour_of
from pipeline.publish.markup import Html, join, tag, text
from pipeline.publish.results import Results


def class_name(place: int, total: int) -> str:
    """Style of a class: its colour out of five, spread when there are fewer classes."""
    if place < 0:
        return "zero" if place == -1 else "none"
    return f"c{colour_of(place, total)}"


def marker(x: float, y: float, kind: str) -> Html:
    """A ring with a dot for the site of the map, a ring for another, a square for a substitute."""
    if kind == "substitute":
        return tag("rect", x=f"{x - 5:.1f}", y=f"{y - 5:.1f}", width=10, height=10, class_="mark")
    ring = tag("circle", cx=f"{x:.1f}", cy=f"{y:.1f}", r=7, class_="mark")
    dot = tag("circle", cx=f"{x:.1f}", cy=f"{y:.1f}", r=3, class_="dot") if kind == "here" else None
    return join([ring, dot])


def legend(
    measure: Measure, outside: npt.NDArray[np.bool_], results: Results, *, hidden: bool
) -> Html:
    """Colours with their bounds and number of zones, then the marks."""
    places, classes = measure.places, measure.classes
    entries = [
        (class_name(k, len(classes)), label, int((places == k).sum()))
        for k, label in enumerate(classes.labels())
    ]
    if (places == -1).any():
        entries.insert(0, ("zero", measure.zero, int((places == -1).sum())))
    if (places == -2).any():
        entries.append(("none", measure.missing, int((places == -2).sum())))
    if outside.any():
        entries.append(("over", "outside the market", int(outside.sum())))
    items = [
        tag("li", _swatch(class_), label, tag("small", f" {total:,}"))
        for class_, label, total in entries
    ]
    items += [tag("li", _swatch_mark(kind), words) for kind, words in _marks(results)]
    title = tag("p", tag("b", measure.title.partition(":")[0]), tag("small", " (zones)"))
    return tag(
        "div",
        title,
        tag("ul", *items),
        class_="legend",
        data_measure=measure.column,
        hidden="hidden" if hidden else None,
    )


def _swatch(class_: str) -> Html:
    square = tag("rect", width=180, height=120, class_=class_)
    scaled = tag("g", square, transform="scale(.1)", class_="zones")
    return tag("svg", scaled, viewBox="0 0 18 12", class_="swatch", aria_hidden="true")


def _marks(results: Results) -> list[tuple[str, str]]:
    marks = []
    if results.sites is not None:
        marks.append(("here", "the site"))
        if len(results.headlines) > 1:
            marks.append(("site", "another valued site"))
        if results.sites["role"].eq("substitute").any():
            marks.append(("substitute", "substitute"))
    if results.road_lines is not None and len(results.road_lines):
        marks.append(("roads", "road"))
        if results.road_lines["road_class"].eq("ferry").any():
            marks.append(("ferry", "ferry"))
    if results.route_lines is not None and len(results.route_lines):
        marks.append(("routes", "route to the site"))
    return marks


def _swatch_mark(kind: str) -> Html:
    shape = (
        marker(9, 8, kind)
        if kind in ("here", "site", "substitute")
        else tag("path", d="M0 8h18", class_=text(f"key {kind}"))
    )
    return tag("svg", shape, viewBox="0 0 18 16", class_="swatch tall", aria_hidden="true")
