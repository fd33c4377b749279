"""The referee's section: what would change the answer, the residuals on the map, diagnostics."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
import pandas as pd
import pytest

from pipeline.publish import Publication
from pipeline.publish.residualmap import classes_of
from tests.publish.conftest import COST, SITE, make_publication, make_study, make_surplus

#: Zones 001 to 008 are in the regression; 009 has no people.
LEFT = [-2.4, -1.5, -0.3, 0.0, 0.9, 1.0, 2.0, 3.1]


def a_row(diagnostic: str, value: float, **others: Any) -> dict[str, Any]:
    blank = {"subject": None, "expected": np.nan, "p_value": np.nan, "note": f"About {diagnostic}."}
    model = {"site_id": SITE, "model": "negative_binomial"}
    return {**model, "diagnostic": diagnostic, "value": value, **blank, **others}


def diagnostics(*, moran_p: float = 0.4) -> pd.DataFrame:
    return pd.DataFrame(
        [
            a_row("overdispersion", 3.2, model="poisson", p_value=0.0007),
            a_row("moran_i", 0.31, expected=-1 / 7, p_value=moran_p),
            a_row("cost_reaches", 0.35),
            a_row("observed_count", 3.0, expected=2.6, subject="0"),
            a_row("observed_count", 5.0, expected=5.4, subject="1 and more"),
            a_row("observed_count", 4.0, expected=1.0, subject="0", model="poisson"),
            a_row("influence", -0.16, expected=-0.2, subject="002", note="Without zone 002."),
            a_row("influence", -0.21, expected=-0.2, subject="005", note="Without zone 005."),
        ]
    )


def residuals() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "zone_id": list(COST)[:8],
            "site_id": SITE,
            "model": "negative_binomial",
            "residual": LEFT,
            "residual_kind": "randomised quantile",
        }
    )


def referee(published: Publication) -> str:
    """The section's markup."""
    found = re.search(r'<section id="referee".*?</section>', published.report, re.DOTALL)
    assert found is not None
    return found.group()


def bare(markup: str) -> str:
    return re.sub(r"<[^>]+>", " ", markup).replace("  ", " ")


@pytest.fixture(scope="module")
def section() -> str:
    published = make_publication(diagnostics=diagnostics(), residuals=residuals())
    return referee(published)


def test_classes_are_even_about_zero_and_their_bounds_belong_outside() -> None:
    values = np.array([-2.0, -1.99, -1.0, -0.99, 0.99, 1.0, 1.99, 2.0, np.nan])
    assert classes_of(values).tolist() == [0, 1, 1, 2, 2, 3, 3, 4, -1]


def test_the_map_draws_every_zone_in_its_class(section: str) -> None:
    """−2.4 | −1.5 | −0.3, 0, 0.9 | 1 | 2, 3.1; zone 009 is not in the regression."""
    drawn = re.findall(r'<use href="#z(\d)" class="(d\d|none)">', section)
    assert dict(drawn) == {
        "0": "d0",
        "1": "d1",
        "2": "d2",
        "3": "d2",
        "4": "d2",
        "5": "d3",
        "6": "d4",
        "7": "d4",
        "8": "none",
    }
    legend = bare(section[section.index('class="legend"') :])
    for words in ("far fewer than expected (−2 and below) 1", "as expected (−1 to 1) 3"):
        assert words in " ".join(legend.split())


def test_the_residuals_are_a_table_too_the_furthest_first(section: str) -> None:
    grid = section[section.index("Zones by the size of their residual") :]
    rows = re.findall(r'<tr><th scope="row">(.*?)</th>.*?</tr>', grid)
    assert rows[0] == "Parish 008 &amp; Co"
    assert len(rows) >= 8
    assert "about 0 would lie 2 or more from zero; here 3 do" in bare(section)


def test_morans_i_stands_beside_the_map(section: str) -> None:
    words = " ".join(bare(section).split())
    assert "Moran's I 0.310 (expected −0.143 without a pattern, p 0.4): no clear pattern" in (
        words.replace("&#x27;", "'")
    )
    assert "A pattern on the map" not in words
    patterned = referee(
        make_publication(diagnostics=diagnostics(moran_p=0.002), residuals=residuals())
    )
    assert "neighbours are alike beyond what the model explains" in patterned
    assert "A pattern on the map" in patterned


