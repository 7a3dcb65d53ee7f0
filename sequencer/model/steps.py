"""The kinds of step that a procedure is made of: few, and each does one thing a person could do by hand."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, WithJsonSchema, model_validator

from drivers.text.measures import Celsius, Measure, PositiveSeconds, PositiveVolts, Seconds, refuse

MAX_COMPRESSION = 100.0
MAX_REPEATS = 20
MOST_STARTS = 12
MOST_OFFSET_V = 0.100
SHORTEST_PERIOD_s, LONGEST_PERIOD_s = 2.0, 3600.0
KINDS = ("insert", "charge", "remove", "sweep_id", "sweep_temperature", "raise_cell", "start_low", "watch_taps")
SWEEPS = {  # and what they find
    "sweep_id": "id",
    "sweep_temperature": "temperature",
    "raise_cell": "tap_trip",
    "start_low": "low_start",
    "watch_taps": "balancing",
}


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


def _times(value: Any) -> float:
    """How many times faster: a plain number from 1 to MAX_COMPRESSION."""
    try:
        number = float(value)
    except (TypeError, ValueError) as reason:
        raise refuse(f'"{value}" is not a number; expected such as 10 (ten times faster than the pack)') from reason
    if not 1.0 <= number <= MAX_COMPRESSION:
        raise refuse(f'"{value}" must lie between 1 and {MAX_COMPRESSION:g}')
    return number


# As the file may hold it: a number, or the $name of a parameter.
_TIMES_SCHEMA = WithJsonSchema(
    {"anyOf": [{"type": "number", "minimum": 1, "maximum": MAX_COMPRESSION}, {"type": "string"}]}
)


def _repeats(value: Any) -> int:
    """A count from 1 to MAX_REPEATS."""
    text = str(value)
    if not text.isdecimal() or not 1 <= int(text) <= MAX_REPEATS:
        raise refuse(f'"{text}": expected a count from 1 to {MAX_REPEATS}')
    return int(text)


_REPEATS_SCHEMA = WithJsonSchema(
    {"anyOf": [{"type": "integer", "minimum": 1, "maximum": MAX_REPEATS}, {"type": "string"}]}
)
Repeats = Annotated[int, BeforeValidator(_repeats), _REPEATS_SCHEMA]
Share = Annotated[float, Measure("ratio", above=0)]
Kelvins = Annotated[float, Measure("temperature difference", above=0)]


class Insert(_Part):
    """Put a pack in: its cells at this open-circuit voltage, its thermistor at this temperature."""

    cell_voltage: PositiveVolts
    temperature: Celsius = 25.0


class FullCharge(_Part):
    """Charge until the charger ends it."""

    compression: Annotated[float, BeforeValidator(_times), _TIMES_SCHEMA] = Field(
        1.0, description="at most so many times faster than the pack's capacity, away from declared events"
    )
    after: Seconds = Field(30.0, description="watched so long after the end")
    longest: PositiveSeconds = Field(4 * 3600.0, description="given up after so long")


class Remove(_Part):
    """Take the pack out."""


class SweepId(_Part):
    """Show every declared ID band at its middle and both ends, what lies outside, open and short; find each edge.

    Each point is an insertion of its own; each that must not charge stands between two controls.
    """

    cell_voltage: PositiveVolts
    resolution: Share = Field(0.01, description="of an edge: the bracket is no wider than this share of it")
    outside: Share = Field(0.25, description="so far beyond a band's end a point is shown that must not select it")
    repeats: Repeats = Field(2, description="both sides of each edge are shown so often: at first from inside outward")


class SweepTemperature(_Part):
    """Find the limits for starting (by insertions) and for going on (while charging), and what open and short do."""

    cell_voltage: PositiveVolts
    resolution: Kelvins = Field(0.5, description="of a limit")
    beyond: Kelvins = Field(3.0, description="so far outside a declared limit the search begins")
    repeats: Repeats = Field(2, description="both sides of each limit for starting are shown so often")


class RaiseCell(_Part):
    """Raise one cell after the other, the others lowered so that the pack's voltage stays, until the charge stops."""

    cell_voltage: PositiveVolts
    begin: PositiveVolts = Field(alias="from")
    end: PositiveVolts = Field(alias="to")
    by: PositiveVolts = 0.010

    @model_validator(mode="after")
    def _rises(self) -> RaiseCell:
        if not self.cell_voltage < self.begin < self.end:
            raise refuse("'from' must lie above 'cell_voltage' and below 'to'")
        if (self.end - self.begin) / self.by > 200:
            raise refuse("more than 200 steps from 'from' to 'to'; take a larger 'by'")
        return self


