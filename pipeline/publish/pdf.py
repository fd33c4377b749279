"""The report as a tagged PDF, printed by Chromium where that is installed."""

from __future__ import annotations

import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

from pipeline.errors import PipelineError, PublishError
from pipeline.publish.report import on_paper
from pipeline.study import load_study

BROWSERS = ("chromium", "chromium-browser", "google-chrome")
MOST_SECONDS = 180
OPTIONS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--export-tagged-pdf",
    "--no-pdf-header-footer",
)
PAPERS = ("A4", "letter")
"""ISO 216 A4, and the 8.5 by 11 inch sheet of North America: names of CSS Paged Media."""


def print_report(report: Path, to: Path, *, paper: str = "A4") -> None:
    """Print a report to PDF, with headings and tables marked for those who hear it read.

    Raises
    ------
    PublishError
        There is no report, or no Chromium, or it fails, or no such paper is known.
    """
    if paper not in PAPERS:
        raise PublishError(f"paper {paper!r} is not known; choose from {', '.join(PAPERS)}.")
    if not report.is_file():
        raise PublishError(f"{report} is not there; run the study first (make all).")
    browser = next((found for name in BROWSERS if (found := shutil.which(name))), None)
    if browser is None:
        raise PublishError(
            "printing needs Chromium (Debian: apt-get install chromium); or open report.html in "
            "any browser and print it there."
        )
    with tempfile.TemporaryDirectory() as folder:
        page = Path(folder) / "report.html"
        page.write_text(on_paper(report.read_text(encoding="utf-8"), paper), encoding="utf-8")
        done = subprocess.run(
            (browser, *OPTIONS, f"--print-to-pdf={to}", page.as_uri()),
            capture_output=True,
            text=True,
            timeout=MOST_SECONDS,
            check=False,
        )
    if done.returncode or not to.is_file():
        raise PublishError(f"Chromium could not print {report}: {done.stderr.strip()[-300:]}")


def main(arguments: list[str]) -> int:
    """Print the report of a study: its file, and the paper if not A4; return the exit code."""
    study_file, paper = arguments[0], (arguments[1] if len(arguments) > 1 else "A4")
    try:
        output = load_study(Path(study_file)).study.folder / "output"
        print_report(output / "report.html", output / "report.pdf", paper=paper)
    except PipelineError as error:
        print(f"error: {error}", file=sys.stderr)
        return 1
    print(f"wrote {output / 'report.pdf'}")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
