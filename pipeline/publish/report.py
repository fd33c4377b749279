"""The report: one HTML page that needs no network, from the first line to the last source."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

from pipeline.publish.answer import masthead
from pipeline.publish.assumptions import assumptions_table
from pipeline.publish.closing import attribution, cautions, inputs_table, made_with
from pipeline.publish.effects import effects_figure, has_effects
from pipeline.publish.evidence import demand_figure, map_figure, site_heading, site_map
from pipeline.publish.findings import fee_figure, models_tried, values_table
from pipeline.publish.losses import losses, road_table, route_table
from pipeline.publish.mapmeasures import MapFigures
from pipeline.publish.mapview import BaseMap, base_map
from pipeline.publish.markup import Html, join, tag
from pipeline.publish.methods import methods, sources
from pipeline.publish.pagedata import data_block
from pipeline.publish.referee import referee_report
from pipeline.publish.reported import reported_table
from pipeline.publish.results import Headline, Results

STYLE_FILE = Path(__file__).with_name("report.css")
SCRIPT_FILE = Path(__file__).with_name("report.js")
MOST_SHAPES = 60_000
"""Zones times sites; beyond that only the first site's map is drawn."""


def build_report(results: Results) -> str:
    """The whole page. It refers to nothing outside itself, and its policy forbids it to."""
    script = Html(SCRIPT_FILE.read_text(encoding="utf-8"))
    base = base_map(results)
    maps = _maps(results, base)
    parts = _sections(results, base, lambda h: map_figure(results, base, h, maps.get(h.site_id)))
    body = tag(
        "body",
        tag("a", "Skip to the evidence", href="#map", class_="skip"),
        base.defs if base else None,
        masthead(results),
        _contents(parts),
        tag("main", *(part.markup for part in parts)),
        tag("footer", attribution(results)),
        data_block(results, list(maps.values())),
        tag("script", script),
    )
    return _page(results.study.study.title, body, script)


def plain_page(title: str, body: Html) -> str:
    """A page in the report's style, without script."""
    return _page(title, tag("body", tag("main", body)), "")


def on_paper(page: str, paper: str) -> str:
    """A report whose print has a stated paper size (a CSS page size) and not the printer's own.

    Its security policy names the digest of the style; that changes with the style.
    """
    style = STYLE_FILE.read_text(encoding="utf-8")
    sized = style.replace("size: auto;", f"size: {paper};")
    return page.replace(style, sized).replace(_digest(style), _digest(sized))


def _page(title: str, body: Html, script: str) -> str:
    style = Html(STYLE_FILE.read_text(encoding="utf-8"))
    head = tag(
        "head",
        tag("meta", charset="utf-8"),
        tag("meta", http_equiv="Content-Security-Policy", content=_policy(style, script)),
        tag("meta", name="viewport", content="width=device-width, initial-scale=1"),
        tag("meta", name="color-scheme", content="light dark"),
        tag("title", title),
        tag("style", style),
    )
    return f"<!doctype html>\n{tag('html', head, body, lang='en')}\n"


def _policy(style: str, script: str) -> str:
    """Content security policy: nothing may be loaded; only this style and this script apply."""
    return (
        f"default-src 'none'; style-src '{_digest(style)}'; script-src '{_digest(script)}'; "
        "base-uri 'none'; form-action 'none'"
    )


def _digest(text: str) -> str:
    return f"sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}"


def _maps(results: Results, base: BaseMap | None) -> dict[str, MapFigures]:
    """What the map of every site shows; of the first alone where all would be too many."""
    shown = results.headlines
    if base is not None and len(base.zone_names) * len(shown) > MOST_SHAPES:
        shown = shown[:1]
    found = {headline.site_id: site_map(results, base, headline) for headline in shown}
    return {site_id: figures for site_id, figures in found.items() if figures is not None}


