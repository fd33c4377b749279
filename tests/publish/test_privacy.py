"""What is hidden cannot be worked out from what is published."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import Bounds, LinearConstraint, milp

from pipeline.publish.privacy import GIVEN_AWAY, HIDDEN_COLUMNS, REASON, hide_small_cells


def zone_table(
    counts: list[int], inside: list[bool] | None = None, site: list[str] | None = None
) -> pd.DataFrame:
    """Zones with these record counts; 100 visits a year for each record."""
    return pd.DataFrame(
        {
            "zone_id": [f"z{i}" for i in range(len(counts))],
            "site_id": site or "fen",
            "sampled_records": np.array(counts, dtype=float),
            "sampled_visits": 2.0 * np.array(counts),
            "visits": 100.0 * np.array(counts),
            "visits_se": 1.0,
            "multi_purpose": 0.5,
            "in_market": inside or [True] * len(counts),
        }
    )


def hidden(table: pd.DataFrame, below: int = 5) -> list[str]:
    shown = hide_small_cells(table, below=below)
    return shown.loc[shown[REASON].notna(), "zone_id"].tolist()


@pytest.mark.parametrize(
    ("counts", "names"),
    [
        ([9, 8, 7, 0], []),
        ([9, 8, 3, 0], ["z1", "z2"]),  # 3 alone would be the total less the rest
        ([9, 8, 1, 1], ["z1", "z2", "z3"]),  # two hidden that sum to 2 are 1 and 1
        ([9, 4, 4, 0], ["z1", "z2"]),  # sum 8: each may be 1 to 7
        ([30, 1, 0, 0], ["z0", "z1"]),
    ],
)
def test_small_counts_and_the_company_they_need(counts: list[int], names: list[str]) -> None:
    assert hidden(zone_table(counts)) == names


def test_everything_that_tells_of_the_count_is_blank() -> None:
    shown = hide_small_cells(zone_table([9, 8, 3, 0]), below=5)
    blank = shown[REASON].notna()
    columns = [name for name in HIDDEN_COLUMNS if name in shown]
    assert {"visits_se", "multi_purpose"} <= set(columns)
    assert shown.loc[blank, columns].isna().all(axis=None)
    assert shown.loc[~blank, columns].notna().all(axis=None)
    # Which of the two is the small one is not said.
    assert len(set(shown.loc[blank, REASON])) == 1


def test_each_side_of_the_market_has_a_total_of_its_own() -> None:
    """Outside the market lie 2 and 30: the 30 is hidden there, and nothing inside."""
    table = zone_table([9, 8, 2, 30], [True, True, False, False])
    assert hidden(table) == ["z2", "z3"]


def test_a_cell_that_nothing_can_hide_is_named() -> None:
    shown = hide_small_cells(zone_table([9, 8, 2], [True, True, False]), below=5)
    assert str(shown[REASON].iloc[2]).endswith(GIVEN_AWAY)
    assert shown[REASON].notna().tolist() == [False, False, True]


def test_nothing_is_hidden_where_the_study_does_not_ask() -> None:
    table = zone_table([1, 2])
    assert hide_small_cells(table, below=0) is table


def ranges(published: pd.DataFrame, table: pd.DataFrame) -> pd.DataFrame:
    """What a reader can work out: least and most of each hidden count, by integer programming.

    The reader knows every published count, the total of each side of each market, and that
    hidden counts are at least 1.
    """
    blank = published.index[published[REASON].notna()]
    side = table["site_id"] + table["in_market"].astype("str")
    left = (table["sampled_records"] - published["sampled_records"].fillna(0)).groupby(side).sum()
    sides = side[blank].unique()
    matrix = np.array([(side[blank] == name).to_numpy(dtype=float) for name in sides])
    totals = left[sides].to_numpy(dtype=float)
    found = []
    for goal in np.eye(len(blank)):
        ends = []
        for sign in (1, -1):
            best = milp(
                sign * goal,
                constraints=LinearConstraint(matrix, totals, totals),
                integrality=np.ones(len(blank), dtype=int),
                bounds=Bounds(1, np.inf),
            )
            assert best.success
            ends.append(sign * best.fun)
        found.append(ends)
    return pd.DataFrame(found, index=blank, columns=["least", "most"])


@given(
    st.lists(
        st.tuples(st.integers(0, 12), st.booleans(), st.sampled_from(["fen", "mere"])),
        min_size=1,
        max_size=12,
    ),
    st.integers(2, 6),
)
@settings(derandomize=True, max_examples=60, deadline=None)
def test_no_hidden_count_can_be_worked_out_from_the_margins(
    rows: list[tuple[int, bool, str]], below: int
) -> None:
    counts, inside, sites = (list(column) for column in zip(*rows, strict=True))
    table = zone_table(counts, inside, sites)
    shown = hide_small_cells(table, below=below)
    small = (table["sampled_records"] > 0) & (table["sampled_records"] < below)
    assert shown.loc[small, REASON].notna().all()
    protected = shown[REASON].notna() & ~shown[REASON].str.endswith(GIVEN_AWAY, na=False)
    if shown[REASON].notna().any():
        found = ranges(shown, table).loc[shown.index[protected]]
        assert (found["most"] - found["least"] >= below).all()
    # What is given away is so only where its whole block is hidden.
    given_away = table[shown[REASON].str.endswith(GIVEN_AWAY, na=False)]
    for site, is_inside in set(zip(given_away["site_id"], given_away["in_market"], strict=True)):
        block = (table["site_id"] == site) & (table["in_market"] == is_inside)
        assert shown.loc[block & (table["sampled_records"] > 0), REASON].notna().all()
