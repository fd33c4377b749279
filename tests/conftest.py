"""Checks against something outside the project: recorded, so that people can read them.

A test that asks for `record_check` states the value found, the one expected, how far apart they
may be, and where the expected one comes from. With ``--validation-to docs`` (``make validate``)
all of them are written to ``validation.json`` and ``validation.md`` in that folder.
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from pathlib import Path
from typing import cast

import pytest

Check = dict[str, object]
Named = tuple[str, Check]
RecordCheck = Callable[[str, float, float, float, str], None]
RecordNote = Callable[[str], None]


@pytest.fixture
def record_check(request: pytest.FixtureRequest) -> RecordCheck:
    """`record_check(name, value, expected, tolerance, source)`: record, then assert."""

    def record(name: str, value: float, expected: float, tolerance: float, source: str) -> None:
        found, wanted = float(value), float(expected)
        ok = math.isfinite(found) and abs(found - wanted) <= tolerance
        check: Check = {
            "value": found,
            "expected": wanted,
            "tolerance": float(tolerance),
            "source": source,
            "ok": ok,
        }
        request.node.user_properties.append(("check", (name, check)))
        assert ok, f"{name}: {found!r} is not within {tolerance} of {wanted!r} ({source})"

    return record


@pytest.fixture
def record_note(request: pytest.FixtureRequest) -> RecordNote:
    """`record_note(text)`: a finding in words, to stand below the checks."""

    def record(text: str) -> None:
        request.node.user_properties.append(("note", text))

    return record


class Checks:
    """Gathers what was recorded, from this process or from the workers of pytest-xdist."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.found: dict[str, Check] = {}
        self.skipped: dict[str, str] = {}
        self.notes: list[str] = []

    def pytest_runtest_logreport(self, report: pytest.TestReport) -> None:
        """Take the checks of a finished test, and the reason of one that was skipped."""
        if report.when == "call":
            recorded = [value for key, value in report.user_properties if key == "check"]
            self.found |= {str(name): check for name, check in cast("list[Named]", recorded)}
            self.notes += [str(value) for key, value in report.user_properties if key == "note"]
        if report.skipped and isinstance(report.longrepr, tuple):
            self.skipped[report.nodeid] = str(report.longrepr[2])

    def pytest_sessionfinish(self) -> None:
        """Write both files."""
        checks = dict(sorted(self.found.items()))
        text = json.dumps(checks, indent=1, ensure_ascii=False)
        (self.folder / "validation.json").write_text(text + "\n", encoding="utf-8")
        (self.folder / "validation.md").write_text(self._table(checks), encoding="utf-8")

    def _table(self, checks: dict[str, Check]) -> str:
        good = sum(bool(check["ok"]) for check in checks.values())
        lines = [
            "# Checks against something outside",
            "",
            f"Recorded by the checks that `make validate` runs: {good} of {len(checks)} hold.",
            "",
            "| check | value | expected | tolerance | source | holds |",
            "|---|---:|---:|---:|---|---|",
        ]
        for name, check in checks.items():
            figures = " | ".join(f"{check[k]:.8g}" for k in ("value", "expected", "tolerance"))
            holds = "yes" if check["ok"] else "**no**"
            lines.append(f"| {name} | {figures} | {check['source']} | {holds} |")
        if self.notes:
            lines += ["", "Found besides:", "", *(f"- {note}" for note in sorted(self.notes))]
        if self.skipped:
            lines += ["", "Not run:", ""]
            lines += [f"- `{test}`: {why}" for test, why in sorted(self.skipped.items())]
        return "\n".join(lines) + "\n"


def pytest_addoption(parser: pytest.Parser) -> None:
    """The folder that the checks are written to."""
    parser.addoption("--validation-to", metavar="FOLDER", help="write validation.json and .md")


@pytest.hookimpl(tryfirst=True)
def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """Mark every test that records a check, so that `make validate` runs the quick ones, too."""
    for item in items:
        if "record_check" in getattr(item, "fixturenames", ()):
            item.add_marker("outside")


def pytest_configure(config: pytest.Config) -> None:
    """Gather checks where a folder is given; workers leave it to the main process."""
    config.addinivalue_line("markers", "outside: records a check against something outside")
    folder = config.getoption("--validation-to")
    if folder and not hasattr(config, "workerinput"):
        config.pluginmanager.register(Checks(Path(str(folder))), "checks")
