"""What the report says of the zones' points, and of what a census leaves uncovered."""

from __future__ import annotations

from tests.publish.conftest import make_publication, make_zones


def test_the_choice_of_centroids_is_stated() -> None:
    zones = make_zones()
    kinds = ["given"] * (len(zones) - 2) + ["inside_polygon", "population_weighted"]
    report = make_publication(zones=zones.assign(centroid_source=kinds)).report
    assert f"as the zones file gives it ({len(zones) - 2} zones)" in report
    assert "a point inside the polygon, wherever its people live (1 zone)" in report
    assert "the mean place of the people of finer points (1 zone)" in report


def test_uncovered_area_is_reported_and_a_covered_one_is_said_to_be() -> None:
    zones = make_zones()
    cover = [0.25] + [1.0] * (len(zones) - 1)
    name = zones["zone_name"].iloc[0].replace("&", "&amp;")
    report = make_publication(zones=zones.assign(census_cover_share=cover)).report
    assert "They do not cover" in report
    assert f"in 1 zone; least of all {name} (25" in report
    whole = make_publication(zones=zones.assign(census_cover_share=1.0)).report
    assert "The census units cover every zone whole." in whole
    assert "They do not cover" not in whole
    assert "census units" not in make_publication(zones=zones).report
