"""The command line."""

from __future__ import annotations

import argparse
import json
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

from pipeline.download import with_downloaded_roads
from pipeline.errors import PipelineError, StudyError
from pipeline.progress import stage_progress
from pipeline.stamps import nothing_to_do
from pipeline.study import Study, load_study

STAGE_NAMES = (
    "geocode",
    "roads",
    "route",
    "cost",
    "join",
    "demand",
    "surplus",
    "sensitivity",
    "publish",
)

COMMANDS = ("all", "new", "compare", "completion", *STAGE_NAMES)
OPTIONS = ("--again", "--help", "--json", "--output", "--quiet")

EXAMPLES = """\
examples
  python -m pipeline all config/demo.toml        the whole flow, ending with the report
  python -m pipeline route config/demo.toml      as far as the routes
  python -m pipeline new lakeshore               a new study file with every key explained
  python -m pipeline all my/park.toml --output /tmp/park
  python -m pipeline all my/park.toml --quiet    only the result, or the error
  python -m pipeline all my/park.toml --json     the result for a program
  python -m pipeline compare A/output B/output   two runs side by side: comparison.html
  source <(python -m pipeline completion)        complete commands and files in bash or zsh

stages, in their order
  geocode      a zone of origin for every visit record
  roads        a routable road graph from the road extract
  route        fastest and shortest routes from every zone to every site
  cost         the price of a visit, per person, itemised
  join         one finished row per zone: visits a year, people, income, price
  demand       the regression of visits on price
  surplus      value in money with intervals, and what a fee would do
  sensitivity  what other assumptions would do to the surplus
  publish      GIS layers, tables and the report

What has not changed since the last run is not done again.
A terminal shows a progress bar; a log gets plain lines without colours.
exit codes: 0 done, 1 something in the study or its data is wrong, 2 a wrong command line,
130 stopped by the keyboard (what was finished is kept)
"""


def main(arguments: list[str] | None = None) -> int:
    """Run a command line; return the exit code."""
    parser = _parser()
    options = parser.parse_args(arguments)
    if options.study_file is None and options.command != "completion":
        parser.error(f"{options.command} needs a study file (after 'new', a name)")
    try:
        if options.command == "new":
            return _new(options.study_file)
        if options.command == "compare":
            return _compare(options)
        if options.command == "completion":
            return _completion()
        return _run(options)
    except PipelineError as error:
        if options.json:
            print(json.dumps({"status": "error", "error": str(error)}, ensure_ascii=False))
        print(f"error: {error}", file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        print("stopped; what was finished is kept", file=sys.stderr)
        return 130


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="python -m pipeline",
        description="From visit records and a road extract to the value of an outdoor site.",
        epilog=EXAMPLES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument(
        "command",
        metavar="STAGE",
        choices=COMMANDS,
        help="'all', one stage (with those before it that are out of date), 'new', 'compare' or "
        "'completion'",
    )
    parser.add_argument(
        "study_file",
        metavar="STUDY_FILE",
        nargs="?",
        help="the study file; after 'new': the study's name; after 'compare': the first run",
    )
    parser.add_argument("second", metavar="B", nargs="?", help="after 'compare': the second run")
    parser.add_argument(
        "--output",
        metavar="DIR",
        type=Path,
        help="put work/ and output/ there instead of into the study's own folder "
        "('compare': put comparison.html there)",
    )
    parser.add_argument(
        "--again", action="store_true", help="run the named stage even if nothing has changed"
    )
    parser.add_argument("--quiet", action="store_true", help="no lines about stages")
    parser.add_argument("--json", action="store_true", help="print one JSON object, nothing else")
    return parser


def _run(options: argparse.Namespace) -> int:
    study = load_study(Path(options.study_file), output=options.output)
    whole = options.command == "all"
    silent = options.quiet or options.json
    study = with_downloaded_roads(study, _nothing if silent else print)
    lines: list[str] = []
    fresh = not (whole and not options.again and nothing_to_do(study))
    if fresh:
        # The flow pulls in the geographical and statistical libraries: only now.
        from pipeline.runner import Run

        with stage_progress(shown=not silent) as (tell, begin):
            run = Run(study, _both(lines.append, tell), again=options.again, begin=begin)
            run.upto("publish" if whole else options.command)
    if options.json:
        status = "done" if fresh else "nothing to do"
        print(json.dumps(_as_json(study, status, lines, whole=whole), ensure_ascii=False))
        return 0
    if not fresh and not options.quiet:
        print(f"nothing to do: {study.study.name} is up to date")
    if whole:
        _show_result(study)
    return 0


def _nothing(line: str) -> None:
    del line


def _both(first: Callable[[str], None], second: Callable[[str], None]) -> Callable[[str], None]:
    def tell(line: str) -> None:
        first(line)
        second(line)

    return tell


def _as_json(study: Study, status: str, lines: list[str], *, whole: bool) -> dict[str, Any]:
    """What a program wants to know of a run."""
    said: dict[str, Any] = {"status": status, "study": study.study.name}
    said["stages"] = [dict(zip(("stage", "summary"), x.split(": ", 1), strict=True)) for x in lines]
    if whole:
        output = study.study.folder / "output"
        manifest = json.loads((output / "run.json").read_text(encoding="utf-8"))
        said["report"] = str(output / "report.html")
        said["headline"] = manifest["headline"]
    return said


def _show_result(study: Study) -> None:
    """The headline value and where the report is."""
    output = study.study.folder / "output"
    manifest = json.loads((output / "run.json").read_text(encoding="utf-8"))
    print(f"\nreport: {output / 'report.html'}")
    for headline in manifest["headline"]:
        print(headline["words"])


def _compare(options: argparse.Namespace) -> int:
    if options.second is None:
        raise StudyError("compare needs two runs: python -m pipeline compare A/output B/output")
    from pipeline.compare import compare_runs, read_run
    from pipeline.files import write_text

    page = (options.output or Path()) / "comparison.html"
    write_text(
        compare_runs(read_run(Path(options.study_file)), read_run(Path(options.second))), page
    )
    print(f"wrote {page}")
    return 0


def _completion() -> int:
    from pipeline.completion import completion_script

    print(completion_script(COMMANDS, OPTIONS), end="")
    return 0


def _new(name: str) -> int:
    from pipeline.template import write_new_study

    print(write_new_study(name))
    return 0


if __name__ == "__main__":
    sys.exit(main())
