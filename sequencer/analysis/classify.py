"""Which charge algorithm a voltage and current log shows, how sure that is, and why."""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Any

import numpy.typing as npt

from sequencer.analysis.algorithm import Finding, find_algorithm
from sequencer.analysis.phases import Phase
from sequencer.analysis.sanitise import Log, sanitise
from sequencer.analysis.stages import (
    Course,
    Quantity,
    Stage,
    course_of,
    end_current,
    end_voltage,
    held_mean,
    plateaus,
    stage_of,
)
from sequencer.analysis.trace import Trace, trace_of

LEAST_ROWS = 5


@dataclass(frozen=True)
class Classification:
    """What a log shows.

    confidence : probability that `algorithm` is right, 0 ... 0.99.
    voltage_limit_V : the regulated voltage, or without a constant-voltage phase the voltage at which the last stage
    ended.    step_ratios : each plateau's current over that of the one before.
    cutoff_current_A : last current of a final constant-voltage phase; with the flag "ends-in-charge" the log ends there
    and the charger's own cut-off may be lower.    why : one sentence.
    """

    algorithm: str
    confidence: float
    stages: tuple[Stage, ...]
    voltage_limit_V: Quantity | None
    step_ratios: tuple[float, ...]
    cutoff_current_A: Quantity | None
    precharge: bool
    flags: tuple[str, ...]
    why: str

    def as_dict(self) -> dict[str, Any]:
        """The object of `classify --json`."""
        return {
            "algorithm": self.algorithm,
            "confidence": self.confidence,
            "stages": [stage.as_dict() for stage in self.stages],
            "voltage_limit_V": self.voltage_limit_V.as_dict() if self.voltage_limit_V else None,
            "step_ratios": list(self.step_ratios),
            "cutoff_current_A": self.cutoff_current_A.as_dict() if self.cutoff_current_A else None,
            "precharge": self.precharge,
            "flags": list(self.flags),
            "why": self.why,
        }


def classify(
    time_s: npt.ArrayLike,
    voltage_V: npt.ArrayLike,
    current_A: npt.ArrayLike,
    *,
    current_u_A: float | None = None,
    voltage_u_V: float | None = None,
) -> Classification:
    """Reads the algorithm and its stages off a log of any scale and spacing.

    time_s, voltage_V, current_A : (n,), s, V at the charger or pack, A positive into the pack.
    current_u_A, voltage_u_V : standard uncertainty of the instruments, added in quadrature to each stage's type A part.
    Raises ValueError naming the argument when a column is no row of numbers, has another length, or a u is not a number
    of zero or above. A log in which nothing can be decided is no error: it is "inconclusive", and `why` says so.
    """
    for name, u in (("current_u_A", current_u_A), ("voltage_u_V", voltage_u_V)):
        if u is not None and not 0.0 <= u < float("inf"):
            raise ValueError(f"{name}: expected a standard uncertainty of zero or above, got {u!r}")
    log = sanitise(time_s, voltage_V, current_A)
    flags = _log_flags(log)
    if log.rows < LEAST_ROWS:
        return _nothing("inconclusive", 0.0, flags, f"{log.rows} usable rows are too few to tell anything")
    trace = trace_of(log, current_u_A=current_u_A, voltage_u_V=voltage_u_V)
    if trace.scale_A == 0.0:
        return _nothing("no-charge", _no_charge_confidence(log), flags, "no current flows into the pack")
    course = course_of(trace)
    return _described(trace, course, find_algorithm(trace, course, log), flags)


def _described(trace: Trace, course: Course, finding: Finding, flags: list[str]) -> Classification:
    charging = [phase for phase in course.phases if phase.kind in ("cc", "cv", "constant-power", "taper")]
    levels = [phase.level_A for phase in plateaus(trace, course.phases)]
    return Classification(
        finding.algorithm,
        finding.confidence,
        tuple(stage_of(trace, phase, course.train) for phase in course.phases),
        _voltage_limit(trace, charging),
        tuple(after / before for before, after in itertools.pairwise(levels)),
        end_current(trace, charging[-1]) if charging and charging[-1].kind == "cv" and finding.shows_cutoff else None,
        any(phase.kind == "precharge" for phase in course.phases),
        tuple(dict.fromkeys([*flags, *finding.flags])),
        finding.why,
    )


def _voltage_limit(trace: Trace, charging: list[Phase]) -> Quantity | None:
    held = [phase for phase in charging if phase.kind == "cv"]
    if held:
        return held_mean(trace, held[-1])
    return end_voltage(trace, charging[-1]) if charging else None


def _log_flags(log: Log) -> list[str]:
    flags = []
    if log.not_finite:
        flags.append("rows-not-numbers")
    if log.out_of_order:
        flags.append("time-reset")
    return flags


def _no_charge_confidence(log: Log) -> float:
    return 0.97 if log.rows >= 20 else 0.8


def _nothing(algorithm: str, confidence: float, flags: list[str], why: str) -> Classification:
    return Classification(algorithm, confidence, (), None, (), None, False, tuple(flags), why)
