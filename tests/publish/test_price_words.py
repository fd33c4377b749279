"""The report of a study that builds its price of driving up, or takes a preset."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from pipeline.study import Study, study_from
from tests.publish.conftest import make_publication


def priced_study(currency: str, **costs: Any) -> Study:
    about = {"name": "fenland", "title": "Fen", "currency": currency, "price_year": 2025}
    raw = {"study": {**about, "folder": "fenland"}, "costs": costs}
    return study_from(raw, base=Path(), source="study")


def test_a_preset_stands_with_its_source_and_a_caution() -> None:
    report = make_publication(priced_study("USD", preset="us_2025")).report
    assert "USD 0.21 per mile" in report
    assert "preset us_2025 (US, prices of 2025): " in report
    assert "IRS Notice 2025-5" in report
    assert "Check every one of them against its source" in report


def test_classes_of_vehicle_are_named() -> None:
    report = make_publication(priced_study("EUR", preset="de_2025", shared_by="vehicle")).report
    assert "what a km costs by class of vehicle (petrol, diesel, electric)" in report
    assert "priced per vehicle: " in report
    assert "in full for the vehicle with" in report
    assert "Visits and their value are of vehicles with all who come in them" in report
