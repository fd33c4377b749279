"""The flow on a whole study: what is run again, where it can be entered, what is the same twice."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd
import pytest

from pipeline.__main__ import main
from pipeline.stamps import file_digests
from tests.ministudy import write_ministudy


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A study that has been run; tests copy it or only look."""
    study = write_ministudy(tmp_path_factory.mktemp("finished"))
    assert main(["all", str(study)]) == 0
    return study


@pytest.fixture
def study(tmp_path: Path, finished: Path) -> Path:
    """A copy of the finished study, to be changed."""
    for file in finished.parent.rglob("*"):
        target = tmp_path / file.relative_to(finished.parent)
        if file.is_dir():
            target.mkdir(parents=True, exist_ok=True)
        else:
            target.parent.mkdir(parents=True, exist_ok=True)
            target.write_bytes(file.read_bytes())
    return tmp_path / "mini.toml"


def run(*arguments: object) -> int:
    return main([str(argument) for argument in arguments])


def replace(file: Path, old: str, new: str) -> None:
    text = file.read_text(encoding="utf-8")
    assert old in text
    file.write_text(text.replace(old, new), encoding="utf-8")


def ran(said: str) -> list[str]:
    """Names of the stages that were run, from what was printed."""
    stages = [line for line in said.splitlines() if ": " in line and line.endswith(" s")]
    return [line.split(":")[0] for line in stages]


def published(study: Path) -> dict[str, str]:
    output = study.parent / "mini" / "output"
    return file_digests([output], output)


