"""HTML and SVG elements from Python; text is escaped unless it is already an element."""

from __future__ import annotations

import html
from collections.abc import Iterable

VOID = frozenset({"br", "col", "meta", "circle", "input", "line", "path", "rect", "use"})


class Html(str):
    """Text that is already markup and is not escaped again."""

    __slots__ = ()


def text(value: object) -> Html:
    """A value as escaped text; markup stays as it is."""
    return value if isinstance(value, Html) else Html(html.escape(str(value), quote=True))


def tag(name: str, /, *children: object, **attributes: object) -> Html:
    """One element with its children; children that are None are left out.

    An attribute's trailing underscore is dropped and inner ones become hyphens
    (``class_``, ``stroke_width``); an attribute that is None is left out.
    """
    words = [name]
    for key, value in attributes.items():
        if value is not None:
            words.append(f'{key.rstrip("_").replace("_", "-")}="{text(value)}"')
    opening = " ".join(words)
    inside = join(children)
    if name in VOID and not inside:
        return Html(f"<{opening}>" if name in ("br", "col", "input", "meta") else f"<{opening}/>")
    return Html(f"<{opening}>{inside}</{name}>")


def join(parts: Iterable[object], separator: str = "") -> Html:
    """Elements and texts one after the other."""
    return Html(separator.join(text(part) for part in parts if part is not None))


def table(
    head: Iterable[object],
    rows: Iterable[Iterable[object]],
    *,
    caption: str,
    numbers: Iterable[int] = (),
    class_: str | None = None,
) -> Html:
    """A table with a caption, one header row and row headers in the first column.

    A column that is empty in every row is left out. With the class `cards` each row becomes a
    card on a narrow screen; its cells carry the column's name with them, and say what they are,
    since a table that is not laid out as one is not read out as one either.

    Parameters
    ----------
    numbers : positions of the columns that are set flush right.
    """
    right, cards = frozenset(numbers), "cards" in (class_ or "").split()
    names, cells = list(head), [list(row) for row in rows]
    filled = {i for row in cells for i, cell in enumerate(row) if i == 0 or cell != ""}
    kept = sorted(filled) if cells else list(range(len(names)))

    def side(position: int) -> str | None:
        return "n" if position in right else None

    def role(name: str) -> str | None:
        return name if cards else None

    def cell_of(position: int, cell: object) -> Html:
        if position == 0:
            how = {"scope": "row", "role": role("rowheader")}
            return tag("th", cell, class_=side(position), **how)
        label = names[position] if cards else None
        return tag("td", cell, class_=side(position), role=role("cell"), data_head=label)

    def heading(position: int, name: object) -> Html:
        return tag("th", name, scope="col", class_=side(position), role=role("columnheader"))

    header = tag("tr", *(heading(i, name) for i, name in _at(names, kept)), role=role("row"))
    body = [
        tag("tr", *(cell_of(i, c) for i, c in _at(row, kept)), role=role("row")) for row in cells
    ]
    inner = (tag("caption", tag("span", caption)), tag("thead", header), tag("tbody", *body))
    grid = tag("table", *inner, class_=class_, role=role("table"))
    return tag("div", grid, class_="wide", tabindex="0", role="region", aria_label=caption)


def _at(cells: list[object], places: list[int]) -> list[tuple[int, object]]:
    return [(place, cells[place]) for place in places]