def test_what_would_change_the_answer_is_said_the_strongest_first(section: str) -> None:
    """Sampling −17 to +28 %, a zone 25 %, time at no cost −20 %, nobody sharing +80 %."""
    words = " ".join(bare(section).split())
    assert "What would change it most: another assumption (by up to 80 %)." in words
    assert "“nobody shares the vehicle” moves the annual surplus most: +80 %" in words
    assert "A zone left out. Without zone 002." in words
    assert "35 % of the surplus lies at costs beyond the highest in the data" in words
    assert "95 % interval, simulated: 4.1 to 6.4." in words


def test_another_model_and_the_income_effect_are_named() -> None:
    values = make_surplus(1000.0)
    other = values[values["measure"] == "surplus_per_trip"].assign(model="poisson", value=6.0)
    exact = values[(values["measure"] == "surplus_per_trip") & (values["method"] == "delta")]
    more = [
        exact.assign(measure=f"{kind}_variation_per_trip", value=value)
        for kind, value in (("equivalent", 4.9), ("compensating", 5.2))
    ]
    more.append(exact.assign(measure="income_elasticity", value=0.4, unit="% per %"))
    surplus = pd.concat([values, other, *more], ignore_index=True)
    published = make_publication(diagnostics=diagnostics(), residuals=residuals(), surplus=surplus)
    words = " ".join(bare(referee(published)).split())
    assert "Another model. It would give 6.000 (Poisson)." in words
    assert "Income elasticity of visits 0.400. Exact welfare per trip: 4.900 (equivalent)" in words


def test_no_finite_surplus_is_said_instead() -> None:
    values = make_surplus(1000.0)
    values[["value", "std_error", "ci_low", "ci_high"]] = np.nan
    words = bare(referee(make_publication(diagnostics=diagnostics(), surplus=values)))
    assert "gives no finite surplus, so there is no answer to change" in words


def test_an_open_interval_is_the_strongest_doubt() -> None:
    values = make_surplus(1000.0)
    values.loc[values["method"] == "simulated", "ci_high"] = np.nan
    words = bare(referee(make_publication(diagnostics=diagnostics(), surplus=values)))
    assert "has no finite upper end: these data bound the answer below" in words
    assert "other visitors (by up to 100 %)" in " ".join(words.split())


def test_tables_are_of_the_chosen_model_and_the_rest_of_all(section: str) -> None:
    """Counts of the chosen model only; the overdispersion test of the Poisson."""
    counts = section[section.index("Rows by their number of visits") :]
    counts = counts[: counts.index("</table>")]
    assert re.findall(r'scope="row">(.*?)</th>', counts) == ["0", "1 and more"]
    tests = bare(section[section.index("Tests and residuals") :])
    assert "About overdispersion." in tests
    assert "Without zone 002." in bare(section[section.index("Zones that move the answer most") :])


def test_a_hidden_zone_has_no_residual_that_gives_its_count_away() -> None:
    """Zones with fewer than 40 visits in the records are hidden here; their residuals go too."""
    study = make_study(publish={"suppress_below": 40})
    published = make_publication(study, diagnostics=diagnostics(), residuals=residuals())
    table = published.tables["zone_table"]
    hidden = set(table.loc[table["hidden_note"].notna(), "zone_id"])
    assert hidden
    kept = set(published.tables["residuals"]["zone_id"])
    assert kept == set(list(COST)[:8]) - hidden
    assert 'class="none"' in referee(published)


def test_records_without_zones_have_tables_only() -> None:
    published = make_publication(diagnostics=diagnostics(), residuals=None)
    assert "What the model leaves of each zone" not in published.report
    assert "Tests and residuals" in published.report


def test_likelihoods_of_least_squares_are_said_to_be_on_another_scale() -> None:
    fit = pd.DataFrame(make_publication().tables["fit"])
    logged = fit.iloc[[0]].assign(model="log_linear", chosen=False)
    words = "they stand on another scale"
    assert words not in make_publication().report
    assert words in make_publication(fit=pd.concat([fit, logged], ignore_index=True)).report