def test_nothing_is_done_twice(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("all", study) == 0
    said = capsys.readouterr().out
    assert said.startswith("nothing to do: mini is up to date")
    assert "report.html" in said


def test_a_changed_price_runs_from_cost_on(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    replace(study, "vehicle_cost_per_km = 0.2", "vehicle_cost_per_km = 0.3")
    assert run("all", study) == 0
    assert ran(capsys.readouterr().out) == [
        "cost",
        "join",
        "demand",
        "surplus",
        "sensitivity",
        "publish",
    ]


def test_changed_records_do_not_run_the_roads(
    study: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    visits = study.parent / "visits.csv"
    lines = visits.read_text().splitlines(keepends=True)
    visits.write_text("".join(lines[:-1]))
    assert run("all", study) == 0
    stages = ran(capsys.readouterr().out)
    assert "geocode" in stages
    assert "roads" not in stages
    assert "route" not in stages


def test_an_output_that_was_lost_or_changed_is_made_again(
    study: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    before = published(study)
    (study.parent / "mini" / "output" / "report.html").unlink()
    assert run("all", study) == 0
    assert ran(capsys.readouterr().out) == ["publish"]
    assert published(study) == before
    costs = study.parent / "mini" / "work" / "costs.parquet"
    costs.write_bytes(costs.read_bytes()[:-1])
    assert run("all", study) == 0
    assert ran(capsys.readouterr().out) == ["cost"]


def test_a_study_elsewhere_gives_the_same_bytes(study: Path, tmp_path: Path) -> None:
    other = write_ministudy(tmp_path / "a" / "far away")
    assert run("all", other, "--output", tmp_path / "out") == 0
    output = tmp_path / "out" / "output"
    assert file_digests([output], output) == published(study)


def test_stage_by_stage_is_the_same_as_all(study: Path, tmp_path: Path) -> None:
    stages = [
        "geocode",
        "roads",
        "route",
        "cost",
        "join",
        "demand",
        "surplus",
        "sensitivity",
        "publish",
    ]
    for stage in stages:
        assert run(stage, study, "--output", tmp_path / "out") == 0
    output = tmp_path / "out" / "output"
    assert file_digests([output], output) == published(study)


@pytest.mark.parametrize("table", ["routes.parquet", "routes.csv"])
def test_a_study_may_bring_its_routes(study: Path, tmp_path: Path, table: str) -> None:
    bring(study, tmp_path / table, "routes")
    replace(study, "[roads]\nfiles", f'[routes]\ntable = "{table}"\n\n[roads]\nfiles')
    assert run("all", study, "--output", tmp_path / "entered") == 0
    assert headline(tmp_path / "entered") == headline(study.parent / "mini")


def test_a_study_may_bring_its_finished_table(study: Path, tmp_path: Path) -> None:
    bring(study, tmp_path / "ready.csv", "zone_table")
    entered = tmp_path / "entered.toml"
    entered.write_text(
        '[study]\nname = "entered"\ntitle = "A fen"\ncurrency = "EUR"\nprice_year = 2025\n'
        '[market]\nzone_table = "ready.csv"\n'
        '[demand]\ncovariates = ["household_income"]\n'
    )
    assert run("all", entered) == 0
    assert headline(tmp_path / "entered") == headline(study.parent / "mini")
    assert (tmp_path / "entered" / "output" / "report.html").is_file()


def test_a_study_may_bring_its_trips(tmp_path: Path) -> None:
    trips = pd.DataFrame(
        {
            "record_id": [f"{row:03d}" for row in range(90)],
            "site_id": "fen",
            "trips": [max(0, 6 - row // 15 + (row * 7 % 5) - 2) for row in range(90)],
            "travel_cost": [4.0 + 0.2 * row for row in range(90)],
        }
    )
    trips.to_csv(tmp_path / "trips.csv", index=False)
    entered = tmp_path / "trips.toml"
    entered.write_text(
        '[study]\nname = "trips"\ntitle = "A fen"\ncurrency = "EUR"\nprice_year = 2025\n'
        '[market]\ntrip_table = "trips.csv"\n'
        '[demand]\nmodels = ["poisson", "negative_binomial"]\n'
    )
    assert run("all", entered) == 0
    surplus = pd.read_csv(tmp_path / "trips" / "output" / "tables" / "surplus.csv")
    assert (surplus.loc[surplus["measure"] == "surplus_per_trip", "value"] > 0).any()


def test_a_stage_that_a_study_does_not_have(
    study: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    bring(study, tmp_path / "ready.csv", "zone_table")
    replace(study, "[demand]", '[market]\nzone_table = "ready.csv"\n\n[demand]')
    assert run("roads", study) == 1
    assert "has no stage 'roads'" in capsys.readouterr().err


def bring(study: Path, target: Path, table: str) -> None:
    """Put a stage table of a finished study where a study file can name it."""
    frame = pd.read_parquet(study.parent / "mini" / "work" / f"{table}.parquet")
    if target.suffix == ".csv":
        frame.to_csv(target, index=False)
    else:
        frame.to_parquet(target, index=False)


def headline(folder: Path) -> list[float]:
    """Annual surplus of the chosen model and its interval, to six digits."""
    surplus = pd.read_csv(folder / "output" / "tables" / "surplus.csv")
    fit = pd.read_csv(folder / "output" / "tables" / "fit.csv")
    chosen = fit.loc[fit["chosen"], "model"].iloc[0]
    row = surplus[(surplus["model"] == chosen) & (surplus["measure"] == "annual_surplus")].iloc[0]
    return [float(f"{row[column]:.6g}") for column in ("value", "ci_low", "ci_high")]


def test_the_manifest_says_what_the_run_was_made_from(study: Path) -> None:
    text = (study.parent / "mini" / "output" / "run.json").read_text(encoding="utf-8")
    manifest = json.loads(text)
    names = {item["name"] for item in manifest["inputs"]}
    assert names == {"sites.csv", "zones.csv", "visits.csv", "roads.osm.pbf"}
    assert all(len(item["sha256"]) == 64 for item in manifest["inputs"])
    assert manifest["settings"]["costs"]["wage_fraction"] == 0.3333
    assert manifest["seed"] == 1
    assert str(study.parent) not in text
