"""How numbers, units and dates are written. Digits follow what is known: a value is shown to a tenth of its sigma."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

import pandas as pd

THIN = "\u202f"  # narrow space that does not break: between number and unit, in groups of three
SPACE = "\u00a0"  # before a unit
MINUS = "\u2212"
SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")

MOST_DECIMALS = 12
"Beyond these a double holds no more digits of a number of everyday size."


def missing(value: Any) -> bool:
    """Whether a cell is empty (None, NaN, NaT, NA or an empty text)."""
    if value is None or isinstance(value, str):
        return not value
    return bool(pd.isna(value))


@dataclass(frozen=True)
class Numbers:
    """Formats with the plan's decimal sign and time zone."""

    decimal: str = "."
    zone: str = "UTC"

    def fixed(self, value: Any, digits: int) -> str:
        """A number with so many decimals and a true minus sign; '–' when it is missing."""
        if missing(value) or not math.isfinite(value):
            return "–"
        text = f"{value:,.{digits}f}"
        if float(f"{value:.{digits}f}") == 0:
            text = text.lstrip("-")
        return text.replace(",", THIN).replace(".", self.decimal).replace("-", MINUS)

    def index(self, value: Any) -> str:
        """A capability index: two decimals."""
        return self.fixed(value, 2)

    def value(self, value: Any, scale: Any = None, *, sign: bool = False) -> str:
        """A measured quantity, to about a tenth of `scale` (its sigma); three significant digits without one.

        A power of ten is used where both the value and its scale are tiny, and for large values that are not known to
        more digits than a power shows: 1 000 000 003 Hz with a sigma of 0.8 Hz is written out.
        """
        if missing(value) or not math.isfinite(value):
            return "–"
        size = abs(value)
        ground = scale if not missing(scale) and scale > 0 else (size / 100 or 1.0)
        digits = math.ceil(-math.log10(ground)) + 1
        tiny = max(size, ground) < 1e-5
        if size and (tiny or (size >= 1e7 and size / ground < 1e4)):
            text = self._power(value, digits)
        else:
            text = self.fixed(value, 0 if tiny else min(MOST_DECIMALS, max(0, digits)))
        return f"+{text}" if sign and value > 0 else text

    def _power(self, value: float, digits: int) -> str:
        """Mantissa and power of ten; `digits` are the decimals (may be negative) of the plain number."""
        exponent = math.floor(math.log10(abs(value)))
        if abs(round(value / 10.0**exponent, max(2, digits + exponent))) >= 10:
            exponent += 1
        decimals = min(8, max(2, digits + exponent))
        return f"{self.fixed(value / 10.0**exponent, decimals)}{THIN}·{THIN}10{str(exponent).translate(SUPERSCRIPT)}"

    def quantity(self, value: Any, unit: Any, scale: Any = None, *, sign: bool = False) -> str:
        """A measured quantity with its unit."""
        text = self.value(value, scale, sign=sign)
        return text if missing(unit) or text == "–" else f"{text}{SPACE}{unit}"

    def spread(self, sigma: Any, unit: Any) -> str:
        """A standard deviation with its unit, to about three digits."""
        return self.quantity(sigma, unit, None if missing(sigma) else sigma / 10)

    def step(self, value: Any, unit: Any) -> str:
        """A recording step with its unit: three significant digits, without zeros at the end."""
        if missing(value):
            return "–"
        text = self.quantity(float(f"{value:.3g}"), unit, value / 10)
        number, sign, rest = text.partition(self.decimal)
        digits = rest[: len(rest) - len(rest.lstrip("0123456789"))]
        return number + (sign + digits.rstrip("0") if digits.rstrip("0") else "") + rest[len(digits) :]

    def count(self, value: Any) -> str:
        """A whole number in groups of three."""
        return "–" if missing(value) else f"{round(value):,}".replace(",", THIN)

    def counted(self, value: Any, one: str, many: str = "") -> str:
        """A whole number with its noun: '1 value', '3 values'."""
        return f"{self.count(value)} {one if not missing(value) and value == 1 else many or one + 's'}"

    def rough(self, value: Any) -> str:
        """A count that is known only roughly: two significant digits."""
        if missing(value):
            return "–"
        if value < 1:
            return "under 1"
        digits = max(0, math.floor(math.log10(value)) - 1)
        return self.count(round(value / 10**digits) * 10**digits)

    def ppm(self, value: Any) -> str:
        """Parts per million: below 1 it is the tail of an assumed shape and only called small."""
        if missing(value):
            return "–"
        return "under 1" if value < 1 else self.rough(value)

    def percent(self, value: Any, digits: int = 0) -> str:
        """A share as a percentage."""
        return "–" if missing(value) else f"{self.fixed(100 * value, digits)}{THIN}%"

    def share(self, value: Any) -> str:
        """A small share as a percentage that does not round to nothing."""
        if missing(value) or value == 0:
            return self.percent(value)
        if value < 0.0001:
            return f"under {self.percent(0.0001, 2)}"
        return self.percent(value, 2 if value < 0.01 else 1 if value < 0.1 else 0)

    def chance(self, value: Any) -> str:
        """A probability as whole percent; never 0 or 100."""
        if missing(value):
            return "–"
        if value > 0.99:
            return f"over 99{THIN}%"
        return f"under 1{THIN}%" if value < 0.01 else self.percent(value)

    def money(self, value: Any, currency: Any) -> str:
        """An amount, two significant digits, with its currency."""
        text = self.rough(value)
        return text if missing(currency) or text == "–" else f"{text}{SPACE}{currency}"

    def date(self, moment: Any) -> str:
        """The day in the plan's zone, ISO 8601."""
        return "–" if missing(moment) else f"{self._local(moment):%Y-%m-%d}"

    def time(self, moment: Any) -> str:
        """Day and minute in the plan's zone."""
        return "–" if missing(moment) else f"{self._local(moment):%Y-%m-%d %H:%M}"

    def _local(self, moment: Any) -> pd.Timestamp:
        return pd.Timestamp(moment).tz_localize("UTC").tz_convert(ZoneInfo(self.zone))
