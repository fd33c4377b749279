"""The gallery shows what there is, and everything that there is."""

from __future__ import annotations

import re
from pathlib import Path

ROOT = Path(__file__).parents[1]
GALLERY = ROOT / "docs" / "gallery"
MOST_BYTES = 200_000


def shown_in(page: Path) -> set[Path]:
    links = re.findall(r"!\[[^\]]+\]\(([^)]+\.png)\)", page.read_text(encoding="utf-8"))
    return {(page.parent / link).resolve() for link in links}


def test_gallery_shows_every_picture_once_it_is_made() -> None:
    assert shown_in(GALLERY / "README.md") == {path.resolve() for path in GALLERY.glob("*.png")}


def test_pictures_of_the_readme_are_there() -> None:
    shown = shown_in(ROOT / "README.md")
    assert len(shown) >= 2
    assert all(path.is_file() for path in shown)


def test_pictures_are_small() -> None:
    assert max(path.stat().st_size for path in GALLERY.glob("*.png")) < MOST_BYTES
