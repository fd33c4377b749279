"""Figures in words, rounded to what their interval supports."""

from __future__ import annotations

import math

import pandas as pd

MODEL_WORDS = {
    "poisson": "Poisson",
    "negative_binomial": "negative binomial (NB2)",
    "log_linear": "log-linear least squares",
    "linear": "linear least squares",
    "negative_binomial_1": "negative binomial (NB1)",
    "quasi_poisson": "quasi-Poisson",
    "zero_inflated_poisson": "zero-inflated Poisson",
    "zero_inflated_negative_binomial": "zero-inflated negative binomial",
    "truncated_poisson": "zero-truncated Poisson",
    "truncated_negative_binomial": "zero-truncated negative binomial",
    "on_site_poisson": "on-site Poisson",
    "on_site_negative_binomial": "on-site negative binomial",
    "weighted_log_linear": "weighted log-linear least squares",
    "weighted_linear": "weighted linear least squares",
}
UNKNOWN = "not known"
NO_WIDTH = 1e-6
"""An interval narrower than this share of its value is a figure taken as known."""
WHOLE_FEES = 1000
"""Nobody charges hundredths where the highest fee is this much; the page's script knows it too."""
BIG = ((1e12, "trillion"), (1e9, "billion"), (1e6, "million"))


def model_words(model: str) -> str:
    """Name of a model as people write it."""
    return MODEL_WORDS.get(model, model.replace("_", " "))


def is_known(*values: float | None) -> bool:
    """Whether every value is a finite number."""
    return all(value is not None and math.isfinite(value) for value in values)


def rounding_step(low: float, high: float, value: float) -> float:
    """Smallest step worth printing: two significant digits of the interval's width.

    Without an interval, three significant digits of the value itself.
    """
    if is_known(low, high) and high - low > NO_WIDTH * abs(value):
        return 10.0 ** (math.floor(math.log10(high - low)) - 1)
    if is_known(value) and value != 0:
        return 10.0 ** (math.floor(math.log10(abs(value))) - 2)
    return 1.0


def stepped(value: float, step: float) -> str:
    """`value` rounded to a multiple of `step` (a power of ten), with thousands marked."""
    if not is_known(value):
        return UNKNOWN
    rounded = round(value / step) * step
    for size, word in BIG:
        if abs(rounded) >= size:
            return f"{_grouped(rounded / size, step / size)} {word}"
    return _grouped(rounded, step)


def _grouped(value: float, step: float) -> str:
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    return f"{value:,.{decimals}f}".replace("-", "−")


def interval(low: float, high: float, value: float) -> str:
    """An interval's ends rounded alike: '1.08 million to 1.38 million'."""
    if not is_known(low, high) or high - low <= NO_WIDTH * abs(value):
        return "–"
    step = rounding_step(low, high, value)
    ends = stepped(low, step).split(" "), stepped(high, step).split(" ")
    if len(ends[0]) == 2 and ends[0][1:] == ends[1][1:]:
        return f"{ends[0][0]} to {' '.join(ends[1])}"
    return f"{' '.join(ends[0])} to {' '.join(ends[1])}"


def figure(value: float, low: float = math.nan, high: float = math.nan) -> str:
    """One figure, rounded to what its interval supports."""
    return stepped(value, rounding_step(low, high, value))


def number(value: object, digits: int = 3) -> str:
    """A number for a table: `digits` significant digits, never fewer than its whole part.

    Missing is an en dash, so that an empty cell is seen to be meant.
    """
    amount = math.nan if value is None or value is pd.NA else float(str(value))
    if math.isnan(amount):
        return "–"
    if amount == 0:
        return "0"
    if abs(amount) < 1e-4:
        return f"{amount:.{digits - 1}e}".replace("-", "−")
    decimals = max(0, digits - 1 - math.floor(math.log10(abs(amount))))
    return f"{amount:,.{decimals}f}".replace("-", "−")


def fixed(value: float, decimals: int = 1) -> str:
    """A number with a fixed number of decimals; missing is an en dash."""
    return f"{value:,.{decimals}f}".replace("-", "−") if is_known(value) else "–"


def p_value(value: float) -> str:
    """A p-value; very small ones as a bound."""
    if not is_known(value):
        return "–"
    return "< 0.0001" if value < 0.0001 else f"{value:.2g}"


def whole(value: float) -> str:
    """A whole number with thousands marked; missing is an en dash."""
    return f"{value:,.0f}" if is_known(value) else "–"


def count(value: float, word: str, plural: str = "") -> str:
    """'1 zone', '12 zones'."""
    return f"{value:,.0f} {word if value == 1 else plural or word + 's'}"


def percent(share: float) -> str:
    """A share as a percentage, with a decimal where it is small."""
    hundredth = share * 100
    return f"{hundredth:.0f} %" if hundredth >= 10 or hundredth == 0 else f"{hundredth:.1f} %"


def level(confidence: float) -> str:
    """A confidence level: '95 %'."""
    return f"{confidence * 100:g} %"


def fee_words(fee: float, highest: float) -> str:
    """A fee: to the hundredth, or whole where fees run into the thousands."""
    return f"{fee:,.0f}" if highest >= WHOLE_FEES else f"{fee:,.2f}"


def words_of(name: str) -> str:
    """A column's or status's name as words."""
    return name.replace("_", " ")
