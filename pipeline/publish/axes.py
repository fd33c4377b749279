"""Axes of the charts: from figures to the drawing, ticks at round figures."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from pipeline.publish.markup import Html, join, tag

Numbers = npt.NDArray[np.float64]
LONG_TICK = 4
"""Characters of a tick's figure that fit around the end of an axis."""


@dataclass(frozen=True)
class Axis:
    """One axis from `low` to `high`, drawn from `start` to `end` (px).

    `root` spaces it by square roots, so that small figures stay visible beside great ones.
    """

    low: float
    high: float
    start: float
    end: float
    root: bool = False

    def at(self, values: Numbers | float) -> Numbers:
        """Where figures stand, px; figures beyond the axis stand at its end."""
        inside = np.clip(np.asarray(values, dtype=np.float64), self.low, self.high)
        share = (inside - self.low) / (self.high - self.low)
        if self.root:
            share = np.sqrt(share)
        return np.asarray(self.start + share * (self.end - self.start))

    def ticks(self, wanted: int = 5) -> list[float]:
        """Round figures on the axis."""
        if self.root:
            top = math.sqrt(self.high)
            steps = [float(f"{(top * k / wanted) ** 2:.1g}") for k in range(wanted + 1)]
            return sorted({step for step in steps if step <= self.high})
        step = round_up((self.high - self.low) / wanted)
        first = math.ceil(self.low / step)
        return [k * step for k in range(first, math.floor(self.high / step + 1e-9) + 1)]


def round_up(value: float) -> float:
    """The least of 1, 2, 2.5 and 5 times a power of ten that is not below `value`."""
    if value <= 0 or not math.isfinite(value):
        return 1.0
    size = 10.0 ** math.floor(math.log10(value))
    return next(step * size for step in (1, 2, 2.5, 5, 10) if step * size >= value * (1 - 1e-9))


def tick_words(value: float) -> str:
    """A tick's figure, short."""
    return f"{value:,.0f}" if abs(value) >= 100 else f"{value:g}"


def scaled_unit(highest: float) -> tuple[float, str]:
    """Divisor and word that keep an axis' figures short: (1e6, 'million')."""
    for least, size, word in ((1e9, 1e9, "billion"), (1e6, 1e6, "million"), (1e4, 1e3, "thousand")):
        if highest >= least:
            return size, word
    return 1.0, ""


def grid(x: Axis, y: Axis, *, x_ticks: int = 6, y_ticks: int = 5) -> Html:
    """Lines at the ticks of `y`, figures at the ticks of both, and the line of `x`."""
    parts = []
    for tick in y.ticks(y_ticks):
        at = f"{float(y.at(tick)):.1f}"
        parts.append(tag("line", x1=x.start, x2=x.end, y1=at, y2=at, class_="grid"))
        words = tick_words(tick)
        parts.append(tag("text", words, x=x.start - 8, y=at, dy=".35em", text_anchor="end"))
    for tick in x.ticks(x_ticks):
        at = f"{float(x.at(tick)):.1f}"
        base = y.start
        parts.append(tag("line", x1=at, x2=at, y1=base, y2=base + 5, class_="tick"))
        words = tick_words(tick)
        # A long figure at the very end would leave the drawing.
        anchor = "end" if len(words) > LONG_TICK and tick == x.high else "middle"
        parts.append(tag("text", words, x=at, y=base + 10, dy=".8em", text_anchor=anchor))
    parts.append(tag("line", x1=x.start, x2=x.end, y1=y.start, y2=y.start, class_="axis"))
    return tag("g", *parts, class_="axes")


def line(x: Numbers, y: Numbers) -> str:
    """SVG path through points, px."""
    return "M" + "L".join(f"{a:.1f} {b:.1f}" for a, b in zip(x, y, strict=True))


def band(x: Numbers, low: Numbers, high: Numbers) -> str:
    """SVG path around the area between two lines, px."""
    return line(np.concatenate([x, x[::-1]]), np.concatenate([low, high[::-1]])) + "z"


def titled(*parts: object, title: str, width: float, height: float, class_: str) -> Html:
    """A chart with its name for those who cannot see it."""
    return tag(
        "svg",
        tag("title", title),
        join(parts),
        viewBox=f"0 0 {width:g} {height:g}",
        role="img",
        class_=class_,
    )
