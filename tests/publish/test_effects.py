"""Other assumptions in the report: ordered by effect, with what gives no value."""

from __future__ import annotations

import re

import pandas as pd

from pipeline.publish import Publication
from pipeline.publish.effects import coarse
from tests.publish.conftest import make_publication, make_sensitivity, make_study


def section(publication: Publication) -> str:
    found = re.search(r'<section id="effects".*?</section>', publication.report, re.DOTALL)
    assert found is not None
    return found.group()


def test_the_strongest_comes_first_and_what_has_no_value_is_in_the_table(
    publication: Publication,
) -> None:
    """+80 % before −20 %; the odd model has a row in the table and no bar."""
    drawn, _, table = section(publication).partition("</svg>")
    assert drawn.index("nobody shares the vehicle") < drawn.index("time at no cost")
    assert "+80 %" in drawn
    assert "−20 %" in drawn
    assert "model: odd" not in drawn
    assert "model: odd" in table
    assert "No value: it cannot be fitted." in table


def test_the_bars_run_from_the_study_to_the_alternative(publication: Publication) -> None:
    """Zero and 3,000 EUR are 348 px apart; 286 visits × (9 − 5) EUR are 1,144 EUR."""
    bars = re.findall(r'width="([0-9.]+)" height="14.0" class="unsure"', section(publication))
    assert [round(float(width)) for width in bars] == [
        round(348 * 1144 / 3000),
        round(348 * 286 / 3000),
    ]


def test_without_alternatives_there_is_no_section() -> None:
    study_only = make_sensitivity(100.0).head(1)
    assert 'id="effects"' not in make_publication(sensitivity=study_only).report


def test_figures_are_coarse_where_small_counts_are_hidden() -> None:
    exact = make_sensitivity(286.0)
    publication = make_publication(make_study(publish={"suppress_below": 3}), sensitivity=exact)
    shown = publication.tables["sensitivity"]
    assert shown["annual_surplus"].tolist()[:3] == [1430.0, 1140.0, 2570.0]
    pd.testing.assert_series_equal(shown["variant"], exact["variant"])
    assert pd.isna(coarse(exact)["annual_surplus"].iloc[3])
