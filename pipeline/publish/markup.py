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

    A column that is empty in every row is left out.

    Parameters
    ----------
    numbers : positions of the columns that are set flush right.
    """
    right = frozenset(numbers)
    names, cells = list(head), [list(row) for row in rows]
    filled = {i for row in cells for i, cell in enumerate(row) if i == 0 or cell != ""}
    kept = sorted(filled) if cells else list(range(len(names)))

    def side(position: int) -> str | None:
        return "n" if position in right else None

    header = tag(
        "tr", *(tag("th", cell, scope="col", class_=side(i)) for i, cell in _at(names, kept))
    )
    body = [
        tag(
            "tr",
            *(
                tag("th", cell, scope="row", class_=side(i))
                if i == 0
                else tag("td", cell, class_=side(i))
                for i, cell in _at(row, kept)
            ),
        )
        for row in cells
    ]
    inner = (tag("caption", tag("span", caption)), tag("thead", header), tag("tbody", *body))
    grid = tag("table", *inner, class_=class_)
    return tag("div", grid, class_="wide", tabindex="0", role="region", aria_label=caption)


def _at(cells: list[object], places: list[int]) -> list[tuple[int, object]]:
    return [(place, cells[place]) for place in places]
