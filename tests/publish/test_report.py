"""The report: the right figures, nothing from outside, no text of the data as markup."""

from __future__ import annotations

import base64
import hashlib
import re
from html.parser import HTMLParser
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from pipeline.errors import PublishError
from pipeline.publish import Publication, summarise_publish
from pipeline.publish.classes import quantile_classes
from pipeline.publish.curve import fitted_curves
from pipeline.publish.words import figure, interval
from tests.publish.conftest import (
    MERE,
    SITE,
    make_estimates,
    make_fee_schedule,
    make_fit,
    make_publication,
    make_study,
    make_surplus,
    make_tables,
    make_zone_surplus,
    make_zone_table,
    make_zones,
)

VOID = {"br", "col", "input", "meta"}


class Page(HTMLParser):
    """Collects attributes, ids and text, and checks that elements are closed in order."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.attributes: list[tuple[str, str, str]] = []
        self.words: list[str] = []
        self.feed(page)
        assert self.open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.attributes += [(tag, name, value or "") for name, value in attrs]
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.attributes += [(tag, name, value or "") for name, value in attrs]

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open[-1:] not in (["style"], ["script"]):
            self.words.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", "".join(self.words))

    def values(self, name: str) -> list[str]:
        return [value for _, attribute, value in self.attributes if attribute == name]


@pytest.fixture(scope="module")
def page(publication: Publication) -> Page:
    return Page(publication.report)


def test_the_answer_is_the_surplus_table_s(page: Page, publication: Publication) -> None:
    """EUR 5 a trip times 286 visits; its interval 4.13 to 6.42 a trip, simulated.

    The annual interval is 655 wide: two digits of that are tens.
    """
    visits = publication.tables["zone_table"]["visits"].sum()
    assert visits == 286
    assert "is worth about EUR 1,430 a year." in page.text
    assert "from EUR 1,180 to 1,840, at prices of 2024" in page.text
    assert "EUR 5.0 (4.1 to 6.4)" in page.text


def test_the_notice_comes_before_the_answer(page: Page) -> None:
    assert page.text.index("Every figure here is invented.") < page.text.index("is worth about")


def test_nothing_comes_from_outside(page: Page, publication: Publication) -> None:
    assert {tag for tag, _, _ in page.attributes}.isdisjoint({"img", "link", "iframe"})
    assert all(value.startswith("#") for value in page.values("href"))
    assert page.values("src") == []
    style = publication.report.partition("<style>")[2].partition("</style>")[0]
    assert set(re.findall(r"url\(([^)]*)\)", style)) == {"#nothing", "#outside"}
    assert not re.findall(r"@import|https?:", style)


def test_the_policy_allows_this_style_and_script_and_nothing_else(
    page: Page, publication: Publication
) -> None:
    """Content Security Policy Level 3, 2.3.1 (hash-source): base64 of SHA-256 of the element."""
    policy = next(value for value in page.values("content") if "default-src" in value)
    allowed = ["default-src 'none'"]
    for name in ("style", "script"):
        words = publication.report.partition(f"<{name}>")[2].partition(f"</{name}>")[0]
        digest = base64.b64encode(hashlib.sha256(words.encode()).digest()).decode()
        allowed.append(f"{name}-src 'sha256-{digest}'")
    assert policy.split("; ")[:3] == allowed
    assert page.values("style") == []


def test_references_within_the_page_hold(page: Page) -> None:
    ids = page.values("id")
    assert len(ids) == len(set(ids))
    assert {value[1:] for value in page.values("href")} <= set(ids)
    assert set(page.values("aria-labelledby")) <= set(ids)


def test_text_from_data_is_escaped(publication: Publication) -> None:
    assert "<hide>" not in publication.report
    assert "<invented & small>" not in publication.report
    assert "Otter Fen &lt;hide&gt;" in publication.report
    assert "Parish 001 &amp; Co" in publication.report


def test_losses_add_up_to_what_came_in(page: Page) -> None:
    assert "100 visit records came in; 95 have a zone of origin and 5 (5.0 %) do not." in page.text
    assert "No route was found for 1 of 18 pairs" in page.text
    assert "nobody lives there" in page.text


def test_assumptions_say_who_set_them(page: Page) -> None:
    assert re.search(r"costs\.vehicle_cost_per_km ?0\.25 ?EUR/km.{0,80}?study", page.text)
    assert re.search(r"costs\.hours_per_year ?2,080 ?h/year.{0,80}?default", page.text)


def test_every_map_class_is_in_the_legend(publication: Publication) -> None:
    legend = publication.report.partition('class="legend"')[2].partition("</ul>")[0]
    drawn = set(re.findall(r'<use href="#z\d+" class="(\w+)"', publication.report))
    assert drawn == {"c0", "c1", "c2", "c3", "c4", "zero", "none", "over"}
    assert drawn <= set(re.findall(r'class="(\w+)"', legend))


def test_small_cells_are_hidden_and_the_reason_given() -> None:
    """With fewer than 5 hidden, zone 007 (13 visits / 4 = 3 in the sample) alone would be blank.

    Its blank could be worked out from the total, so the next smallest (003) goes blank too.
    """
    publication = make_publication(make_study(publish={"suppress_below": 5}))
    table = publication.tables["zone_table"].set_index("zone_id")
    note = "fewer than 5 records, or hides such a zone"
    assert table.loc[["007", "003"], "hidden_note"].tolist() == [note, note]
    assert table["visits"].isna().sum() == table["visits_per_1000"].isna().sum() - 1 == 2
    assert table.loc["008", "visits"] == 0
    zones = publication.layers["zones"].set_index("zone_id")
    assert zones.loc[["007", "003"], ["visits", "annual_surplus"]].isna().all(axis=None)
    assert publication.headlines[0].visits == 286
    assert "2 zones with few visit records (below 5)" in Page(publication.report).text


def two_sites() -> dict[str, Any]:
    """The mere is valued as well, with twice the surplus."""
    zones = make_zones()
    both = [make_zone_table(zones), make_zone_table(zones, MERE)]
    table = pd.concat(both, ignore_index=True)
    parts = {
        "estimates": (make_estimates(), make_estimates(MERE)),
        "fit": (make_fit(), make_fit(MERE)),
        "surplus": (make_surplus(286.0), make_surplus(572.0, MERE)),
        "fee_schedule": (make_fee_schedule(286.0), make_fee_schedule(572.0, MERE)),
    }
    joined = {name: pd.concat(pair, ignore_index=True) for name, pair in parts.items()}
    return {**joined, "zone_table": table, "zone_surplus": make_zone_surplus(table)}


def test_several_sites_have_a_layer_and_a_map_each() -> None:
    publication = make_publication(**two_sites())
    assert [name for name in publication.layers if name.startswith("zones")] == [
        "zones",
        "zones_fen",
        "zones_mere",
    ]
    one, total = publication.layers["zones_fen"], publication.layers["zones"]
    assert set(one.columns) - set(total.columns) == {"visits_se"}
    np.testing.assert_array_equal(total["visits"], 2 * one["visits"])
    page = Page(publication.report)
    assert page.values("class").count("map") == 2
    assert "1,430" in page.text
    assert "2,900" in page.text  # the interval is 1,310 wide: hundreds


def test_zones_without_polygons_are_dots() -> None:
    zones = make_zones()
    places = gpd.GeoSeries.from_xy(zones["lon"], zones["lat"], crs="EPSG:4326")
    points = zones.set_geometry(places)
    report = make_publication(zones=points).report
    assert len(re.findall(r'<circle id="z\d+"', report)) == 9
    assert '<path id="z' not in report


def test_without_roads_or_zones_the_report_says_so() -> None:
    nothing = dict.fromkeys(("origin_summary", "road_quality", "road_lines", "routes"))
    text = Page(make_publication(**nothing, route_lines=None, costs=None).report).text
    assert "The study brought no roads to draw." in text
    assert "The study brought no visit records" in text
    assert "no route was searched" in text
    text = Page(make_publication(zones=None, route_lines=None).report).text
    assert "so there is no map" in text


def test_the_curve_is_the_function_that_made_the_world() -> None:
    """At each cost exp(5 − 0.2 × cost); the band by hand at cost 5, where it is narrow.

    The variance there is 0.04 − 2 × 5 × 0.004 + 25 × 0.0005 = 0.0125 on the scale of logarithms,
    so 95 % lies within exp(±1.96 × 0.1118). Drawn 10,000 times, within 3 %.
    """
    tables = make_tables()
    known = (tables["zone_table"], None, tables["estimates"], tables["fit"])
    curve = fitted_curves(*known, study=make_study())[SITE]
    np.testing.assert_allclose(curve.rate, np.exp(5 - 0.2 * curve.cost))
    assert (curve.cost[0], curve.cost[-1]) == (3.0, 12.0)
    middle = np.exp(5 - 0.2 * 5.0)
    low, high = (np.interp(5.0, curve.cost, side) for side in (curve.low, curve.high))
    assert low == pytest.approx(middle * np.exp(-1.96 * 0.0125**0.5), rel=0.03)
    assert high == pytest.approx(middle * np.exp(1.96 * 0.0125**0.5), rel=0.03)


def test_no_chosen_model_is_an_error() -> None:
    with pytest.raises(PublishError, match="no model is chosen"):
        make_publication(fit=make_fit().assign(chosen=False))


def test_summary_names_the_value(publication: Publication) -> None:
    assert summarise_publish((publication,)) == (
        "report.html, 5 layers, 13 tables; Otter Fen <hide>: EUR 1,430 a year "
        "(95 % interval 1,180 to 1,840)"
    )
    assert publication.headlines[0].site_id == SITE


@pytest.mark.parametrize(
    ("value", "low", "high", "shown", "ends"),
    [
        (1_413_441.0, 1_249_246.0, 1_625_247.0, "1.41 million", "1.25 to 1.63 million"),
        (11.53, 10.19, 13.26, "11.5", "10.2 to 13.3"),
        (980_000.0, 930_400.0, 1_300_000.0, "980,000", "930,000 to 1.30 million"),
        (-1.6135, -1.8256, -1.4032, "−1.61", "−1.83 to −1.40"),
        (122_535.9999, 122_535.9998, 122_536.0001, "123,000", "–"),
        (5.0, np.nan, np.nan, "5.00", "–"),
        (np.nan, np.nan, np.nan, "not known", "–"),
    ],
)
def test_figures_are_rounded_to_two_digits_of_their_interval(
    value: float, low: float, high: float, shown: str, ends: str
) -> None:
    assert figure(value, low, high) == shown
    assert interval(low, high, value) == ends


@example([249999999.9921875])
@given(st.lists(st.floats(1e-6, 1e9), min_size=1, max_size=40))
@settings(derandomize=True, max_examples=200)
def test_map_classes_cover_the_data(values: list[float]) -> None:
    """Every figure above zero lies between the bounds of its class, ends included."""
    rates = np.array(values)
    classes = quantile_classes(rates)
    place = classes.of(rates)
    bounds = np.array(classes.bounds)
    assert 1 <= len(classes) <= 5
    assert (bounds[place] <= rates).all()
    assert (rates <= bounds[place + 1]).all()
    assert list(classes.of(np.array([0.0, np.nan]))) == [-1, -2]
