"""The command line: what it prints, for people and for programs, and its exit codes."""

from __future__ import annotations

import json
import re
import shutil
import subprocess
from pathlib import Path

import pytest

from pipeline.__main__ import EXAMPLES, OPTIONS, main
from pipeline.progress import stage_progress
from tests.ministudy import write_ministudy


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The small study, run once."""
    path = write_ministudy(tmp_path_factory.mktemp("mini"))
    assert main(["all", str(path), "--quiet"]) == 0
    return path


def test_json_is_one_object_and_nothing_else(
    study: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["demand", str(study), "--json"]) == 0
    said = json.loads(capsys.readouterr().out)
    assert (said["status"], said["study"]) == ("done", "mini")
    assert [stage["stage"] for stage in said["stages"]][-1] == "demand"
    assert main(["all", str(study), "--json"]) == 0
    said = json.loads(capsys.readouterr().out)
    assert said["status"] == "nothing to do"
    assert said["headline"][0]["site_id"] == "fen"
    assert Path(said["report"]).is_file()


def test_quiet_leaves_the_result(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["all", str(study), "--quiet"]) == 0
    assert re.fullmatch(r"\nreport: .*report\.html\nThe Fen: EUR .*\n", capsys.readouterr().out)


def test_a_log_gets_plain_lines(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["demand", str(study)]) == 0
    out, err = capsys.readouterr()
    assert out.splitlines()[-1] == "demand: nothing has changed"
    assert "\x1b" not in out + err


def test_a_wrong_study_is_exit_code_1_also_for_programs(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["all", str(tmp_path / "none.toml"), "--json"]) == 1
    out, err = capsys.readouterr()
    assert json.loads(out)["status"] == "error"
    assert err.startswith("error: ")


def test_a_wrong_command_line_is_exit_code_2() -> None:
    with pytest.raises(SystemExit) as caught:
        main(["everything", "study.toml"])
    assert caught.value.code == 2


def test_help_opens_with_examples_and_names_every_exit_code() -> None:
    assert EXAMPLES.startswith("examples")
    for code in ("0 done", "1 something", "2 a wrong command line", "130 stopped"):
        assert code in EXAMPLES


def test_progress_without_a_terminal_is_silent_or_plain(
    capsys: pytest.CaptureFixture[str],
) -> None:
    for shown, printed in ((True, "route: done\n"), (False, "")):
        with stage_progress(shown=shown) as (tell, begin):
            begin("route", 0, 2)
            tell("route: done")
        assert capsys.readouterr() == (printed, "")


def test_compare_finds_what_differs(
    study: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """B pays half of the wage for an hour, A a third: only that setting differs."""
    text = study.read_text(encoding="utf-8").replace("0.3333", "0.5")
    other = study.with_name("other.toml")
    other.write_text(text, encoding="utf-8")
    assert main(["all", str(other), "--output", str(tmp_path / "b"), "--quiet"]) == 0
    folder = json.loads(_report_of(study, capsys))["report"]
    command = ["compare", str(Path(folder).parent), str(tmp_path / "b"), "--output", str(tmp_path)]
    assert main(command) == 0
    page = (tmp_path / "comparison.html").read_text(encoding="utf-8")
    settings = page.partition("Assumptions that differ")[2].partition("<h2>Inputs")[0]
    assert re.findall(r"<code>([a-z_.]+)</code>", settings) == ["costs.wage_fraction"]
    assert "<td>0.3333</td><td>0.5</td>" in settings
    assert "12 rows are in both runs; 0 in one only." in page
    assert 'class="map"' in page
    assert page.count(">differs<") == 0


def _report_of(study: Path, capsys: pytest.CaptureFixture[str]) -> str:
    capsys.readouterr()
    assert main(["all", str(study), "--json"]) == 0
    return capsys.readouterr().out


def test_compare_of_what_is_no_run_says_so(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["compare", str(tmp_path), str(tmp_path)]) == 1
    assert "holds no finished run" in capsys.readouterr().err
    assert main(["compare", str(tmp_path)]) == 1
    assert "compare needs two runs" in capsys.readouterr().err


def completed(words: str, folder: Path, capsys: pytest.CaptureFixture[str]) -> list[str]:
    """What bash offers when the words are typed and the last one is to be completed."""
    assert main(["completion"]) == 0
    script = capsys.readouterr().out
    typed = words.split(" ")
    ask = (
        f"{script}\nCOMP_WORDS=({' '.join(typed)}); COMP_CWORD={len(typed) - 1}; _roadworth\n"
        'printf "%s\\n" "${COMPREPLY[@]}"'
    )
    done = subprocess.run(
        ["bash", "-c", ask], cwd=folder, capture_output=True, text=True, check=True
    )
    assert done.stderr == ""
    return done.stdout.split()


@pytest.mark.skipif(shutil.which("bash") is None, reason="needs bash")
def test_bash_completes_commands_options_and_study_files(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "park.toml").touch()
    (tmp_path / "park.csv").touch()
    (tmp_path / "runs").mkdir()
    assert completed("roadworth ro", tmp_path, capsys) == ["roads", "route"]
    assert completed("roadworth route p", tmp_path, capsys) == ["park.toml"]
    assert completed("roadworth route park.toml --q", tmp_path, capsys) == ["--quiet"]
    assert completed("roadworth all park.toml --output r", tmp_path, capsys) == ["runs"]
    assert completed("roadworth compare r", tmp_path, capsys) == ["runs"]


def test_completion_knows_every_option(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit):
        main(["--help"])
    said = capsys.readouterr().out.partition("examples")[0]
    assert set(re.findall(r"--[a-z]+", said)) == set(OPTIONS)


def test_a_command_without_its_study_file_is_told_so(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as caught:
        main(["route"])
    assert caught.value.code == 2
    assert "route needs a study file" in capsys.readouterr().err
