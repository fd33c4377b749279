"""The methods in prose say what was run, and nothing that was not."""

from __future__ import annotations

from tests.publish.conftest import make_publication, make_study
from tests.publish.test_report import Page


def methods_of(report: str) -> str:
    section = report.partition('<section id="methods"')[2].partition("</section>")[0]
    return Page(f"<body>{section}</body>").text


def test_methods_name_what_this_run_did() -> None:
    words = methods_of(make_publication().report)
    assert "for 18 pairs; 17 have a route" in words
    assert "median gap 120 m" in words
    assert "EUR 0.25 per km" in words
    assert "33 % of the hourly wage" in words
    assert "Models fitted: Poisson, negative binomial (NB2)" in words
    assert "10,000 draws of the parameters (seed 1)" in words
    assert "Zones within" not in words


def test_methods_follow_the_settings() -> None:
    study = make_study(
        market={"max_distance_km": 60.0},
        publish={"suppress_below": 5},
        demand={"choose": "negative_binomial"},
    )
    words = methods_of(make_publication(study).report)
    assert "Zones within 60 km one way make up the market." in words
    assert "The study chose the negative binomial (NB2) model beforehand." in words
    assert "fewer than 5 records are hidden" in words


def test_methods_leave_out_what_was_not_run() -> None:
    nothing = dict.fromkeys(("origin_summary", "road_quality", "road_lines", "routes"))
    words = methods_of(make_publication(**nothing, route_lines=None, costs=None).report)
    assert "no route was searched" in words
    assert "per km" not in words


def test_values_have_one_row_per_measure_with_intervals_side_by_side() -> None:
    text = Page(make_publication().report).text
    values = text.partition("Values from the chosen model")[2].partition("What a fee would do")[0]
    assert values.count("Surplus per visit") == 1
    assert "5.03.9 to 6.14.1 to 6.4EUR/trip" in values
