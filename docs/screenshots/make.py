"""Makes the pictures of this folder from a finished run's report.

    python docs/screenshots/make.py data/demo/output/report.html

Needs Chromium and Playwright.
"""

from __future__ import annotations

import importlib
import shutil
import sys
from pathlib import Path
from typing import Any

from PIL import Image

HERE = Path(__file__).parent
SCREENS = (
    ("laptop", 1280, 1130, "light", None),
    ("dark", 1280, 1130, "dark", None),
    ("phone", 360, 1500, "light", None),
    ("fees", 1280, 800, "light", "#fees"),
)


def take(
    browser: Any, report: Path, name: str, size: tuple[int, int], scheme: str, part: str | None
) -> None:
    """One picture: the top of the page, or one part of it."""
    width, height = size
    viewport = {"width": width, "height": height}
    context = browser.new_context(viewport=viewport, color_scheme=scheme)
    page = context.new_page()
    page.goto(report.resolve().as_uri())
    path = str(HERE / f"{name}.png")
    if part:
        page.locator(part).screenshot(path=path)
    else:
        page.screenshot(path=path)
    context.close()
    # A palette is plenty for a flat page and keeps the file small.
    with Image.open(path) as picture:
        small = picture.convert("RGB").quantize(128)
    small.save(path, optimize=True)


def main(report: Path) -> None:
    """Take all pictures."""
    library = importlib.import_module("playwright.sync_api")
    with library.sync_playwright() as playwright:
        chromium = shutil.which("chromium") or "chromium"
        browser = playwright.chromium.launch(executable_path=chromium, args=["--no-sandbox"])
        for name, width, height, scheme, part in SCREENS:
            take(browser, report, name, (width, height), scheme, part)
        browser.close()


if __name__ == "__main__":
    main(Path(sys.argv[1]))
