"""The command line."""

from __future__ import annotations

import argparse
import json
import sys
from pathlib import Path

from pipeline.errors import PipelineError
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

EXAMPLES = """\
examples
  python -m pipeline all config/demo.toml        the whole flow, ending with the report
  python -m pipeline route config/demo.toml      as far as the routes
  python -m pipeline new lakeshore               a new study file with every key explained
  python -m pipeline all my/park.toml --output /tmp/park

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
exit codes: 0 done, 1 something in the study or its data is wrong, 2 a wrong command line
"""


def main(arguments: list[str] | None = None) -> int:
    """Run a command line; return the exit code."""
    options = _parser().parse_args(arguments)
    try:
        if options.command == "new":
            return _new(options.study_file)
        return _run(options)
    except PipelineError as error:
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
        choices=("all", "new", *STAGE_NAMES),
        help="'all', one stage (with those before it that are out of date), or 'new'",
    )
    parser.add_argument(
        "study_file", metavar="STUDY_FILE", help="the study file; after 'new': the study's name"
    )
    parser.add_argument(
        "--output",
        metavar="DIR",
        type=Path,
        help="put work/ and output/ there instead of into the study's own folder",
    )
    parser.add_argument(
        "--again", action="store_true", help="run the named stage even if nothing has changed"
    )
    return parser


def _run(options: argparse.Namespace) -> int:
    study = load_study(Path(options.study_file), output=options.output)
    whole = options.command == "all"
    if whole and not options.again and nothing_to_do(study):
        print(f"nothing to do: {study.study.name} is up to date")
        _show_result(study)
        return 0
    # The flow pulls in the geographical and statistical libraries: only now.
    from pipeline.runner import Run

    run = Run(study, lambda line: print(line, flush=True), again=options.again)
    run.upto("publish" if whole else options.command)
    if whole:
        _show_result(study)
    return 0


def _show_result(study: Study) -> None:
    """The headline value and where the report is."""
    output = study.study.folder / "output"
    manifest = json.loads((output / "run.json").read_text(encoding="utf-8"))
    print(f"\nreport: {output / 'report.html'}")
    for headline in manifest["headline"]:
        print(headline["words"])


def _new(name: str) -> int:
    from pipeline.template import write_new_study

    print(write_new_study(name))
    return 0


if __name__ == "__main__":
    sys.exit(main())
