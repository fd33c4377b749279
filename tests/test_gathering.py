"""Tables of single sites put together, against pandas' own way of doing it."""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.gathering import Gathering


def test_two_sites_of_three_zones_stand_zone_by_zone() -> None:
    """Site a has no route to z2: its access point is missing there."""
    a = pd.DataFrame(
        {
            "zone_id": ["z1", "z2", "z3"],
            "site_id": "a",
            "access_id": pd.Series(["gate", None, "pier"], dtype="str"),
            "distance_km": [1.0, np.nan, 3.0],
        }
    )
    b = a.assign(
        site_id="b",
        access_id=pd.Series(["pier", "pier", "lot"], dtype="str"),
        distance_km=[4.0, 5.0, 6.0],
    )
    gathering = Gathering(2)
    gathering.put(0, a)
    gathering.put(1, b)
    table = gathering.table()
    expected = pd.concat([a, b]).sort_index(kind="stable").reset_index(drop=True)
    pd.testing.assert_frame_equal(table, expected)
    assert list(table["access_id"].isna()) == [False, False, True, False, False, False]
