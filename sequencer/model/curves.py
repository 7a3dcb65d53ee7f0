"""Thermistor curves as files: which resistance the pack's sensor has at which temperature.

A thermistor limit that is declared in °C is judged in ohms. The curve turns the one into the other and adds no
uncertainty: that the pack's own sensor differs from its curve belongs to the limit.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import cached_property
from itertools import pairwise
from pathlib import Path
from typing import Annotated, Self

from pydantic import AfterValidator, Field, ValidationError, model_validator
from pydantic_core import InitErrorDetails, PydanticCustomError

from drivers.shipped import locate
from drivers.text.binding import Bound, Written, bind
from drivers.text.document import read
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.measures import PositiveOhms, refuse
from drivers.text.si import si
from sequencer.model.curve_laws import Beta, Extended, Law, Platinum, SteinhartHart, Table, Temperature

CURVES = Path(__file__).resolve().parents[2] / "procedures" / "curves"  # beside us, whatever the working folder holds
FORMULA_SPAN_C = (-40.0, 125.0)  # where a file gives a formula and no span; common practice, no source
ROUND_TRIP_K = 0.05  # a curve that does not come back to where it started has a wrong coefficient
LAWS = ("table", "steinhart_hart", "extended", "beta", "platinum")
ROUNDING = 1e-9  # of a resistance or, in K, of a temperature: an end of the span is inside it

Points = tuple[tuple[Temperature, PositiveOhms], ...]


def _monotone(points: Points) -> Points:
    if len(points) < 2:
        raise refuse("a table needs two points at least: [[0 °C, 27.28 kΩ], [25 °C, 10 kΩ]]")
    direction = points[-1][1] - points[0][1]
    details = [
        _row_fault(row, _not_monotone(before, after, direction), after)
        for row, (before, after) in enumerate(pairwise(points), start=1)
        if not (after[0] > before[0] and (after[1] - before[1]) * direction > 0.0)
    ]
    if details:
        raise ValidationError.from_exception_data("table", details)
    return points


def _row_fault(row: int, words: str, point: tuple[float, float]) -> InitErrorDetails:
    """A fault with the row's own place, instead of the whole table's."""
    return InitErrorDetails(type=PydanticCustomError("fault", "{words}", {"words": words}), loc=(row,), input=point)


def _not_monotone(before: tuple[float, float], after: tuple[float, float], direction: float) -> str:
    word = "rise" if direction > 0.0 else "fall"
    shown = [f"[{celsius:g} °C, {si(ohm, 'Ω')}]" for celsius, ohm in (after, before)]
    return f"{shown[0]} follows {shown[1]}; temperatures must rise and resistances {word} from point to point"


class Curve(Written):
    """Resistance of a temperature sensor over its temperature, by exactly one law."""

    name: str
    source: str | None = Field(None, description="kind of document that the figures are from")
    span: tuple[Temperature, Temperature] | None = Field(None, description="range of a formula; a table has its ends")
    table: Annotated[Points, AfterValidator(_monotone)] | None = None
    steinhart_hart: SteinhartHart | None = None
    extended: Extended | None = None
    beta: Beta | None = None
    platinum: Platinum | None = None

    @model_validator(mode="after")
    def _is_one_usable_law(self) -> Self:
        given = [name for name in LAWS if getattr(self, name) is not None]
        if len(given) != 1:
            read_as = f"found {' and '.join(given)}" if given else "found none"
            raise refuse(f"a curve has exactly one of {', '.join(LAWS)}; {read_as}")
        if self.span is not None and self.table is not None:
            raise refuse("span: a table holds from its first point to its last; leave 'span' out")
        if not self.span_C[0] < self.span_C[1]:
            raise refuse(f"span: from {self.span_C[0]:g} °C to {self.span_C[1]:g} °C is no range; write [low, high]")
        self._check(given[0])
        return self

    def _check(self, name: str) -> None:
        """Refuse a formula that turns round, leaves the numbers, or does not come back within its span."""
        low_C, high_C = self.span_C
        steps = max(2, math.ceil(high_C - low_C))
        grid_C = [low_C + (high_C - low_C) * step / steps for step in range(steps + 1)]
        ohms = self._computed(name, self._law.ohm, grid_C)
        self._check_monotone(name, grid_C, ohms)
        back_C = self._computed(name, lambda ohm: self._law.celsius(ohm, self.span_C), ohms)
        for celsius, back in zip(grid_C, back_C, strict=True):
            if not abs(back - celsius) <= ROUND_TRIP_K:
                raise refuse(f"{name}: {celsius:g} °C comes back as {back:.2f} °C; check the coefficients")

    def _computed(self, name: str, law: Callable[[float], float], values: list[float]) -> list[float]:
        try:
            return [law(value) for value in values]
        except (ValueError, OverflowError, ZeroDivisionError):
            raise refuse(f"{name}: has no resistance somewhere in {self._range()}; check the coefficients") from None

    def _check_monotone(self, name: str, grid_C: list[float], ohms: list[float]) -> None:
        direction = ohms[-1] - ohms[0]
        for (before, after), celsius in zip(pairwise(ohms), grid_C[1:], strict=True):
            if not (math.isfinite(after) and after > 0.0 and (after - before) * direction > 0.0):
                where = f"at {celsius:g} °C, within {self._range()}"
                raise refuse(f"{name}: is not monotone {where}; check the coefficients")

    @cached_property
    def _law(self) -> Law:
        if self.table is not None:
            return Table(self.table)
        law = self.steinhart_hart or self.extended or self.beta or self.platinum
        assert law is not None
        return law

    @property
    def span_C(self) -> tuple[float, float]:
        """Lowest and highest temperature for which the curve is given."""
        if self.table is not None:
            return self.table[0][0], self.table[-1][0]
        return self.span or FORMULA_SPAN_C

    @property
    def span_ohm(self) -> tuple[float, float]:
        """Lowest and highest resistance within the span."""
        ends = sorted(self._law.ohm(celsius) for celsius in self.span_C)
        return ends[0], ends[1]

    def ohm_at(self, celsius: float) -> float:
        """Resistance at a temperature. Raises ValueError outside the span."""
        return self._law.ohm(self._inside(celsius))

    def celsius_at(self, ohm: float) -> float:
        """Temperature at which the sensor has this resistance. Raises ValueError outside the span."""
        low, high = self.span_ohm
        if not low * (1.0 - ROUNDING) <= ohm <= high * (1.0 + ROUNDING):
            shown = f"{si(low, 'Ω')} to {si(high, 'Ω')} ({self._range()})"
            raise ValueError(f"ohm: {si(ohm, 'Ω')} lies outside the curve '{self.name}', which holds for {shown}")
        low_C, high_C = self.span_C
        return min(max(self._law.celsius(min(max(ohm, low), high), self.span_C), low_C), high_C)

    def slope_ohm_per_K(self, celsius: float) -> float:
        """dR/dT at a temperature, below zero for an NTC. Raises ValueError outside the span."""
        return self._law.slope(self._inside(celsius))

    def ohm_limits(self, low_C: float | None, high_C: float | None) -> tuple[float | None, float | None]:
        """Limits declared in °C as (low, high) in Ω, None where there is none; an NTC changes the sides.

        Raises ValueError for a limit outside the span.
        """
        low, high = (None if celsius is None else self.ohm_at(celsius) for celsius in (low_C, high_C))
        return (high, low) if self._falls else (low, high)

    @property
    def _falls(self) -> bool:
        return self._law.ohm(self.span_C[1]) < self._law.ohm(self.span_C[0])

    def _inside(self, celsius: float) -> float:
        low, high = self.span_C
        if not low - ROUNDING <= celsius <= high + ROUNDING:
            raise ValueError(
                f"celsius: {celsius:g} °C lies outside the curve '{self.name}', which holds for {self._range()}"
            )
        return min(max(celsius, low), high)

    def _range(self) -> str:
        return f"{self.span_C[0]:g} °C to {self.span_C[1]:g} °C"


def load_curve(text: str, faults: Faults, place: Place, beside: Path | None = None) -> Bound[Curve] | None:
    """The curve that `text` names, shipped or by path (relative ones also seen from `beside`); None with faults added.

    `place` is where the name was written.
    """
    path = locate(text, CURVES, "curve", place, faults, beside=beside)
    if path is None:
        return None
    try:
        document = read(path)
    except BadInput as bad:
        faults.found.extend(bad.faults)
        return None
    return bind(Curve, document, "curve", faults)
