"""The codes that a study knows, and what each written code stands for."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import NamedTuple

import pandas as pd

from pipeline.countries import CodeFormat, code_format
from pipeline.errors import GeocodingError
from pipeline.origins.candidates import nearest_codes
from pipeline.origins.codes import READINGS, ValidCodes, form, normalise

NO_CODE = ("", "NA", "NAN", "NONE", "NULL")


class Placement(NamedTuple):
    """What one written code stands for: a row of `origins`, less the record."""

    postal_code: str | None
    zone_id: str | None
    origin_status: str
    origin_note: str | None


MISSING = Placement(None, None, "missing", None)


@dataclass(frozen=True)
class CodeBook:
    """Zones by normalised code, and how to tell the other codes apart.

    Attributes
    ----------
    zones, crosswalk : zone identifiers by normalised code.
    valid : the codes of both.
    pattern : a well-formed code matches it fully; None: it has the form of a valid code.
    prefixes : what may stand before the study's own codes in international mail.
    foreign : a code of another country matches one of them fully.
    abroad : formats of countries whose codes are foreign.
    """

    zones: Mapping[str, str]
    crosswalk: Mapping[str, str]
    valid: ValidCodes
    forms: frozenset[str]
    pattern: re.Pattern[str] | None
    prefixes: tuple[str, ...]
    foreign: tuple[re.Pattern[str], ...]
    abroad: tuple[CodeFormat, ...]

    @classmethod
    def of(
        cls,
        zones: pd.DataFrame,
        crosswalk: pd.DataFrame | None,
        *,
        country: str | None = None,
        pattern: str | None = None,
        foreign: Iterable[str] = (),
        foreign_countries: Iterable[str] = (),
    ) -> CodeBook:
        """Build the book.

        Raises
        ------
        GeocodingError
            Two zones share a code, the crosswalk sends a code to two zones or contradicts
            the zones, or a zone's code is not of the country's format.
        """
        home = code_format(country) if country else None
        own = _by_code(zones, "zones", home)
        other = {} if crosswalk is None else _by_code(crosswalk, "the crosswalk", home)
        for code, zone in other.items():
            if own.get(code, zone) != zone:
                raise GeocodingError(
                    f"the crosswalk sends code {code!r} to zone {zone!r}, but it is the code of "
                    f"zone {own[code]!r}; remove it from the crosswalk, or correct the zones."
                )
        well_formed = re.compile(pattern) if pattern else None
        if well_formed is None and home is not None:
            _check_format(own, home)
            well_formed = home.pattern
        valid = ValidCodes.of(own.keys() | other.keys(), well_formed)
        formats = (code_format(name) for name in foreign_countries)
        return cls(
            own,
            other,
            valid,
            frozenset(map(form, valid.codes)),
            well_formed,
            home.prefixes if home else (),
            tuple(re.compile(expression) for expression in foreign),
            tuple(known for known in formats if known is not None),
        )

    def place(self, written: str) -> Placement:
        """What a written code stands for, and if it has no zone, why."""
        code = normalise(written)
        if code in self.valid.codes:
            return self._placed(code, None)
        if code in NO_CODE:
            return MISSING
        area = self._area(code)
        if area is not None:
            return area
        if self._is_foreign(written, code):
            return Placement(code, None, "foreign", None)
        if self._is_well_formed(code):
            return Placement(code, None, "unknown_code", self._nearest(self.valid.area(code)))
        placed = self._read_back(written, code)
        if placed.zone_id is None and any(known.matches(code) for known in self.abroad):
            return Placement(code, None, "foreign", None)
        return placed

    def _area(self, code: str) -> Placement | None:
        """A valid code with the country's prefix, or with more behind it (ZIP+4)."""
        for prefix in ("", *self.prefixes):
            rest = code.removeprefix(prefix)
            found = self.valid.within(rest)
            if found is not None and (prefix == "" or rest != code):
                dropped = f"{prefix} before it dropped" if prefix else f"{rest} lies in it"
                return self._placed(found, f"read as {found}: {dropped}")
        return None

    def _placed(self, code: str, note: str | None) -> Placement:
        if code in self.zones:
            return Placement(code, self.zones[code], "matched", note)
        return Placement(code, self.crosswalk[code], "crosswalk", note)

    def _read_back(self, written: str, code: str) -> Placement:
        """A code in no valid form: undo damage where one valid code results."""
        for reading in READINGS:
            read = reading(written, self.valid)
            if len(read.codes) == 1:
                (found,) = read.codes
                return self._placed(found, f"read as {found}: {read.damage}")
            if read.codes:
                some = ", ".join(sorted(read.codes)[:3])
                note = f"{len(read.codes)} codes may be meant: {some}"
                return Placement(code, None, "malformed", note)
        return Placement(code, None, "malformed", self._nearest(code))

    def _is_foreign(self, written: str, code: str) -> bool:
        as_written = written.strip().upper()
        return any(
            expression.fullmatch(as_written) or expression.fullmatch(code)
            for expression in self.foreign
        )

    def _is_well_formed(self, code: str) -> bool:
        if self.pattern is not None:
            return self.pattern.fullmatch(code) is not None
        return form(code) in self.forms

    def _nearest(self, code: str) -> str | None:
        near = nearest_codes(code, self.valid.codes)
        return f"nearest valid codes: {', '.join(near)}" if near else None


def _check_format(own: Mapping[str, str], home: CodeFormat) -> None:
    """The zones' own codes are written as the country writes them."""
    wrong = [code for code in own if not home.pattern.fullmatch(code)]
    if wrong:
        raise GeocodingError(
            f"zones: {len(wrong)} of {len(own)} postal codes are not written as codes of "
            f"{home.country} are (such as {home.example}); first: {wrong[0]!r} of zone "
            f"{own[wrong[0]]!r}. Restore leading zeros that a spreadsheet ate, or set [zones] "
            "postal_code_pattern where zones go by a part of the code."
        )


def _by_code(table: pd.DataFrame, what: str, home: CodeFormat | None) -> dict[str, str]:
    """Zone identifiers by normalised code, without the country's prefix; a code has one zone."""
    found: dict[str, str] = {}
    for written, zone in zip(table["postal_code"], table["zone_id"], strict=True):
        code = normalise(written)
        if not code:
            raise GeocodingError(
                f"{what}: postal code {written!r} of zone {zone!r} has neither letter nor digit; "
                "correct it."
            )
        code = code if home is None else home.without_prefix(code)
        if found.get(code, zone) != zone:
            raise GeocodingError(
                f"{what}: postal code {code!r} belongs to zones {found[code]!r} and {zone!r}; "
                "a code has one zone, so merge the zones or correct the codes."
            )
        found[code] = zone
    return found
