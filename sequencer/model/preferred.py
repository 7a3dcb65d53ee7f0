"""Preferred values of resistors (IEC 60063): what a pack's ID resistor most likely is."""

from __future__ import annotations

import math
from typing import Literal

Series = Literal["E12", "E24", "E96"]

E24 = (10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91)
E12 = E24[::2]
#: The three-digit series are the rounded geometric ones (E192 alone has an exception).
E96 = tuple(round(100.0 * 10.0 ** (step / 96)) for step in range(96))

_MANTISSAS: dict[str, tuple[float, ...]] = {
    "E12": tuple(value / 10.0 for value in E12),
    "E24": tuple(value / 10.0 for value in E24),
    "E96": tuple(value / 100.0 for value in E96),
}


def between(low_ohm: float, high_ohm: float, series: Series = "E24") -> tuple[float, ...]:
    """All values of a series with low <= value <= high, rising; a log grid of 12, 24 or 96 points a decade.

    Raises ValueError for a bound that is not a finite number above zero.
    """
    _check("low_ohm", low_ohm)
    _check("high_ohm", high_ohm)
    decades = range(math.floor(math.log10(low_ohm)) - 1, math.floor(math.log10(high_ohm)) + 2)
    values = (_rounded(mantissa, decade) for decade in decades for mantissa in _MANTISSAS[series])
    return tuple(value for value in values if low_ohm <= value <= high_ohm)


def nominal_in(low_ohm: float, high_ohm: float) -> float:
    """What a band of resistances is most likely the tolerance of, where its nominal value is not declared.

    Of the coarsest series that has values in the middle half of the band (as a ratio) the one next to the geometric
    middle; the middle itself where not even E96 has one. Raises ValueError unless 0 < low <= high.
    """
    _check("low_ohm", low_ohm)
    if not low_ohm <= high_ohm:
        raise ValueError(f"high_ohm: expected a bound not below {low_ohm!r}, got {high_ohm!r}")
    middle = math.sqrt(low_ohm * high_ohm)
    quarter = (high_ohm / low_ohm) ** 0.25
    order: tuple[Series, ...] = ("E12", "E24", "E96")
    for series in order:
        values = between(middle / quarter, middle * quarter, series)
        if values:
            return min(values, key=lambda value: abs(math.log(value / middle)))
    return middle


def _check(name: str, ohm: float) -> None:
    if not (math.isfinite(ohm) and ohm > 0.0):
        raise ValueError(f"{name}: expected a finite resistance above zero, got {ohm!r}")


def _rounded(mantissa: float, decade: int) -> float:
    return float(f"{mantissa:.2f}e{decade}")
