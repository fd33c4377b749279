"""The report as a tagged PDF, printed by Chromium where that is installed."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

from pipeline.errors import PipelineError, PublishError
from pipeline.study import load_study

BROWSERS = ("chromium", "chromium-browser", "google-chrome")
MOST_SECONDS = 180


def print_report(report: Path, to: Path) -> None:
    """Print a report to PDF, with headings and tables marked for those who hear it read.

    Raises
    ------
    PublishError
        There is no report, or no Chromium, or it fails.
    """
    if not report.is_file():
        raise PublishError(f"{report} is not there; run the study first (make all).")
    browser = next((found for name in BROWSERS if (found := shutil.which(name))), None)
    if browser is None:
        raise PublishError(
            "printing needs Chromium (Debian: apt-get install chromium); or open report.html in "
            "any browser and print it there."
        )
    command = (
        browser,
        "--headless",
        "--no-sandbox",
        "--disable-gpu",
        "--export-tagged-pdf",
        "--no-pdf-header-footer",
        f"--print-to-pdf={to}",
        report.resolve().as_uri(),
    )
    done = subprocess.run(
        command, capture_output=True, text=True, timeout=MOST_SECONDS, check=False
    )
    if done.returncode or not to.is_file():
        raise PublishError(f"Chromium could not print {report}: {done.stderr.strip()[-300:]}")


def main(arguments: list[str]) -> int:
    """Print the report of the study whose file is named; return the exit code."""
    try:
        output = load_study(Path(arguments[0])).study.folder / "output"
        print_report(output / "report.html", output / "report.pdf")
    except PipelineError as error:
        print(f"error: {error}", file=sys.stderr)
        return 1
    print(f"wrote {output / 'report.pdf'}")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
