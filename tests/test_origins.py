"""Geocode: what each written code becomes, and that no record is lost."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.errors import GeocodingError
from pipeline.origins import geocode, summarise_geocode
from pipeline.origins.candidates import nearest_codes
from pipeline.origins.codes import normalise
from pipeline.tables import ORIGIN_STATUSES, Crosswalk, Origins, OriginSummary
from tests.visit_world import make_records, make_study, make_zones

ANY = make_study(visits={"max_unmatched_share": 1.0})


def place(code: str | None, **sections: Any) -> pd.Series[Any]:
    """The row of `origins` that one written code becomes."""
    visits = {"max_unmatched_share": 1.0, **sections.pop("visits", {})}
    study = make_study(visits=visits, **sections)
    origins, _ = geocode(make_records([code]), make_zones(), None, study=study)
    return Origins.checked(origins).iloc[0]


@pytest.mark.parametrize(
    ("written", "code"),
    [
        ("sw1a 1aa", "SW1A1AA"),
        (" 111-22 ", "11122"),
        ("01001.0", "01001"),
        ("43215,0", "43215"),
        ("4.3215e4", "43215"),
        ("4.3215E+04", "43215"),
        ("４３２１５", "43215"),  # full-width digits
        ("٤٣٢١٥", "43215"),  # Arabic-Indic digits
        ("'02134", "02134"),
        ("４.３２１５ｅ４", "43215"),
        ("D-10 115", "D10115"),
        ("–.–", ""),
        ("4E4", "4E4"),  # a spreadsheet writes 4E+04; this may be a code
    ],
)
def test_normalise(written: str, code: str) -> None:
    assert normalise(written) == code


@given(st.text(max_size=12))
@settings(derandomize=True, max_examples=300)
def test_normalising_twice_changes_nothing(written: str) -> None:
    once = normalise(written)
    assert normalise(once) == once
    assert all(character.isalnum() for character in once)


@given(st.from_regex(r"[0-9]{4,6}", fullmatch=True), st.sampled_from(["{}.0", " {} ", "{}-"]))
@settings(derandomize=True, max_examples=50)
def test_damage_that_never_changes_a_code_is_undone(code: str, damage: str) -> None:
    assert normalise(damage.format(code)) == code


@pytest.mark.parametrize(
    ("written", "zone", "status", "note"),
    [
        ("01001", "west", "matched", None),
        ("1001", "west", "matched", "read as 01001: leading zeros restored"),
        ("1001.0", "west", "matched", "read as 01001: leading zeros restored"),
        ("1.001E+03", "west", "matched", "read as 01001: leading zeros restored"),
        ("9.9E+04", "isle", "matched", "read as 99001: read back from scientific notation"),
        ("1.00E+03", None, "malformed", "2 codes may be meant: 01001, 01002"),
        ("O1OO2", "east", "matched", "read as 01002: O and 0, or I and 1, exchanged"),
        ("01003", None, "unknown_code", "nearest valid codes: 01001, 01002"),
        ("10001", None, "unknown_code", "nearest valid codes: 01001"),
        ("55555", None, "unknown_code", None),
        ("hello", None, "malformed", None),
        ("010011", None, "malformed", "nearest valid codes: 01001"),
        ("---", None, "missing", None),
        ("nan", None, "missing", None),
        (None, None, "missing", None),
    ],
)
def test_status_of_a_code(
    written: str | None, zone: str | None, status: str, note: str | None
) -> None:
    row = place(written)
    assert row["origin_status"] == status
    assert (row["zone_id"] if zone else None) == zone
    assert pd.isna(row["zone_id"]) == (zone is None)
    assert (None if pd.isna(row["origin_note"]) else row["origin_note"]) == note


def test_foreign_codes_match_as_written_or_as_normalised_after_the_own_codes() -> None:
    foreign = {"foreign_codes": (r"D-\d{5}", r"[A-Z]{1,2}\d.*", r"\d{5}")}
    for written in ("d-10115", "SW1A 1AA", "77777"):
        assert place(written, visits=foreign)["origin_status"] == "foreign"
    assert place("01001", visits=foreign)["origin_status"] == "matched"


def test_a_pattern_decides_what_is_well_formed() -> None:
    """With a pattern of four digits, 1001 is a code of its own, not 01001 without its zero."""
    row = place("1001", zones={"postal_code_pattern": r"\d{4,5}"})
    assert row["origin_status"] == "unknown_code"
    assert row["origin_note"] == "nearest valid codes: 01001"


def test_zeros_are_restored_only_where_one_code_results() -> None:
    zones = make_zones(postal_code=["0071", "00071", "99001"])
    origins, _ = geocode(make_records(["71"]), zones, None, study=ANY)
    assert origins.loc[0, "origin_status"] == "malformed"
    assert origins.loc[0, "origin_note"] == "2 codes may be meant: 00071, 0071"


def test_the_crosswalk_places_codes_that_are_no_zone() -> None:
    crosswalk = Crosswalk.checked(pd.DataFrame({"postal_code": ["01-900"], "zone_id": ["west"]}))
    origins, _ = geocode(make_records(["01900", "1900"]), make_zones(), crosswalk, study=ANY)
    assert origins["origin_status"].tolist() == ["crosswalk", "crosswalk"]
    assert origins["zone_id"].tolist() == ["west", "west"]


@pytest.mark.parametrize(
    ("crosswalk", "message"),
    [
        (
            {"postal_code": ["5", "6"], "zone_id": ["west", "nowhere"]},
            r"'6' to .*'nowhere'.*ent.* 2",
        ),
        ({"postal_code": ["01001"], "zone_id": ["east"]}, "the code of zone 'west'"),
        ({"postal_code": ["0-5", "05"], "zone_id": ["east", "west"]}, "'05' belongs to zones"),
        ({"postal_code": ["-"], "zone_id": ["east"]}, "neither letter nor digit"),
    ],
)
def test_a_crosswalk_that_cannot_be_is_refused(
    crosswalk: dict[str, list[str]], message: str
) -> None:
    with pytest.raises(GeocodingError, match=message):
        geocode(make_records(["01001"]), make_zones(), pd.DataFrame(crosswalk), study=ANY)


def test_two_zones_with_one_code_are_refused() -> None:
    zones = make_zones(postal_code=["01001", "010-01", "99001"])
    with pytest.raises(GeocodingError, match="'01001' belongs to zones 'west' and 'east'"):
        geocode(make_records(["01001"]), zones, None, study=ANY)


def test_too_many_lost_records_stop_the_run() -> None:
    """1 unknown of 4 domestic records is 25 %; the foreign one does not count."""
    records = make_records(["01001", "01002", "01002", "01009", "A1"])
    foreign = {"foreign_codes": ("A.*",)}
    with pytest.raises(GeocodingError) as caught:
        geocode(records, make_zones(), None, study=make_study(visits=foreign))
    message = str(caught.value)
    assert "1 of 4 visit records (25.0%) have no zone: 1 unknown_code" in message
    assert "allows 10.0%" in message
    assert "record 'r3' with code '01009' (nearest valid codes: 01001, 01002)" in message
    assert "max_unmatched_share" in message
    allowed = make_study(visits={**foreign, "max_unmatched_share": 0.25})
    geocode(records, make_zones(), None, study=allowed)


def test_summary_of_a_small_register() -> None:
    """Two parties of 2 and one unknown party (the mean, 2) from the west; one lost."""
    records = make_records(
        ["01001", "01001", "1001", "55555"],
        party_size=[2, 2, np.nan, 2],
        trips=[1, 3, 1, 5],
    )
    outputs = geocode(records, make_zones(), None, study=ANY)
    summary = OriginSummary.checked(outputs[1])
    assert summary["origin_status"].tolist() == ["matched", "unknown_code"]
    assert summary["records"].tolist() == [3, 1]
    assert summary["trips"].tolist() == [5, 5]
    assert summary["person_visits"].tolist() == [10, 10]
    assert summary["share"].tolist() == [0.75, 0.25]
    assert summary["party_size_filled"].tolist() == [1, 0]
    assert summarise_geocode(outputs) == (
        "4 records: 3 matched, 1 unknown_code; 1 without party size take the mean"
    )


CODES = st.one_of(
    st.none(),
    st.sampled_from(["01001", "1002", "99001.0", "F-1", "0100I", "77777", "9.9E+04"]),
    st.text(max_size=8),
)


@given(
    st.lists(
        st.tuples(CODES, st.sampled_from(["reserve", "lake"]), st.integers(0, 9)),
        min_size=1,
        max_size=30,
    )
)
@settings(derandomize=True, max_examples=25, deadline=None)
def test_what_goes_in_comes_out(rows: list[tuple[str | None, str, int]]) -> None:
    codes, sites, trips = (list(column) for column in zip(*rows, strict=True))
    records = make_records(codes, site_id=sites, trips=trips)
    before = records.copy()
    study = make_study(visits={"max_unmatched_share": 1.0, "foreign_codes": ("F-.*",)})
    origins, summary = geocode(records, make_zones(), None, study=study)
    pd.testing.assert_frame_equal(records, before)
    Origins.checked(origins)
    OriginSummary.checked(summary)
    assert origins["record_id"].tolist() == records["record_id"].tolist()
    assert summary["records"].sum() == len(records)
    assert summary["trips"].sum() == records["trips"].sum()
    assert summary["person_visits"].sum() == pytest.approx(2 * sum(trips))
    placed = origins["origin_status"].isin(["matched", "crosswalk"])
    assert (origins["zone_id"].notna() == placed).all()
    assert set(summary["origin_status"]) <= set(ORIGIN_STATUSES)


def slips(a: str, b: str) -> int:
    """Optimal string alignment distance, written out in full as the check."""
    d = np.zeros((len(a) + 1, len(b) + 1), dtype=int)
    d[:, 0], d[0, :] = range(len(a) + 1), range(len(b) + 1)
    for i, j in itertools.product(range(1, len(a) + 1), range(1, len(b) + 1)):
        d[i, j] = min(d[i - 1, j] + 1, d[i, j - 1] + 1, d[i - 1, j - 1] + (a[i - 1] != b[j - 1]))
        if i > 1 and j > 1 and a[i - 1] == b[j - 2] and a[i - 2] == b[j - 1]:
            d[i, j] = min(d[i, j], d[i - 2, j - 2] + 1)
    return int(d[-1, -1])


@given(
    st.text("0123", min_size=1, max_size=5),
    st.sets(st.text("0123", min_size=1, max_size=5), max_size=30),
)
@settings(derandomize=True, max_examples=200)
def test_nearest_codes_are_those_one_slip_away(code: str, valid: set[str]) -> None:
    valid.discard(code)
    found = nearest_codes(code, valid, most=1000)
    assert sorted(found) == sorted(other for other in valid if slips(code, other) == 1)
