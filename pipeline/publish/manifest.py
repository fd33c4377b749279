"""run.json: what the run was made from and what it found, for programs and for the file."""

from __future__ import annotations

import dataclasses
import json
import math
from typing import Any

from pipeline.publish.results import Headline, Results
from pipeline.publish.words import figure, interval, is_known, level

FORMAT_VERSION = 1


def run_manifest(results: Results) -> dict[str, Any]:
    """Inputs with SHA-256, settings in force, versions, seed, currency and headline values.

    It holds no time of day: the same inputs give the same bytes.
    """
    about, provenance = results.study.study, results.provenance
    return {
        "format": "roadworth run",
        "format_version": FORMAT_VERSION,
        "study": {
            "name": about.name,
            "title": about.title,
            "notice": about.notice,
            "currency": about.currency,
            "price_year": about.price_year,
        },
        "confidence": results.study.surplus.confidence,
        "headline": [
            dataclasses.asdict(headline) | {"words": in_words(results, headline)}
            for headline in results.headlines
        ],
        "inputs": [dataclasses.asdict(file) for file in provenance.inputs],
        "settings": provenance.settings,
        "settings_set": list(provenance.settings_set),
        "seed": provenance.seed,
        "versions": dict(sorted(provenance.versions.items())),
        "code_sha256": provenance.code_sha256,
        "study_sha256": provenance.study_sha256,
    }


def manifest_text(manifest: dict[str, Any]) -> str:
    """The manifest as JSON; a figure that is not known is null."""
    return json.dumps(finite(manifest), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def in_words(results: Results, headline: Headline) -> str:
    """The annual value of a site in one line, rounded to what its interval supports."""
    annual, currency = headline.annual_surplus, results.currency
    if annual is None or not is_known(annual.value):
        return f"{headline.site_name}: no annual value (see the report)"
    sure = level(results.study.surplus.confidence)
    value = figure(annual.value, annual.ci_low, annual.ci_high)
    ends = interval(annual.ci_low, annual.ci_high, annual.value)
    return f"{headline.site_name}: {currency} {value} a year ({sure} interval {ends})"


def finite(value: Any) -> Any:
    """JSON has no NaN and no infinity."""
    if isinstance(value, dict):
        return {key: finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [finite(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
