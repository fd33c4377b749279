"""A real browser on the county's report.

The browser is Debian's Chromium, driven by Playwright. Where one of the two is missing the tests
skip, saying how to get it.
"""

from __future__ import annotations

import importlib
import shutil
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from pipeline.publish import Publication
from pipeline.surplus import surplus
from tests.publish.conftest import make_publication, make_study, make_tables

HOW = "needs {}: apt-get install chromium && pip install playwright"


@pytest.fixture(scope="session")
def browser() -> Iterator[Any]:
    """Chromium without a window."""
    chromium = shutil.which("chromium") or shutil.which("chromium-browser")
    if chromium is None:
        pytest.skip(HOW.format("Chromium"))
    try:
        library = importlib.import_module("playwright.sync_api")
    except ImportError:
        pytest.skip(HOW.format("Playwright"))
    with library.sync_playwright() as playwright:
        started = playwright.chromium.launch(
            executable_path=chromium, args=["--no-sandbox", "--disable-gpu"]
        )
        yield started
        started.close()


@pytest.fixture(scope="session")
def published() -> Publication:
    """The county, its fees worked out by the surplus stage from draws of the parameters."""
    study, tables = make_study(surplus={"fees": [0.0, 2.5, 5.0, 7.5, 20.0]}), make_tables()
    known = (tables["estimates"], tables["fit"], tables["zone_table"], None)
    values, fees, zones = surplus(*known, study=study)
    return make_publication(study, surplus=values, fee_schedule=fees, zone_surplus=zones)


@pytest.fixture(scope="session")
def report(published: Publication, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Where the report has been written."""
    path = tmp_path_factory.mktemp("browser") / "report.html"
    path.write_text(published.report, encoding="utf-8")
    return path


@pytest.fixture
def page(browser: Any, report: Path) -> Iterator[Any]:
    """The report, opened on a laptop's screen; anything that goes wrong in it fails the test."""
    context = browser.new_context(viewport={"width": 1280, "height": 800})
    opened = context.new_page()
    said: list[str] = []
    asked: list[str] = []
    opened.on("console", lambda message: said.append(message.text))
    opened.on("pageerror", lambda error: said.append(str(error)))
    opened.on("request", lambda request: asked.append(request.url))
    opened.goto(report.as_uri())
    yield opened
    context.close()
    assert said == []
    assert asked == [report.as_uri()]
