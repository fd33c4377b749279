"""The flow: one list of stages, held together with the Makefile and the command line."""

from __future__ import annotations

import inspect
import re
from collections.abc import Mapping
from pathlib import Path

import pytest

import pipeline
from pipeline.__main__ import STAGE_NAMES, main
from pipeline.flow import BROUGHT, FLOW, INPUTS, STAGES, plan
from pipeline.schema import Table
from pipeline.study import Study, study_from
from pipeline.tables import TABLES, Routes, ZoneTable
from tests.test_study import plain_study

ROOT = Path(__file__).parent.parent


def study(folder: Path, **sections: Mapping[str, object]) -> Study:
    return study_from(plain_study(**sections), base=folder, source="fen.toml")


def test_makefile_and_command_line_name_the_stages_of_the_flow() -> None:
    makefile = (ROOT / "Makefile").read_text()
    listed = re.search(r"^STAGES := (.*)$", makefile, re.MULTILINE)
    assert listed is not None
    assert tuple(listed.group(1).split()) == tuple(STAGES) == STAGE_NAMES


def test_the_package_docstring_names_every_stage_and_table() -> None:
    for stage in FLOW:
        assert re.search(rf"^{stage.name}\b", str(pipeline.__doc__), re.MULTILINE)
        for kind in stage.writes:
            if issubclass(kind, Table):
                assert f"``{kind.table_name()}``" in str(pipeline.__doc__)


def test_every_table_is_written_by_one_stage_or_brought() -> None:
    written = [kind for stage in FLOW for kind in stage.writes]
    assert len(written) == len(set(written))
    for table in TABLES:
        assert (table in written) or (table in INPUTS) or (table in BROUGHT)


def test_a_stage_reads_only_what_comes_before_it() -> None:
    there = set(INPUTS) | set(BROUGHT)
    for stage in FLOW:
        for kind, _ in stage.read_kinds():
            assert kind in there, f"{stage.name} reads {kind.__name__} too early"
        there |= set(stage.writes)


def test_a_stage_takes_what_it_reads_and_the_study() -> None:
    for stage in FLOW:
        parameters = inspect.signature(stage.run).parameters.values()
        positional = [p for p in parameters if p.kind is not p.KEYWORD_ONLY]
        assert len(positional) == len(list(stage.read_kinds())), stage.name
        assert [p.name for p in parameters if p.kind is p.KEYWORD_ONLY] == ["study"]


def test_a_study_without_ready_tables_runs_every_stage(tmp_path: Path) -> None:
    assert plan(study(tmp_path)) == FLOW


@pytest.mark.parametrize(
    ("section", "key", "stages"),
    [
        ("routes", "table", "geocode cost join demand surplus sensitivity publish"),
        ("market", "zone_table", "demand surplus sensitivity publish"),
        ("market", "trip_table", "demand surplus sensitivity publish"),
    ],
)
def test_a_ready_table_replaces_the_stages_before_it(
    tmp_path: Path, section: str, key: str, stages: str
) -> None:
    (tmp_path / "ready.csv").touch()
    entered = study(tmp_path, **{section: {key: "ready.csv"}})
    assert [stage.name for stage in plan(entered)] == stages.split()


def test_tables_that_may_be_brought_are_of_the_flow() -> None:
    assert {Routes, ZoneTable} < set(BROUGHT)


def test_help_is_readable_without_running_anything(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as stopped:
        main(["--help"])
    said = capsys.readouterr().out
    assert stopped.value.code == 0
    assert "python -m pipeline all config/demo.toml" in said
    for name in STAGE_NAMES:
        assert f"\n  {name}" in said


def test_a_wrong_study_file_ends_with_one_line_and_code_1(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["all", str(tmp_path / "nowhere.toml")]) == 1
    said = capsys.readouterr().err
    assert said.startswith("error: study file")
    assert said.count("\n") == 1
