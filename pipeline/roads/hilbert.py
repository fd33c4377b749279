"""Order along a Hilbert curve: places that lie close together stand close together."""

from __future__ import annotations

import numpy as np

from pipeline.roads.arrays import Int32, Int64, compiled

LEVEL = 16  # the square is cut into 65,536 by 65,536 cells
LEAST = 10_000_000  # narrowest side of the square: a degree, in units of 1e-7


def hilbert_order(lon_e7: Int32, lat_e7: Int32) -> Int64:
    """Numbers of the places in the order of the curve, those of one cell in their own order."""
    return np.argsort(_along(lon_e7, lat_e7), kind="stable")


@compiled
def _along(lon_e7: Int32, lat_e7: Int32) -> Int64:
    """How far along the curve each place lies, in cells (Hilbert 1891)."""
    west, south = int(lon_e7.min()), int(lat_e7.min())
    width = max(int(lon_e7.max()) - west, LEAST) + 1
    height = max(int(lat_e7.max()) - south, LEAST) + 1
    along = np.empty(len(lon_e7), dtype=np.int64)
    cells = 1 << LEVEL
    for place in range(len(lon_e7)):
        x = ((np.int64(lon_e7[place]) - west) * cells) // width
        y = ((np.int64(lat_e7[place]) - south) * cells) // height
        distance, side = np.int64(0), np.int64(cells // 2)
        while side > 0:
            right, upper = (x & side) > 0, (y & side) > 0
            distance += side * side * ((3 * right) ^ upper)
            if not upper:
                if right:
                    x, y = cells - 1 - x, cells - 1 - y
                x, y = y, x
            side //= 2
        along[place] = distance
    return along
