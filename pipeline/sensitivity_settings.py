"""The section [sensitivity] of a study file: which alternatives are run beside the study."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar

from pydantic import AfterValidator, Field

from pipeline.sections import Section, setting

#: What may be changed: settings of the stages from the choice of routes to the surplus.
CHANGEABLE = (
    "costs",
    "market",
    "demand",
    "visits.annual_visits",
    "visits.other_purposes",
    "routes.minimise",
    "routes.generalised",
    "routes.charges",
)
NEEDS_EARLIER_STAGES = ("market.zone_table", "market.trip_table", "costs.preset")


def _changeable(changes: dict[str, Any]) -> dict[str, Any]:
    for key in changes:
        inside = any(key.startswith(f"{part}.") or key == part for part in CHANGEABLE)
        if not inside or "." not in key or key in NEEDS_EARLIER_STAGES:
            raise ValueError(
                f"{key!r} cannot be varied; what can be is in {', '.join(CHANGEABLE)} "
                '(write "section.key"), without files and presets'
            )
    return changes


Changes = Annotated[dict[str, Any], AfterValidator(_changeable)]


class VariantSettings(Section):
    """One alternative to the study's assumptions."""

    name: str = setting("Name to show.", min_length=1)
    changes: Changes = setting('What it changes: "section.key" = value.', min_length=1)


class SensitivitySettings(Section):
    """What other assumptions would do to the surplus."""

    section_name: ClassVar[str] = "sensitivity"
    standard: bool = setting(
        "Whether the usual alternatives are run: wage fraction, cost per km, party sharing, "
        "shortest route, an enjoyed drive, market extent, model form, substitutes, and every "
        "treatment of other purposes that the records allow.",
        default=True,
    )
    variants: tuple[VariantSettings, ...] = setting(
        "Alternatives of the study's own: [[sensitivity.variants]].", ()
    )
    grid: dict[str, Annotated[tuple[Any, ...], Field(min_length=1)]] = setting(
        'Every combination of these: "section.key" = [values].', {}
    )
    draws: int = setting("Parameter draws for each alternative's interval.", 2000, ge=1000)
