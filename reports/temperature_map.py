"""What the figure of the temperature window shows: declared windows, starts, walks, limits as found; no drawing."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from reports.insertions import Bracket, Mark, at_contact, brackets, counted, marks, number
from reports.wording import si

if TYPE_CHECKING:
    from drivers.text.measures import Band
    from sequencer.model.curves import Curve
    from sequencer.model.specification import Specification

Json = Mapping[str, Any]
SIDES = ("low", "high")
# A stop on the quick way to the search is the stop of the walk; only a step "back" can tell that the charge resumed.
_OUTWARD = ("probe", "approach", "out")


@dataclass(frozen=True)
class Limit:
    """One declared limit in °C: the end up to which the charge is owed, and the end beyond which it is forbidden."""

    owed_C: float
    forbidden_C: float


@dataclass(frozen=True)
class Step:
    """One setting of the thermistor during a charge. out : outward, else back.   charged : whether the charge went on.

    An outward setting that the charge let pass on the quick way to the search is none: it stands too briefly to tell.
    """

    celsius: float
    out: bool
    charged: bool


@dataclass(frozen=True)
class Side:
    """One end of a window: the declared limit, and the limit that was found, in °C.   released_C : goes on again."""

    declared: Limit | None
    found: Bracket | None
    steps: tuple[Step, ...] = ()

    @property
    def released_C(self) -> float | None:
        return next((step.celsius for step in self.steps if not step.out and step.charged), None)


@dataclass(frozen=True)
class TemperatureMap:
    """All that the figure shows. start, run : cold end, hot end.   scale : °C with the thermistor's resistance there.

    open_is_cold : the side on which an open contact reads; an NTC reads an open contact as cold.
    """

    start: tuple[Side, Side]
    run: tuple[Side, Side]
    marks: tuple[Mark, ...]
    open: tuple[Mark, ...]
    short: tuple[Mark, ...]
    span_C: tuple[float, float]
    scale: tuple[tuple[float, str], ...]
    open_is_cold: bool
    caption: str


def temperature_map(
    findings: Json, verdicts: Iterable[Json], specification: Specification | None, curve: Curve | None
) -> TemperatureMap | None:
    """The figure of starts and walks; None where neither was made. Without a curve it has no resistances."""
    shown = marks(findings.get("points") or (), "temperature")
    walks = [one for one in findings.get("walks") or () if str(one.get("finding")).startswith("temperature.")]
    if not shown and not walks:
        return None
    found = {
        name: _celsius(edge, curve) for name, edge in brackets(verdicts).items() if name.startswith("temperature.")
    }
    window = None if specification is None else specification.temperature
    start = _sides("start", None if window is None else window.start, found, ())
    run = _sides("run", None if window is None else window.run, found, walks)
    at_C = tuple(mark for mark in shown if mark.celsius is not None)
    span_C = _span(at_C, (*start, *run))
    return TemperatureMap(
        start=start,
        run=run,
        marks=at_C,
        open=tuple(mark for mark in shown if mark.role == "open"),
        short=tuple(mark for mark in shown if mark.role == "short"),
        span_C=span_C,
        scale=_scale(span_C, curve),
        open_is_cold=curve is None or curve.ohm_at(curve.span_C[0]) > curve.ohm_at(curve.span_C[1]),
        caption=_caption(shown, run),
    )


def celsius_span(curve: Curve | None, low_ohm: float, high_ohm: float) -> tuple[float, float] | None:
    """Two resistances as temperatures, rising; None where there is no curve or it does not reach so far."""
    try:
        ends = None if curve is None else sorted(curve.celsius_at(ohm) for ohm in (low_ohm, high_ohm))
    except ValueError:
        return None
    return None if ends is None else (ends[0], ends[1])


def _celsius(edge: Bracket, curve: Curve | None) -> Bracket | None:
    ends = celsius_span(curve, edge.low, edge.high)
    return None if ends is None else Bracket(*ends, None, None, edge.word)


def _sides(
    name: str, declared: tuple[Band, Band] | None, found: Mapping[str, Bracket | None], walks: Sequence[Json]
) -> tuple[Side, Side]:
    cold, hot = (
        Side(
            declared=None if declared is None else _limit(declared[end], cold=end == 0),
            found=found.get(f"temperature.{name}_{side}"),
            steps=_steps(one for one in walks if one["finding"] == f"temperature.{name}_{side}"),
        )
        for end, side in enumerate(SIDES)
    )
    return cold, hot


def _limit(band: Band, *, cold: bool) -> Limit | None:
    """A limit whose other end is open is a line."""
    low = band.high if band.low is None else band.low
    high = band.low if band.high is None else band.high
    if low is None or high is None:
        return None
    return Limit(high, low) if cold else Limit(low, high)


def _steps(walks: Iterable[Json]) -> tuple[Step, ...]:
    steps = []
    for walk in walks:
        celsius, way = number(walk.get("celsius")), walk.get("way")
        if celsius is None:
            continue
        if way == "back":
            steps.append(Step(celsius, out=False, charged=bool(walk.get("goes_on"))))
        elif way in _OUTWARD:
            charged = walk.get("stop_s") is None
            if not (charged and way == "approach"):
                steps.append(Step(celsius, out=True, charged=charged))
    return tuple(steps)


def _span(shown: Sequence[Mark], sides: Sequence[Side]) -> tuple[float, float]:
    seen = [mark.celsius for mark in shown if mark.celsius is not None]
    for side in sides:
        seen += [step.celsius for step in side.steps]
        seen += [side.found.low, side.found.high] if side.found else []
        seen += [side.declared.owed_C, side.declared.forbidden_C] if side.declared else []
    low, high = (min(seen), max(seen)) if seen else (0.0, 50.0)
    margin = max(0.12 * (high - low), 2.0)
    return low - margin, high + margin


def _scale(span_C: tuple[float, float], curve: Curve | None) -> tuple[tuple[float, str], ...]:
    """Resistances at every tenth degree that the curve knows; every second one where that would be many."""
    if curve is None:
        return ()
    step = 10 if span_C[1] - span_C[0] <= 120 else 20
    whole = range(step * round(span_C[0] / step - 0.5), int(span_C[1]) + 1, step)
    inside = [float(t) for t in whole if span_C[0] <= t <= span_C[1] and curve.span_C[0] <= t <= curve.span_C[1]]
    return tuple((celsius, si(curve.ohm_at(celsius), "Ω", 3)) for celsius in inside)


def _caption(shown: Sequence[Mark], run: tuple[Side, Side]) -> str:
    parts = [
        "Filled: where a charge is declared to be owed; outlined: the tolerance of each limit."
        " Bar: between its ends the limit was found to lie, by the declared curve.",
        f"Start: {counted(shown)}" if shown else "",
        at_contact(shown, "Thermistor contact"),
        _walked(run),
    ]
    return " ".join(part for part in parts if part)


def _walked(run: tuple[Side, Side]) -> str:
    """How a running charge took the walks, in words."""
    told = []
    for word, side in zip(("cold", "hot"), run, strict=True):
        if not side.steps:
            continue
        stopped = next((step for step in side.steps if step.out and not step.charged), None)
        if stopped is None:
            told.append(f"at the {word} end it went on as far as {side.steps[-1].celsius:.1f} °C")
        elif side.released_C is not None:
            on = f"went on again at {side.released_C:.1f} °C"
            told.append(f"at the {word} end it stopped at {stopped.celsius:.1f} °C and {on}")
        else:
            walked = any(not step.out for step in side.steps)
            on = "did not go on by itself" if walked else "was not walked back"
            told.append(f"at the {word} end it stopped at {stopped.celsius:.1f} °C and {on}")
    return f"Run, small dots where a running charge went on: {'; '.join(told)}." if told else ""
