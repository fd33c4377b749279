"""How a postal code is written, and how damage done to it is read back.

``normalise`` undoes what never changes a code: width and case of letters, spaces, hyphens and
other punctuation, and the trailing '.0' of a spreadsheet. ``READINGS`` lists what may only be
undone when one valid code results: digits lost at the front or in scientific notation,
letters that look like digits. Each further kind of damage is one more function in that list.
"""

from __future__ import annotations

import itertools
import re
import unicodedata
from collections.abc import Callable, Set
from dataclasses import dataclass
from decimal import Decimal

_WHOLE_FLOAT = re.compile(r"(\d+)(?:\.0*|,0{1,2})")
_SCIENTIFIC = re.compile(r"(\d(?:[.,]\d+)?)E\+?(\d{1,2})")
_LOOK_ALIKE = {"O": "0O", "0": "0O", "I": "1I", "1": "1I"}
_MOST_LOOK_ALIKES = 6
_LONGEST_REST = 4


def normalise(written: str) -> str:
    """A code in capitals and ASCII digits, without spaces and punctuation.

    Full-width and other compatibility characters become their plain form (Unicode NFKC), the
    decimal digits of any script become 0 to 9, and what a spreadsheet makes of a number
    ('43215.0', '4.3215E+04' with all its digits) becomes the number. Normalising a normalised
    code changes nothing.

    Returns
    -------
    The code; empty where `written` has neither letter nor digit.
    """
    if written.isascii() and written.isalnum():
        return written.upper()
    code, before = _plain(written), None
    while code != before:
        # Letters may combine once what stood between them is gone, so until nothing changes.
        code, before = _plain(code), code
    return code


def _plain(written: str) -> str:
    text = "".join(_compatible(written).split())
    text = _spreadsheet_number(text)
    return "".join(character for character in text if character.isalnum())


def _compatible(written: str) -> str:
    text = unicodedata.normalize("NFKC", written).upper()
    if text.isascii():
        return text
    text = unicodedata.normalize("NFKC", text)
    return "".join(str(unicodedata.decimal(character, character)) for character in text)


def _spreadsheet_number(text: str) -> str:
    """The whole number that a spreadsheet wrote as a float, if it kept all digits."""
    whole = _WHOLE_FLOAT.fullmatch(text)
    if whole:
        return whole[1]
    number = _scientific(text)
    if number is not None and number.tolerance < 1 and "." in text.replace(",", "."):
        return str(int(number.value))
    return text


@dataclass(frozen=True)
class _Scientific:
    """A number in scientific notation: its value, and half a unit of its last digit."""

    value: Decimal
    tolerance: Decimal


def _scientific(text: str) -> _Scientific | None:
    match = _SCIENTIFIC.fullmatch(text)
    if match is None:
        return None
    mantissa, exponent = Decimal(match[1].replace(",", ".")), int(match[2])
    decimals = -int(mantissa.as_tuple().exponent)
    value = mantissa.scaleb(exponent)
    if value != value.to_integral_value():
        return None
    return _Scientific(value, Decimal("0.5").scaleb(exponent - decimals))


@dataclass(frozen=True)
class Reading:
    """Codes that a damaged one may have been, and the damage in words."""

    codes: frozenset[str]
    damage: str


@dataclass(frozen=True)
class ValidCodes:
    """The normalised codes that stand for a zone, prepared for reading damage back."""

    codes: frozenset[str]
    digit_widths: tuple[int, ...]
    numbers: tuple[tuple[int, str], ...]
    pattern: re.Pattern[str] | None = None

    @classmethod
    def of(cls, codes: Set[str], pattern: re.Pattern[str] | None = None) -> ValidCodes:
        """Prepare the valid codes; the first group of `pattern` is a code within a longer one."""
        digits = [code for code in codes if code.isascii() and code.isdigit()]
        widths = {len(code) for code in digits}
        longer = pattern if pattern is not None and pattern.groups else None
        if longer is not None:
            widths |= {width + more for width in widths for more in range(1, _LONGEST_REST + 1)}
        return cls(
            frozenset(codes),
            tuple(sorted(widths)),
            tuple(sorted((int(code), code) for code in digits)),
            longer,
        )

    def area(self, code: str) -> str:
        """The delivery area of a normalised code: of a ZIP+4 the ZIP; else the code itself."""
        found = self.pattern.fullmatch(code) if self.pattern is not None else None
        return code if found is None else found[1] or code

    def within(self, code: str) -> str | None:
        """The valid code that a normalised one is, or lies in (ZIP+4); None if neither."""
        if code in self.codes:
            return code
        area = self.area(code)
        return area if area in self.codes else None


def lost_zeros(written: str, valid: ValidCodes) -> Reading:
    """'2134' for '02134': a number lost its leading zeros."""
    code = normalise(written)
    if not (code.isascii() and code.isdigit()):
        return Reading(frozenset(), "")
    padded = (code.zfill(width) for width in valid.digit_widths if width > len(code))
    codes = {found for found in map(valid.within, padded) if found is not None}
    return Reading(frozenset(codes), "leading zeros restored")


def lost_digits(written: str, valid: ValidCodes) -> Reading:
    """'4.32E+04' for '43215': scientific notation that may have dropped digits."""
    number = _scientific("".join(_compatible(written).split()))
    if number is None:
        return Reading(frozenset(), "")
    codes = {code for value, code in valid.numbers if abs(value - number.value) <= number.tolerance}
    return Reading(frozenset(codes), "read back from scientific notation")


def look_alikes(written: str, valid: ValidCodes) -> Reading:
    """'K1AOB1' for 'K1A0B1': letters O and I for digits 0 and 1, or the reverse."""
    code = normalise(written)
    choices = [_LOOK_ALIKE.get(character, character) for character in code]
    if sum(len(choice) > 1 for choice in choices) > _MOST_LOOK_ALIKES:
        return Reading(frozenset(), "")
    written_so = ("".join(characters) for characters in itertools.product(*choices))
    codes = {found for found in map(valid.within, written_so) if found is not None}
    return Reading(frozenset(codes), "O and 0, or I and 1, exchanged")


READINGS: tuple[Callable[[str, ValidCodes], Reading], ...] = (
    lost_zeros,
    lost_digits,
    look_alikes,
)


def form(code: str) -> str:
    """Form of a code: 'A' for a letter, '9' for a digit, so 'K1A0B1' has the form 'A9A9A9'."""
    return "".join("9" if character.isdigit() else "A" for character in code)
