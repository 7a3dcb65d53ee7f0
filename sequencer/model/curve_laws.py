"""Laws that tie a sensor's resistance to its temperature, each as the formula that is published for it.

Every law gives ohm(celsius), celsius(ohm, span_C) and slope(celsius) in Ω, °C and Ω/K. `span_C` bounds the search where
a law has no closed form in that direction. No law looks after its own range: that is the curve's part.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated, Any, Protocol

from pydantic import BaseModel, ConfigDict, GetCoreSchemaHandler, GetJsonSchemaHandler, model_validator
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema

from drivers.text.measures import Measure, PositiveOhms, refuse

ZERO_C_K = 273.15
HALVINGS = 200  # ends earlier, when the bracket no longer shrinks in double precision
WIDEST_LN_OHM = (math.log(1e-2), math.log(1e9))


class _Number:
    """Reads a plain number, for coefficients: digits, a point, an exponent; no unit, no comma, nothing infinite."""

    @staticmethod
    def read(value: Any) -> float:
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            number = float(value)
        else:
            try:
                number = float(str(value).replace("−", "-"))
            except ValueError:
                raise refuse(f'"{value}" is not a plain number such as "3.354e-3"') from None
            if "_" in str(value):
                raise refuse(f'"{value}" is not a plain number such as "3.354e-3"')
        if not math.isfinite(number):
            raise refuse(f'"{value}" is not finite; expected a plain number such as "3.354e-3"')
        return number

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"type": "number"}


class _Kelvins(Measure):
    """A material constant in kelvin; "°C" would be accepted as a difference, and is a slip here."""

    def read(self, value: Any) -> float:
        if isinstance(value, str) and not value.rstrip().endswith("K"):
            raise refuse(f'"{value}": a beta value is written in kelvin, such as "3435 K"')
        return super().read(value)


Number = Annotated[float, _Number()]
BetaKelvins = Annotated[float, _Kelvins("temperature difference", above=0)]
Temperature = Annotated[float, Measure("temperature", above=-ZERO_C_K)]


class Law(Protocol):
    """Resistance over temperature, strictly monotone where it is used."""

    def ohm(self, celsius: float) -> float: ...
    def celsius(self, ohm: float, span_C: tuple[float, float]) -> float: ...
    def slope(self, celsius: float) -> float: ...


class _Law(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class Beta(_Law):
    """ln(R/R0) = B (1/T - 1/T0): two points of the curve, exact only at those (IEC 60539-1, from memory)."""

    resistance: PositiveOhms
    at: Temperature = 25.0
    beta: BetaKelvins

    def ohm(self, celsius: float) -> float:
        return self.resistance * math.exp(self.beta * (1.0 / _kelvin(celsius) - 1.0 / _kelvin(self.at)))

    def celsius(self, ohm: float, span_C: tuple[float, float]) -> float:
        return 1.0 / (1.0 / _kelvin(self.at) + math.log(ohm / self.resistance) / self.beta) - ZERO_C_K

    def slope(self, celsius: float) -> float:
        return -self.ohm(celsius) * self.beta / _kelvin(celsius) ** 2


class SteinhartHart(_Law):
    """1/T = a + b ln R + c (ln R)³, T in K and R in Ω (Steinhart and Hart, Deep-Sea Research 15, 1968)."""

    a: Number
    b: Number
    c: Number

    @model_validator(mode="after")
    def _falls(self) -> SteinhartHart:
        if not self.b > 0.0:
            raise refuse(f"b is {self.b:g}; above zero was expected (1/T must rise with ln R)")
        return self

    def ohm(self, celsius: float) -> float:
        low, high = WIDEST_LN_OHM
        if self.c < 0.0:  # beyond this |ln R| the cubic turns round
            turn = math.sqrt(self.b / (-3.0 * self.c))
            low, high = max(low, -turn), min(high, turn)
        return math.exp(_root(self._inverse_K, low, high, 1.0 / _kelvin(celsius)))

    def celsius(self, ohm: float, span_C: tuple[float, float]) -> float:
        return 1.0 / self._inverse_K(math.log(ohm)) - ZERO_C_K

    def slope(self, celsius: float) -> float:
        ohm = self.ohm(celsius)
        return -ohm / (_kelvin(celsius) ** 2 * (self.b + 3.0 * self.c * math.log(ohm) ** 2))

    def _inverse_K(self, ln_ohm: float) -> float:
        return self.a + self.b * ln_ohm + self.c * ln_ohm**3


class Extended(_Law):
    """R = R25 exp(A + B/T + C/T² + D/T³), and its own fit for the way back.

    forward : A, B, C, D.    inverse : A1, B1, C1, D1 of 1/T = A1 + B1 y + C1 y² + D1 y³ with y = ln(R/R25).
    The two fits are published together and agree to some hundredths of a kelvin only; without `inverse` the first one
    is inverted numerically.
    """

    resistance: PositiveOhms
    forward: tuple[Number, Number, Number, Number]
    inverse: tuple[Number, Number, Number, Number] | None = None

    def ohm(self, celsius: float) -> float:
        return self.resistance * math.exp(_cubic(self.forward, 1.0 / _kelvin(celsius)))

    def celsius(self, ohm: float, span_C: tuple[float, float]) -> float:
        if self.inverse is None:
            return _root(self.ohm, *span_C, ohm)
        return 1.0 / _cubic(self.inverse, math.log(ohm / self.resistance)) - ZERO_C_K

    def slope(self, celsius: float) -> float:
        _, b, c, d = self.forward
        x = 1.0 / _kelvin(celsius)
        return -self.ohm(celsius) * x * x * (b + 2.0 * c * x + 3.0 * d * x * x)


class Platinum(_Law):
    """R = R0 (1 + A t + B t² + C (t - 100) t³), the last term below 0 °C only (IEC 60751)."""

    resistance: PositiveOhms

    def ohm(self, celsius: float) -> float:
        below = PLATINUM_C * (celsius - 100.0) * celsius**3 if celsius < 0.0 else 0.0
        return self.resistance * (1.0 + PLATINUM_A * celsius + PLATINUM_B * celsius**2 + below)

    def celsius(self, ohm: float, span_C: tuple[float, float]) -> float:
        if ohm < self.resistance:
            return _root(self.ohm, min(span_C[0], 0.0), 0.0, ohm)
        gap = PLATINUM_A**2 - 4.0 * PLATINUM_B * (1.0 - ohm / self.resistance)
        return (-PLATINUM_A + math.sqrt(gap)) / (2.0 * PLATINUM_B)

    def slope(self, celsius: float) -> float:
        below = PLATINUM_C * (4.0 * celsius - 300.0) * celsius**2 if celsius < 0.0 else 0.0
        return self.resistance * (PLATINUM_A + 2.0 * PLATINUM_B * celsius + below)


PLATINUM_A, PLATINUM_B, PLATINUM_C = 3.9083e-3, -5.775e-7, -4.183e-12  # IEC 60751


@dataclass(frozen=True)
class Table:
    """Points (°C, Ω), rising in temperature and strictly monotone in resistance; ln R is linear over 1/T between them.

    That is the Beta law through each pair of neighbours: what bends a real curve is the slow change of B with
    temperature, so over a step of 5 K the rest is a few hundredths of a per cent, where R linear over T errs by up to
    1 % (both computed against a published table in 1 K steps, in the tests).
    At a point the slope is that of the segment above it.
    """

    points: tuple[tuple[float, float], ...]

    def ohm(self, celsius: float) -> float:
        (x_a, y_a), (x_b, y_b) = self._segment(self._left(celsius))
        return math.exp(y_a + (y_b - y_a) * (1.0 / _kelvin(celsius) - x_a) / (x_b - x_a))

    def celsius(self, ohm: float, span_C: tuple[float, float]) -> float:
        falling = self.points[-1][1] < self.points[0][1]
        knots = [-point[1] if falling else point[1] for point in self.points]
        left = self._held(bisect_right(knots, -ohm if falling else ohm) - 1)
        (x_a, y_a), (x_b, y_b) = self._segment(left)
        return 1.0 / (x_a + (x_b - x_a) * (math.log(ohm) - y_a) / (y_b - y_a)) - ZERO_C_K

    def slope(self, celsius: float) -> float:
        (x_a, y_a), (x_b, y_b) = self._segment(self._left(celsius))
        return -self.ohm(celsius) * (y_b - y_a) / (x_b - x_a) / _kelvin(celsius) ** 2

    def _left(self, celsius: float) -> int:
        return self._held(bisect_right([point[0] for point in self.points], celsius) - 1)

    def _held(self, left: int) -> int:
        return min(max(left, 0), len(self.points) - 2)

    def _segment(self, left: int) -> tuple[tuple[float, float], tuple[float, float]]:
        """Both ends of a segment as (1/K, ln Ω)."""
        first, second = ((1.0 / _kelvin(celsius), math.log(ohm)) for celsius, ohm in self.points[left : left + 2])
        return first, second


def _kelvin(celsius: float) -> float:
    return celsius + ZERO_C_K


def _cubic(coefficients: tuple[float, float, float, float], x: float) -> float:
    a, b, c, d = coefficients
    return a + x * (b + x * (c + x * d))


def _root(law: Callable[[float], float], low: float, high: float, target: float) -> float:
    """Where a monotone law reaches the target, by bisection. Raises ValueError where it does not within the bracket."""
    rising = law(high) > law(low)
    if not min(law(low), law(high)) <= target <= max(law(low), law(high)):
        raise ValueError(f"the law does not reach {target:g}")
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        if middle in (low, high):
            break
        low, high = (middle, high) if (law(middle) < target) == rising else (low, middle)
    return 0.5 * (low + high)
