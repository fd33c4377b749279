"""WCAG 2.2 AA by axe-core, in light and dark, on a laptop's screen and a phone's.

axe-core is fetched by npm into a folder for temporary files; without npm or network it is skipped.
"""

from __future__ import annotations

import shutil
import subprocess
import tempfile
from pathlib import Path
from typing import Any

import pytest

pytestmark = pytest.mark.slow
VERSION = "4.10.3"
RULES = ("wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice")


@pytest.fixture(scope="module")
def axe() -> str:
    """The source of axe-core."""
    folder = Path(tempfile.gettempdir()) / f"axe-core-{VERSION}"
    source = folder / "node_modules" / "axe-core" / "axe.min.js"
    if not source.is_file():
        npm = shutil.which("npm")
        if npm is None:
            pytest.skip("needs npm to fetch axe-core: apt-get install npm")
        command = (npm, "install", "--prefix", str(folder), "--no-audit", f"axe-core@{VERSION}")
        if subprocess.run(command, capture_output=True, check=False).returncode:
            pytest.skip(f"npm could not fetch axe-core; try: npm install axe-core@{VERSION}")
    return source.read_text(encoding="utf-8")


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("width", [1280, 360])
def test_no_violation(browser: Any, report: Path, axe: str, scheme: str, width: int) -> None:
    context = browser.new_context(
        viewport={"width": width, "height": 800}, color_scheme=scheme, bypass_csp=True
    )
    page = context.new_page()
    page.goto(report.as_uri())
    page.evaluate("document.querySelectorAll('details').forEach((d) => { d.open = true; })")
    page.evaluate(axe)
    found = page.evaluate("rules => axe.run({runOnly: rules})", list(RULES))
    context.close()
    problems = [
        f"{violation['id']}: {node['html'][:100]} ({node['failureSummary'][:200]})"
        for violation in found["violations"]
        for node in violation["nodes"]
    ]
    assert problems == []
    assert len(found["passes"]) > 20
