"""Classes of a measure for a map: few, even in number of zones, with bounds that read well."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import numpy.typing as npt

MOST_CLASSES = 5


@dataclass(frozen=True)
class Classes:
    """Bounds of the classes of a measure above zero; class k runs from bound k to bound k + 1.

    The first bound is at most the least value and the last at least the greatest.
    """

    bounds: tuple[float, ...]

    def __len__(self) -> int:
        return max(0, len(self.bounds) - 1)

    def of(self, values: npt.NDArray[np.float64]) -> npt.NDArray[np.int64]:
        """Class of every value; −1 where it is zero, −2 where it is missing."""
        place = np.searchsorted(self.bounds, values, side="right") - 1
        place = np.clip(place, 0, max(0, len(self) - 1))
        return np.select([np.isnan(values), values <= 0], [-2, -1], place).astype(np.int64)

    def labels(self) -> list[str]:
        """'0.4 to 2.1' for every class."""
        words = [_short(bound) for bound in self.bounds]
        return [f"{low} to {high}" for low, high in pairwise(words)]


def quantile_classes(values: npt.NDArray[np.float64]) -> Classes:
    """Up to five classes with about as many zones each, between bounds of two digits."""
    above = np.sort(values[np.isfinite(values) & (values > 0)])
    if not len(above):
        return Classes(())
    inner = np.quantile(above, np.linspace(0, 1, MOST_CLASSES + 1)[1:-1])
    low, high = _down(above[0]), _up(above[-1])
    if low == high:
        high = _clean(high / _unit(high) + 1, _unit(high))
    bounds = {low, high} | {_near(cut) for cut in inner}
    return Classes(tuple(sorted(bound for bound in bounds if low <= bound <= high)))


def _unit(value: float) -> float:
    """Place of the second significant digit."""
    return 10.0 ** (math.floor(math.log10(value)) - 1)


def _clean(steps: float, unit: float) -> float:
    return float(f"{steps * unit:.2g}")


def _near(value: float) -> float:
    return _clean(round(value / _unit(value)), _unit(value))


def _down(value: float) -> float:
    down = _clean(math.floor(value / _unit(value) + 1e-9), _unit(value))
    return down if down <= value else _clean(down / _unit(value) - 1, _unit(value))


def _up(value: float) -> float:
    up = math.ceil(value / _unit(value) - 1e-9) * _unit(value)
    return _near(up) if _near(up) >= value else _near(up + _unit(up))


def _short(bound: float) -> str:
    return f"{bound:,.0f}" if bound >= 10 else f"{bound:.2g}"
