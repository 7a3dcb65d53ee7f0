"""Numbers as people read them: SI prefixes, and a value to the digits that its uncertainty deserves."""

from __future__ import annotations

import math

_PREFIXES = {-4: "p", -3: "n", -2: "µ", -1: "m", 0: "", 1: "k", 2: "M", 3: "G"}
_PREFIXED = {"V", "A", "Ω", "W", "Wh", "Ah", "Hz", "F", "V/s"}  # s, %, °C and plain numbers take none


def _scale(value: float, unit: str) -> tuple[float, str]:
    """Factor to divide by, and the unit with its prefix, for a value to lie between 1 and 1000."""
    if unit not in _PREFIXED or value == 0 or not math.isfinite(value):
        return 1.0, unit
    # 1e-9 keeps 0.001 (which is a hair below 10^-3 in binary) from being written as 1000 µ.
    exponent = min(max(math.floor((math.log10(abs(value)) + 1e-9) / 3), -4), 3)
    return 1000.0**exponent, _PREFIXES[exponent] + unit


def si(value: float, unit: str, digits: int = 4) -> str:
    """`value` to so many significant digits with an SI prefix: si(0.0031, "V") is "3.1 mV"."""
    if not math.isfinite(value):
        return f"{value} {unit}".strip()
    factor, prefixed = _scale(value, unit)
    scaled = value / factor
    decimals = 0 if scaled == 0 else max(0, digits - 1 - math.floor(math.log10(abs(scaled)) + 1e-12))
    text = f"{round(scaled, decimals) + 0.0:.{decimals}f}"  # + 0.0: nobody writes minus nothing
    return f"{text.rstrip('0').rstrip('.') if '.' in text else text} {prefixed}".strip()


def decimals_of(uncertainty: float) -> int:
    """Decimals that show an uncertainty to two significant digits (JCGM 100, 7.2.6)."""
    if uncertainty <= 0 or not math.isfinite(uncertainty):
        return 4
    return max(0, 1 - math.floor(math.log10(uncertainty) + 1e-12))


def pm(value: float, uncertainty: float, unit: str) -> str:
    """ "4.2031 V ± 1.9 mV" style: the value to the digits of its uncertainty, each with its prefix."""
    factor, prefixed = _scale(max(abs(value), uncertainty), unit)
    decimals = decimals_of(uncertainty / factor)
    text = f"{round(value / factor, decimals) + 0.0:.{decimals}f} {prefixed}".strip()
    width, wide_unit = _scale(uncertainty, unit)
    return f"{text} ± {uncertainty / width:.{decimals_of(uncertainty / width)}f} {wide_unit}".strip()


def interval(low: float | None, high: float | None, unit: str, digits: int = 5) -> str:
    """A limit in words: "4.175 V to 4.225 V", "below 10 mA", "above 2 V"."""
    if low is None:
        return "no limit" if high is None else f"below {si(high, unit, digits)}"
    if high is None:
        return f"above {si(low, unit, digits)}"
    return f"{si(low, unit, digits)} to {si(high, unit, digits)}"


def clock_time(seconds: float) -> str:
    """A span of time as "1 h 04 min", "3 min 20 s" or "12.5 s"."""
    if seconds < 60:
        return f"{seconds:.1f} s"
    whole = round(seconds)
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02d} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02d} min"