def _sections(
    results: Results, base: BaseMap | None, draw_map: Callable[[Headline], Html]
) -> list[Section]:
    def each(draw: Callable[[Results, Headline], Html]) -> Html:
        return join(
            join([site_heading(results, headline), draw(results, headline)])
            for headline in results.headlines
        )

    roads = [part for part in (road_table(results), route_table(results)) if part is not None]
    return [
        _section("map", "Where visitors come from", _MAP, each(lambda _, h: draw_map(h))),
        _section("demand", "How cost holds them back", _DEMAND, each(demand_figure)),
        _section("values", "What it is worth", _VALUES, each(values_table)),
        _section("fees", "What a fee would do", _FEES, each(fee_figure)),
        *_effects(results, each),
        _section("assumed", "What was assumed", _ASSUMED, assumptions_table(results)),
        _section("lost", "What was lost on the way", _LOST, *losses(results)),
        *_reported(results),
        _section("models", "Models tried", _MODELS, each(models_tried)),
        *_referee(results, base, each),
        *([_section("roads", "The road data", _ROADS, *roads)] if roads else []),
        _section("methods", "How it was worked out", _METHODS, *methods(results)),
        _section("care", "Cautions", "Read these before quoting a figure.", cautions()),
        _section("sources", "Sources", _SOURCES, sources(results)),
        _section("inputs", "Inputs", _INPUTS, inputs_table(results), made_with(results)),
    ]


def _effects(results: Results, each: Callable[..., Html]) -> list[Section]:
    """The section on other assumptions, where some were run."""
    if not has_effects(results):
        return []
    return [_section("effects", "What the assumptions do", _EFFECTS, each(effects_figure))]


def _reported(results: Results) -> list[Section]:
    """The section on what the records report, where they do."""
    body = reported_table(results)
    return [] if body is None else [_section("reported", "Reported and routed", _REPORTED, body)]


_REPORTED = (
    "What visitors say of their way, against the way that was routed for them. A bias that grows "
    "with distance speaks of the roads' speeds, or of trips with other stops."
)


def _referee(results: Results, base: BaseMap | None, each: Callable[..., Html]) -> list[Section]:
    """The section for a referee, where the demand stage made diagnostics."""
    if results.diagnostics is None:
        return []

    def draw(results: Results, headline: Headline) -> Html:
        return referee_report(results, headline, base)

    return [_section("referee", "For a referee", _REFEREE, each(draw))]


_REFEREE = (
    "What would change the answer; where the model misses, on the map; tests, and rows left out."
)
_EFFECTS = (
    "The same data under other assumptions, the strongest first. A bar that leaves the shaded "
    "interval matters more than the sampling error does."
)
_MAP = (
    "Visits, cost and surplus of each zone, with the roads that bring visitors and the routes they "
    "take."
)
_DEMAND = (
    "People who live further away pay more to come, and come less often. The fall of the curve "
    "is what puts a value on a visit."
)
_VALUES = "Every measure that the chosen model gives, with every kind of interval worked out."
_FEES = (
    "Each visitor would pay the added fee on top of today's costs. Visitors come less often; "
    "some of their surplus turns into revenue, some is lost to everybody."
)
_ASSUMED = (
    "Each of these moves the answer. A value that the study chose is marked; the others are "
    "defaults."
)
_LOST = "Nothing is dropped silently. This is what did not reach the regression, and why."
_MODELS = (
    "Every model that was fitted, with the one that the value comes from. A small p of "
    "overdispersion speaks against Poisson."
)
_ROADS = "A route is only as good as the roads it was found on."
_METHODS = "The steps of this very run. The settings behind them are listed above."
_SOURCES = "The published work that these methods come from."
_INPUTS = "Whoever has these files, settings and this code can repeat the run."


class Section(NamedTuple):
    """A part of the page: where links find it, what it is called, and its elements."""

    name: str
    title: str
    markup: Html


def _section(name: str, title: str, lead: str, *body: object) -> Section:
    """A section: title and lead in the rail, the matter beside it."""
    rail = tag("div", tag("h2", title, id=f"{name}-title"), tag("p", lead), class_="rail")
    matter = tag("div", *body, class_="matter")
    markup = tag("section", rail, matter, id=name, aria_labelledby=f"{name}-title")
    return Section(name, title, markup)


def _contents(sections: list[Section]) -> Html:
    """What follows, each a link."""
    entries = [tag("li", tag("a", part.title, href=f"#{part.name}")) for part in sections]
    return tag("nav", tag("ol", *entries), aria_label="Contents", class_="contents")
