"""Lines taken apart at their vertices, and every stretch between two vertices kept once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import shapely

Numbers = npt.NDArray[np.float64]
Places = npt.NDArray[np.int64]


@dataclass(frozen=True)
class Stretches:
    """Stretches without regard to direction, and which lines run over them.

    Attributes
    ----------
    ends : (stretches, 2, 2): both ends of every stretch.
    stretch, line : positions of a stretch and of a line that runs over it, each pair once.
    """

    ends: Numbers
    stretch: Places
    line: Places


def take_apart(lines: npt.NDArray[np.object_], *, decimals: int) -> Stretches:
    """Stretches of `lines`; vertices that agree to so many decimals are the same."""
    points, owner = shapely.get_coordinates(lines, return_index=True)
    whole = np.rint(points * 10.0**decimals).astype(np.int64)
    # One whole number per vertex: sorting those is far cheaper than sorting rows.
    key = (whole[:, 0] - whole[:, 0].min(initial=0)) * _span(whole[:, 1]) + (
        whole[:, 1] - whole[:, 1].min(initial=0)
    )
    _, first, vertex = np.unique(key, return_index=True, return_inverse=True)
    step = (owner[1:] == owner[:-1]) & (vertex[1:] != vertex[:-1])
    low = np.minimum(vertex[1:], vertex[:-1])[step]
    high = np.maximum(vertex[1:], vertex[:-1])[step]
    pairs, stretch = np.unique(low * len(first) + high, return_inverse=True)
    runs = np.unique(stretch * max(1, len(lines)) + owner[1:][step])
    start, end = np.divmod(pairs, max(1, len(first)))
    corners = points[first].round(decimals)
    return Stretches(
        ends=np.stack([corners[start], corners[end]], axis=1),
        stretch=np.asarray(runs // max(1, len(lines)), dtype=np.int64),
        line=np.asarray(runs % max(1, len(lines)), dtype=np.int64),
    )


def _span(values: Places) -> int:
    return int(values.max(initial=0) - values.min(initial=0)) + 1
