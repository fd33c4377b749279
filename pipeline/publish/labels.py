"""Where to put the names on a map so that none covers another and none is cut off."""

from __future__ import annotations

from dataclasses import dataclass

LETTER = 0.66
"""Mean width of a letter over its height, generous for the faces that readers have."""


@dataclass(frozen=True)
class Label:
    """A name at its place: `x, y` of its base line, and which end stands there."""

    name: str
    x: float
    y: float
    anchor: str


Box = tuple[float, float, float, float]


def place_labels(
    points: list[tuple[str, float, float]], *, size: float, width: float, height: float
) -> list[Label]:
    """Give every point's name a free place around it, first come first served.

    Parameters
    ----------
    points : name, x and y, the most important first. One without a free place gets no label.
    size : height of the letters at their largest, px of the drawing.
    """
    taken: list[Box] = [_marker(x, y) for _, x, y in points]
    labels: list[Label] = []
    for name, x, y in points:
        for label, box in _candidates(name, x, y, size):
            inside = box[0] >= 0 and box[1] >= 0 and box[2] <= width and box[3] <= height
            own = _marker(x, y)
            if inside and not any(_overlap(box, other) for other in taken if other != own):
                labels.append(label)
                taken.append(box)
                break
    return labels


def _candidates(name: str, x: float, y: float, size: float) -> list[tuple[Label, Box]]:
    """Right, left, above, below, and the corners, with the box that each would take."""
    gap, length = 12.0, LETTER * size * len(name)
    found = []
    for dx, dy in ((1, 0), (-1, 0), (0, -1), (0, 1), (1, -1), (1, 1), (-1, -1), (-1, 1)):
        anchor = {1: "start", -1: "end", 0: "middle"}[dx]
        base = y + size * 0.35 + dy * (gap + size * 0.45)
        at = x + dx * gap * (1.0 if dy == 0 else 0.5)
        left = {1: at, -1: at - length, 0: at - length / 2}[dx]
        found.append((Label(name, at, base, anchor), (left, base - size, left + length, base + 4)))
    return found


def _marker(x: float, y: float) -> Box:
    return (x - 9, y - 9, x + 9, y + 9)


def _overlap(one: Box, other: Box) -> bool:
    return one[0] < other[2] and other[0] < one[2] and one[1] < other[3] and other[1] < one[3]
