"""The virtual multimeter: DC voltage in five ranges, its value the mean over an aperture that ends at the reading."""

from __future__ import annotations

import math

from drivers.virtual.circuit import Circuit
from drivers.virtual.imperfection import Drift, Imperfect, Span, generator
from drivers.virtual.instrument import COMMON, Instrument, nr3
from drivers.virtual.parameters import Boolean, Choice, Extreme, Number
from drivers.virtual.scpi import Command, Tree
from drivers.virtual.status import ScpiError

OVERLOAD = 9.9e37  # SCPI-1999, volume 1, 7.2.1.4: infinity
RANGES_V = (0.1, 1.0, 10.0, 100.0, 1000.0)
SPANS = (
    Span(0.1, 0.000050, 0.000035),
    Span(1.0, 0.000040, 0.000007),
    Span(10.0, 0.000035, 0.000005),
    Span(100.0, 0.000045, 0.000006),
    Span(1000.0, 0.000045, 0.000010),
)
OVER_RANGE = 1.2  # a range reads to 120 %, the highest one to 100 %; common practice, no source
DOWN_RANGE = 0.1  # autorange goes down below this share of a range
APERTURES = (0.02, 0.2, 1.0, 10.0, 100.0)  # in power line cycles
DIGITS = {0.02: 1e-5, 0.2: 1e-6}  # resolution as a share of the range for short apertures
LONG_DIGITS = 1e-7  # and for others: below the noise, as meters answer over their interface
THERMAL_V = 0.3e-6  # standard deviation of the thermal EMF of the leads; common practice, no source

RANGE = Number(0.0, 1000.0, "V", default=1000.0, optional=True)
RESOLUTION = Number(0.0, 1000.0, "V", default=1e-6, optional=True)
CYCLES = Number(0.02, 100.0, default=10.0)


class Meter(Instrument):
    family = "meter"

    def __init__(
        self, name: str, circuit: Circuit, signal: int, seed: int, scale: float, line_Hz: float, delay_s: float
    ) -> None:
        """`signal`: what the leads are on (NODE, CHARGER or SHUNT of trace.py)."""
        super().__init__(name, circuit)
        self._signal = signal
        self._line_Hz = line_Hz
        self._delay_s = delay_s
        self._adc = Imperfect(SPANS, seed, name, "voltage", scale)
        self._thermal = Drift(generator(seed, name, "thermal EMF"), THERMAL_V * scale)
        self._ideal = scale == 0
        self.reset()

    def reset(self) -> None:
        self._range, self._auto, self.cycles = len(RANGES_V) - 1, True, 10.0
        self._latest: float | None = None

    # -- settings -------------------------------------------------------------------------------------------

    def _configure(self, range_V: float | str | None = None, resolution_V: float | None = None) -> None:
        """CONFigure: everything to its default, then the range; without one the meter chooses ranges itself."""
        self.cycles, self._auto, self._latest = 10.0, True, None
        if range_V is not None:
            self._set_range(range_V)

    def _set_range(self, range_V: float | str) -> None:
        if isinstance(range_V, str):
            self._auto = True
        else:
            self._auto = False
            self._range = next(index for index, top in enumerate(RANGES_V) if range_V <= top)

    def _set_auto(self, on: bool) -> None:
        self._auto = on

    def _set_cycles(self, cycles: float) -> None:
        """The aperture in power line cycles; rounded up to the next one that the meter has."""
        self.cycles = next(aperture for aperture in APERTURES if cycles <= aperture)

    def _range_answer(self, extreme: float | None = None) -> str:
        return nr3(RANGES_V[self._range] if extreme is None else max(extreme, RANGES_V[0]))

    def _cycles_answer(self, extreme: float | None = None) -> str:
        return nr3(self.cycles if extreme is None else extreme)

    # -- reading --------------------------------------------------------------------------------------------

    def _initiate(self) -> None:
        end_s = self.circuit.now_s - self._delay_s
        true_V = self.circuit.mean(self._signal, end_s - self.cycles / self._line_Hz, end_s)
        true_V += self._thermal.at(self.circuit.now_s)
        if self._auto:
            self._choose_range(abs(true_V))
        self._latest = self._converted(true_V)

    def _choose_range(self, size_V: float) -> None:
        while self._range and size_V < DOWN_RANGE * RANGES_V[self._range]:
            self._range -= 1
        while self._range < len(RANGES_V) - 1 and size_V > OVER_RANGE * RANGES_V[self._range]:
            self._range += 1

    def _converted(self, true_V: float) -> float:
        top_V = RANGES_V[self._range]
        most_V = top_V if top_V == RANGES_V[-1] else OVER_RANGE * top_V
        value = self._adc.read(true_V, self.circuit.now_s, self._range, self.cycles)
        if abs(value) > most_V or self.overloaded:
            return math.copysign(OVERLOAD, value)
        if self._ideal:
            return value
        step_V = DIGITS.get(self.cycles, LONG_DIGITS) * top_V
        return round(value / step_V) * step_V

    def _read(self) -> str:
        self._initiate()
        return self._fetch()

    def _fetch(self) -> str:
        if self._latest is None:
            raise ScpiError(-230)
        return nr3(self._latest)

    def _measure(self, range_V: float | str | None = None, resolution_V: float | None = None) -> str:
        self._configure(range_V, resolution_V)
        return self._read()


class _RangeOrAuto(Number):
    """A range in volts, MIN, MAX, or DEF and AUTO for a meter that chooses itself."""

    def read(self, text: str) -> float | str:  # type: ignore[override]  # one place takes a number or a word
        word = text.upper()
        return "AUTO" if word in ("AUTO", "DEF", "DEFAULT") else super().read(text)

    def words(self) -> str:
        return f"{self.low:g} to {self.high:g} {self.unit}|AUTO|DEF"


_PLACES = (_RangeOrAuto(0.0, 1000.0, "V", optional=True), RESOLUTION)
Meter.tree = Tree(
    (
        *COMMON,
        Command("CONFigure:VOLTage[:DC]", "DC voltage with all defaults", do=Meter._configure, takes=_PLACES),
        Command("CONFigure", "what is measured", ask=lambda self: f'"VOLT {self._range_answer()}"'),
        Command("MEASure:VOLTage[:DC]", "configure and read", ask=Meter._measure, asks=_PLACES),
        Command(
            "[SENSe:]FUNCtion[:ON]",
            "what is measured",
            do=lambda self, name: None,
            takes=(Choice(("VOLTage",)),),
            ask=lambda self: '"VOLT"',
        ),
        Command(
            "[SENSe:]VOLTage[:DC]:RANGe[:UPPer]",
            "range; setting one ends autorange",
            do=Meter._set_range,
            takes=(Number(0.0, 1000.0, "V", default=1000.0),),
            ask=Meter._range_answer,
            asks=(Extreme(RANGE),),
        ),
        Command(
            "[SENSe:]VOLTage[:DC]:RANGe:AUTO",
            "let the meter choose its range",
            do=Meter._set_auto,
            takes=(Boolean(),),
            ask=lambda self: str(int(self._auto)),
        ),
        Command(
            "[SENSe:]VOLTage[:DC]:NPLCycles",
            "aperture in power line cycles",
            do=Meter._set_cycles,
            takes=(CYCLES,),
            ask=Meter._cycles_answer,
            asks=(Extreme(CYCLES),),
        ),
        Command("INITiate[:IMMediate]", "take one reading and keep it", do=Meter._initiate),
        Command("READ", "take one reading", ask=Meter._read),
        Command("FETCh", "the reading kept", ask=Meter._fetch),
    )
)
