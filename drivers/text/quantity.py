"""Quantities as people write them: "4.2 V", "10 kΩ", "5 %", "3 s".

The table of units is closed on purpose: a reader that guesses takes "4,2 V" for 42 V, "3 min" for
milli-inches and "10 k" for a physical constant. What is not in the table is a fault.
"""

from __future__ import annotations

import math
import re

# dimension -> spelling -> factor to the unit used in code (V, A, Ω, s, Ah, W, Wh, °C, K, 1, Hz, F).
UNITS: dict[str, dict[str, float]] = {
    "voltage": {"V": 1.0, "mV": 1e-3, "µV": 1e-6, "uV": 1e-6},
    "current": {"A": 1.0, "mA": 1e-3, "µA": 1e-6, "uA": 1e-6},
    "resistance": {
        "Ω": 1.0,
        "ohm": 1.0,
        "mΩ": 1e-3,
        "mohm": 1e-3,
        "kΩ": 1e3,
        "kohm": 1e3,
        "MΩ": 1e6,
        "Mohm": 1e6,
    },
    "time": {"s": 1.0, "ms": 1e-3, "µs": 1e-6, "us": 1e-6, "min": 60.0, "h": 3600.0},
    "charge": {"Ah": 1.0, "mAh": 1e-3},
    "power": {"W": 1.0, "mW": 1e-3, "kW": 1e3},
    "energy": {"Wh": 1.0, "mWh": 1e-3, "kWh": 1e3},
    "temperature": {"°C": 1.0, "degC": 1.0},
    "temperature difference": {"K": 1.0, "°C": 1.0, "degC": 1.0},
    "ratio": {"%": 1e-2, "ppm": 1e-6},
    "frequency": {"Hz": 1.0, "kHz": 1e3, "MHz": 1e6},
    "capacitance": {"F": 1.0, "mF": 1e-3, "µF": 1e-6, "uF": 1e-6, "nF": 1e-9, "pF": 1e-12},
    "voltage rate": {"V/s": 1.0, "mV/s": 1e-3},
}
EXAMPLES = {
    "voltage": "4.2 V",
    "current": "3 A",
    "resistance": "10 kΩ",
    "time": "3 s",
    "charge": "2.5 Ah",
    "power": "60 W",
    "energy": "45 Wh",
    "temperature": "25 °C",
    "temperature difference": "2 K",
    "ratio": "5 %",
    "frequency": "50 Hz",
    "capacitance": "100 nF",
    "voltage rate": "5 mV/s",
}
UNIT_IN_CODE = {
    "voltage": "V",
    "current": "A",
    "resistance": "Ω",
    "time": "s",
    "charge": "Ah",
    "power": "W",
    "energy": "Wh",
    "temperature": "°C",
    "temperature difference": "K",
    "ratio": "1",
    "frequency": "Hz",
    "capacitance": "F",
    "voltage rate": "V/s",
}
_NUMBER = r"[+\-−]?(?:\d+\.?\d*|\.\d+)(?:[eE][+\-]?\d+)?"
_QUANTITY = re.compile(rf"\s*({_NUMBER})\s*(\S*)\s*")
# One sign is written in several code points: micro and Greek mu, ohm sign and Greek Omega.
_SAME = str.maketrans({"μ": "µ", "\u2126": "Ω", "−": "-", "\u00a0": " ", "\u202f": " "})


class QuantityFault(ValueError):
    """A text that is not the quantity expected; the message says what was read and what was expected."""


def _article(dimension: str) -> str:
    return f"an {dimension}" if dimension[0] in "aeiou" else f"a {dimension}"


def _expected(dimension: str) -> str:
    return f'expected {_article(dimension)} such as "{EXAMPLES[dimension]}"'


def _owner(unit: str) -> str | None:
    return next((dimension for dimension, units in UNITS.items() if unit in units), None)


def parse(text: str, dimension: str) -> float:
    """Read one quantity of the given dimension.

    Returns the value in the unit used in code (see UNIT_IN_CODE). Raises QuantityFault for a comma, a bare
    prefix, a missing or foreign unit, and for anything that is not finite.
    """
    if "," in text:
        raise QuantityFault(f'"{text}" has a comma; write a decimal point ({_expected(dimension)})')
    match = _QUANTITY.fullmatch(text.translate(_SAME))
    if match is None:
        raise QuantityFault(f'"{text}" is not a quantity; {_expected(dimension)}')
    number, unit = match.groups()
    if unit not in UNITS[dimension]:
        raise QuantityFault(_wrong_unit(text, unit, dimension))
    value = float(number) * UNITS[dimension][unit]
    if not math.isfinite(value):
        raise QuantityFault(f'"{text}" is not finite; {_expected(dimension)}')
    return value


def _wrong_unit(text: str, unit: str, dimension: str) -> str:
    if not unit:
        return f'"{text}" has no unit; {_expected(dimension)}'
    owner = _owner(unit)
    if owner is None:
        valid = ", ".join(UNITS[dimension])
        return f'"{text}": unknown unit "{unit}"; {_expected(dimension)} (units: {valid})'
    return f'"{text}" is {_article(owner)}; {_expected(dimension)}'


_TOLERANCE = re.compile(r"(.+?)(?:±|\+/-|\+-)(.+)")


def parse_tolerance(text: str, dimension: str) -> tuple[float, float]:
    """Read "nominal ± tolerance"; the tolerance in the same dimension or in %.

    Returns (nominal, half width) in the unit used in code. Raises QuantityFault.
    """
    match = _TOLERANCE.fullmatch(text)
    if match is None:
        raise QuantityFault(f'"{text}" has no tolerance; expected such as "{EXAMPLES[dimension]} ± 5 %"')
    nominal = parse(match[1].strip(), dimension)
    spread = match[2].strip()
    if spread.endswith("%") and dimension != "ratio":
        half = abs(nominal) * parse(spread, "ratio")
    else:
        half = parse(spread, "temperature difference" if dimension == "temperature" else dimension)
    if half < 0:
        raise QuantityFault(f'"{text}": a tolerance cannot be negative')
    return nominal, half