def _voltages(value: Any) -> Any:
    """A list of voltages as a tuple; the same one twice, or none at all, is refused."""
    if isinstance(value, list):
        if not 1 <= len(value) <= MOST_STARTS:
            raise refuse(f"from 1 to {MOST_STARTS} start voltages were expected, such as [2.0 V, 2.5 V, 2.9 V]")
        return tuple(value)
    return value


class StartLow(_Part):
    """Put a discharged pack in, at each of these voltages per cell; find where a precharge goes over to full current.

    Each is an insertion of its own, held at its voltage; what is not charged stands between two controls. Then, with
    `weak_cell`, one cell after the other is low and the others are normal.
    """

    cell_voltage: PositiveVolts = Field(description="of the control, and of the normal cells beside a weak one")
    voltages: Annotated[tuple[PositiveVolts, ...], BeforeValidator(_voltages)]
    weak_cell: PositiveVolts | None = None
    end: PositiveVolts = Field(3.30, alias="to", description="the search for the threshold ends here")
    by: PositiveVolts = Field(0.020, description="step of that search near the declared threshold")
    hold: Seconds = Field(0.0, description="one more precharge is held so long, to see whether it is given up")

    @model_validator(mode="after")
    def _rises(self) -> StartLow:
        if len(set(self.voltages)) != len(self.voltages):
            raise refuse("'voltages' names one voltage twice")
        low = max((*self.voltages, self.weak_cell or 0.0))
        if not low < self.end or not low < self.cell_voltage:
            raise refuse("'to' and 'cell_voltage' must lie above every start voltage")
        if (self.end - min(self.voltages)) / self.by > 300:
            raise refuse("more than 300 steps from the lowest start voltage to 'to'; take a larger 'by'")
        return self


class WatchTaps(_Part):
    """Watch the currents of all cell taps while the cells stand apart, the pack's voltage and state of charge held."""

    cell_voltage: PositiveVolts
    offset: PositiveVolts = Field(0.050, description="of a high or a low cell against the mean; at most 100 mV")
    longest_period: PositiveSeconds = Field(
        240.0, description="longest period of a balancing that is looked for; each pattern stands for three of it"
    )

    @model_validator(mode="after")
    def _within_reach(self) -> WatchTaps:
        if self.offset > MOST_OFFSET_V:
            raise refuse(f"'offset' {self.offset * 1e3:g} mV: a cell is offset by {MOST_OFFSET_V * 1e3:g} mV at most")
        if not SHORTEST_PERIOD_s <= self.longest_period <= LONGEST_PERIOD_s:
            raise refuse(f"'longest_period' {self.longest_period:g} s: expected 2 s to 1 h")
        return self


class Step(_Part):
    """One step: exactly one kind."""

    insert: Insert | None = None
    charge: FullCharge | None = None
    remove: Remove | None = None
    sweep_id: SweepId | None = None
    sweep_temperature: SweepTemperature | None = None
    raise_cell: RaiseCell | None = None
    start_low: StartLow | None = None
    watch_taps: WatchTaps | None = None
    expect: Literal["charges"] | None = Field(None, description="what must be seen; if not, a fail, and the run ends")
    finding: str | None = Field(None, description="name under which the step's findings are judged")

    @model_validator(mode="after")
    def _one_kind(self) -> Step:
        kinds = [kind for kind in KINDS if getattr(self, kind) is not None]
        if len(kinds) != 1:
            raise refuse(f"a step does one thing, of {', '.join(KINDS)}; this one has {kinds or 'none of them'}")
        if self.expect and self.insert is None:
            raise refuse("'expect' belongs to an insert step")
        if self.finding and (self.insert is not None or self.remove is not None):
            raise refuse("'finding' belongs to a step that finds something: a charge, a sweep, raise_cell")
        return self

    @property
    def kind(self) -> str:
        return next(kind for kind in KINDS if getattr(self, kind) is not None)
