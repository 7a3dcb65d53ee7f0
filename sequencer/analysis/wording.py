"""Numbers as a laboratory writes them: SI prefix, as many digits as the uncertainty lets stand."""

from __future__ import annotations

import math

_PREFIXES = {-9: "n", -6: "µ", -3: "m", 0: "", 3: "k"}


def resolution_of(spread: float) -> float:
    """Step that shows two digits of the spread, e.g. 0.0038 -> 0.0001; 0 for a spread of zero."""
    return 10.0 ** (math.floor(math.log10(spread)) - 1) if spread > 0.0 else 0.0


def quantity(value: float, unit: str, *, step: float = 0.0) -> str:
    """Value with its unit, rounded to `step` (0: six significant digits). No prefix without a unit.

    >>> quantity(4.20314, "V", step=1e-4)
    '4.2031 V'
    """
    if not unit:
        return _plain(value, step)
    power = _prefix_power(value)
    return f"{_plain(value / 10.0**power, step / 10.0**power)} {_PREFIXES[power]}{unit}"


def _plain(value: float, step: float) -> str:
    if step <= 0.0:
        return f"{value + 0.0:.6g}"
    decimals = max(0, -math.floor(math.log10(step) + 1e-9))
    return f"{round(value, decimals) + 0.0:.{decimals}f}"  # + 0.0: nobody writes minus nothing


def _prefix_power(value: float) -> int:
    if value == 0.0:
        return 0
    power = 3 * math.floor(math.log10(abs(value) * (1.0 + 1e-9)) / 3.0)
    return min(max(power, -9), 3)
