"""Makes the pictures of this folder, and its page, from a finished run.

    python docs/gallery/make.py data/demo/output

Needs Chromium, Playwright and Debian's poppler-utils.
"""

from __future__ import annotations

import importlib
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any, NamedTuple

from PIL import Image

from pipeline.publish.pdf import print_report

HERE = Path(__file__).parent
INTRODUCTION = """\
# Gallery

Every picture is made from the demo's run (an invented county) by `python docs/gallery/make.py
data/demo/output`.
"""


class Picture(NamedTuple):
    """A picture of the report: its file, the screen, the part (the top where none), and words."""

    name: str
    words: str
    width: int = 1280
    height: int = 1130
    scheme: str = "light"
    part: str | None = None


SCREENS = (
    Picture("laptop", "The answer first: the value with its interval, then what it rests on"),
    Picture("map", "The map, with its measures to choose from", part="#map"),
    Picture("demand", "The demand curve and its band on the zones' visit rates", part="#demand"),
    Picture("fees", "What a fee would do: slider, three charts and a table", part="#fees"),
    Picture("effects", "What other assumptions would do to the value", part="#effects"),
    Picture("referee", "For a referee: tests, residuals, influence", part="#referee"),
    Picture("dark", "The same page on a screen set to dark", scheme="dark"),
    Picture("phone", "On a phone", width=360, height=1500),
    Picture("phone_assumed", "Assumptions as cards on a phone", width=360, part="#assumed"),
)
PRINTED = Picture("print", "Printed on A4: the first four pages of `make pdf`")
FIGURES = {
    "demand_{site}": "Demand curve, as in the folder of figures (PNG, SVG and PDF)",
    "fees_{site}": "Fees, as in the folder of figures",
}
TALLEST_PX = 2400


def take(browser: Any, report: Path, picture: Picture) -> None:
    """The top of the page, or one part of it, on the picture's screen."""
    viewport = {"width": picture.width, "height": picture.height}
    context = browser.new_context(viewport=viewport, color_scheme=picture.scheme)
    page = context.new_page()
    page.goto(report.resolve().as_uri())
    path = str(HERE / f"{picture.name}.png")
    if picture.part:
        page.locator(picture.part).screenshot(path=path)
    else:
        page.screenshot(path=path)
    context.close()
    with Image.open(path) as image:
        keep(image.crop((0, 0, image.width, min(image.height, TALLEST_PX))), picture.name)


def keep(image: Image.Image, name: str) -> None:
    """A palette is plenty for a flat page and keeps the file small."""
    image.convert("RGB").quantize(128).save(HERE / f"{name}.png", optimize=True)


def take_print(report: Path) -> None:
    """The first pages of the print, side by side."""
    with tempfile.TemporaryDirectory() as folder:
        printed = Path(folder) / "report.pdf"
        print_report(report, printed)
        command = ("pdftoppm", "-r", "50", "-l", "4", "-png", str(printed), f"{folder}/page")
        subprocess.run(command, check=True)
        pages = [Image.open(path) for path in sorted(Path(folder).glob("page*.png"))]
        width, height = pages[0].size
        sheet = Image.new("RGB", ((width + 8) * len(pages), height), "gray")
        for place, page in enumerate(pages):
            sheet.paste(page, (place * (width + 8), 0))
    keep(sheet, PRINTED.name)


def take_figures(output: Path) -> list[Picture]:
    """The figures of the first site, smaller."""
    taken = []
    for pattern, words in FIGURES.items():
        path = sorted((output / "figures").glob(pattern.format(site="*") + ".png"))[0]
        name = "figure_" + pattern.partition("_")[0]
        with Image.open(path) as image:
            image.thumbnail((1000, 1000))
            keep(image, name)
        taken.append(Picture(name, words))
    return taken


def main(output: Path) -> None:
    """Take all pictures and write the page."""
    report = output / "report.html"
    library = importlib.import_module("playwright.sync_api")
    with library.sync_playwright() as playwright:
        chromium = shutil.which("chromium") or "chromium"
        browser = playwright.chromium.launch(executable_path=chromium, args=["--no-sandbox"])
        for picture in SCREENS:
            take(browser, report, picture)
        browser.close()
    take_print(report)
    shown = [*SCREENS, PRINTED, *take_figures(output)]
    entries = [f"## {p.words}\n\n![{p.words}]({p.name}.png)\n" for p in shown]
    (HERE / "README.md").write_text("\n".join([INTRODUCTION, *entries]), encoding="utf-8")


if __name__ == "__main__":
    main(Path(sys.argv[1]))
