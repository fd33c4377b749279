"""The study file: what is accepted, what is refused, and how it is said."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pytest

from pipeline.cost_settings import CostsSettings
from pipeline.errors import StudyError
from pipeline.settings import SECTIONS
from pipeline.study import Study, load_study, study_from
from pipeline.template import (
    _is_section,
    commented_study,
    settings_reference,
    tables_reference,
    write_new_study,
)
from pipeline.visit_settings import ZonesSettings

DOCS = Path(__file__).parent.parent / "docs"


def plain_study(**sections: Mapping[str, Any]) -> dict[str, Any]:
    """The least that a study file can say, with sections added or replaced."""
    return {
        "study": {
            "name": "fen",
            "title": "A fen",
            "currency": "EUR",
            "price_year": 2025,
            "folder": "fen",
        },
        "costs": {"vehicle_cost_per_km": 0.2, "wage_fraction": 0.3},
    } | sections


def read(raw: dict[str, Any], base: Path = Path()) -> Study:
    return study_from(raw, base=base, source="fen.toml")


def test_paths_are_relative_to_the_study_file(tmp_path: Path) -> None:
    (tmp_path / "in").mkdir()
    (tmp_path / "in" / "zones.csv").touch()
    file = tmp_path / "fen.toml"
    file.write_text(
        '[study]\nname = "fen"\ntitle = "A fen"\ncurrency = "EUR"\nprice_year = 2025\n'
        '[zones]\nfile = "in/zones.csv"\n'
        "[costs]\nvehicle_cost_per_km = 0.2\nwage_fraction = 0.3\n"
    )
    study = load_study(file)
    assert study.zones.file == tmp_path / "in" / "zones.csv"
    assert study.study.folder == tmp_path / "fen"
    assert study.input_files() == [tmp_path / "in" / "zones.csv"]
    elsewhere = load_study(file, output=tmp_path / "out")
    assert elsewhere.study.folder == tmp_path / "out"


def test_settings_cannot_be_changed() -> None:
    study = read(plain_study())
    with pytest.raises(ValueError, match="frozen"):
        study.costs.wage_fraction = 1.0  # type: ignore[misc]  # refused at run time as well


@pytest.mark.parametrize(
    ("section", "key", "value", "said"),
    [
        ("costs", "wage_fractoin", 0.3, r"unknown key \[costs\] wage_fractoin.*'wage_fraction'"),
        ("visits", "columns", {"postcode": "PLZ"}, r"\[visits.columns\] postcode.*'postal_code'"),
        ("zone", "file", "zones.csv", r"unknown section \[zone\].*'zones'"),
        ("zones", "file", "nowhere.csv", r"nowhere.csv does not exist.*relative to the study"),
        ("costs", "wage_fraction", 5.0, r"\[costs\] wage_fraction = 5.0 is not valid"),
        ("publish", "crs", "EPSG:99999", r"\[publish\] crs: 'EPSG:99999' is no coordinate"),
        ("demand", "choose", "magic", r"\[demand\] choose = 'magic'.*'test'.*'poisson'"),
        ("surplus", "fees", [5.0, -1.0], r"\[surplus.fees\] 1 = -1.0 is not valid"),
        ("costs", "vehicle_cost_per_km", "cheap", r"vehicle_cost_per_km = 'cheap' is not valid"),
    ],
)
def test_what_is_wrong_is_said(section: str, key: str, value: object, said: str) -> None:
    raw = plain_study()
    raw.setdefault(section, {})
    raw[section] = raw[section] | {key: value}
    with pytest.raises(StudyError, match=said):
        read(raw)


def test_assumptions_that_move_the_answer_have_no_silent_default() -> None:
    with pytest.raises(StudyError, match=r"\[costs\] wage_fraction is needed"):
        read(plain_study(costs={"vehicle_cost_per_km": 0.2}))
    raw = plain_study()
    del raw["costs"]
    with pytest.raises(StudyError, match=r"\[costs\] is needed"):
        read(raw)


def test_a_study_with_a_finished_table_needs_no_costs(tmp_path: Path) -> None:
    (tmp_path / "ready.csv").touch()
    raw = plain_study(market={"zone_table": "ready.csv"})
    del raw["costs"]
    assert read(raw, tmp_path).market.zone_table == tmp_path / "ready.csv"


@pytest.mark.parametrize("text", ["[study", "\xff\xfe"])
def test_a_file_that_is_not_toml(tmp_path: Path, text: str) -> None:
    file = tmp_path / "fen.toml"
    file.write_text(text, encoding="latin-1")
    with pytest.raises(StudyError, match="not a readable TOML file"):
        load_study(file)


def test_a_study_that_is_not_there_names_the_nearest(tmp_path: Path) -> None:
    (tmp_path / "lakeshore.toml").touch()
    with pytest.raises(StudyError, match="Did you mean lakeshore"):
        load_study(tmp_path / "lakeshor.toml")


def test_a_stage_sees_only_its_sections() -> None:
    seen = read(plain_study()).only((CostsSettings,))
    assert seen.costs.wage_fraction == 0.3
    with pytest.raises(AttributeError):
        _ = seen.zones


def test_the_digest_changes_with_its_own_sections_only() -> None:
    first = read(plain_study())
    second = read(plain_study(costs={"vehicle_cost_per_km": 0.3, "wage_fraction": 0.3}))
    assert first.settings_digest((ZonesSettings,)) == second.settings_digest((ZonesSettings,))
    assert first.settings_digest((CostsSettings,)) != second.settings_digest((CostsSettings,))


def test_the_digest_does_not_change_with_the_folder() -> None:
    here, there = plain_study(), plain_study()
    there["study"] = there["study"] | {"folder": "elsewhere"}
    assert read(here).settings_digest(()) == read(there).settings_digest(())


def test_a_new_study_file_explains_every_key() -> None:
    text = commented_study("lakeshore")
    tomllib.loads(text)
    for section in SECTIONS:
        assert f"[{section.section_name}]" in text
        for info in section.model_fields.values():
            if not _is_section(info):
                assert str(info.description)[:40] in text.replace("\n# ", " ")


def test_a_new_study_is_never_written_over(tmp_path: Path) -> None:
    config = tmp_path / "config"
    said = write_new_study("lakeshore", config=config)
    assert "make all STUDY=lakeshore" in said
    assert (tmp_path / "data" / "lakeshore" / "input").is_dir()
    with pytest.raises(StudyError, match="is there already"):
        write_new_study("lakeshore", config=config)
    with pytest.raises(StudyError, match="lower-case"):
        write_new_study("Lake Shore", config=config)


@pytest.mark.parametrize(
    ("file", "made"),
    [("study_file.md", settings_reference), ("tables.md", tables_reference)],
)
def test_reference_documents_have_not_drifted(file: str, made: Any) -> None:
    assert (DOCS / file).read_text(encoding="utf-8") == made(), "run `make docs`"
