"""What a programmable resistor really stood at in a record, and how sure that is: measured, or only set."""

from __future__ import annotations

import math
from collections import defaultdict
from dataclasses import dataclass
from typing import TypeVar

import numpy as np

from drivers.bench import Certificate
from drivers.dialect import OhmmeterSpan, OhmSpan
from drivers.text.si import si
from sequencer.analysis.uncertainty import Budget, Contribution
from sequencer.engine.accuracy import Accuracy
from sequencer.engine.evidence import Evidence

CONTACT_ohm = 0.1  # what the pack's relay contact and its lead add: common practice, no source
LEADS_ohm = 0.1  # what the ohmmeter's own leads and relays add once nulled: common practice, no source
SOURCE = "common practice, no source"


@dataclass(frozen=True)
class Decade:
    """One resistor of a bench during one run.

    place : "id.resistor" or "thermistor.resistor".    measured : what each setting in Ω was measured at, every time,
    with the charger not connected; empty where the bench has no ohmmeter.
    """

    accuracy: Accuracy
    place: str
    measured: dict[float, tuple[float, ...]]

    @classmethod
    def of(cls, evidence: Evidence, accuracy: Accuracy, place: str) -> Decade:
        """Read from the record: each measurement belongs to the setting last made before it, relays having settled."""
        name = place.partition(".")[0]
        told, met = evidence.trace(f"set.{name}"), evidence.trace(f"{name}.ohm")
        found: dict[float, list[float]] = defaultdict(list)
        for index, ohm in zip(np.searchsorted(told.time_s, met.time_s, side="left"), met.value, strict=True):
            if index:
                found[_key(float(told.value[index - 1]))].append(float(ohm))
        return cls(accuracy, place, {key: tuple(values) for key, values in found.items()})

    def ohm(self, set_ohm: float) -> float:
        """The resistance of a setting: the mean of its measurements, else the setting itself; Ω."""
        values = self.measured.get(_key(set_ohm))
        return math.fsum(values) / len(values) if values else set_ohm

    def words(self, *set_ohm: float) -> str:
        """What a reader must know of these settings; nothing where they were measured."""
        return "" if self._all_measured(set_ohm) else "; the resistor as set, not measured"

    def lines(self, *set_ohm: float) -> list[Contribution]:
        """Budget lines of the settings on both sides of an edge, Ω; they count at the middle between them.

        Raises ValueError where a dialect states no accuracy for that resistance.
        """
        middle_ohm = math.fsum(self.ohm(one) for one in set_ohm) / len(set_ohm)
        contact = Contribution.from_half_width("contact", CONTACT_ohm, source=SOURCE)
        if not self._all_measured(set_ohm):
            return [self._as_set(middle_ohm), contact]
        return [*self._as_measured(middle_ohm), *self._repeatability(middle_ohm), contact]

    def _all_measured(self, set_ohm: tuple[float, ...]) -> bool:
        return all(_key(one) in self.measured for one in set_ohm)

    def _as_set(self, ohm: float) -> Contribution:
        name, entry, dialect = self.accuracy.file.at(self.place)
        certified = _certified(name, entry.certificate, ohm)
        if certified is not None:
            return certified
        span = _smallest(dialect.accuracy.resistance, ohm)
        if span is None:
            raise ValueError(f"{name}: its dialect states no accuracy for {si(ohm, 'Ω')}")
        half = span.set * ohm + span.residual
        return Contribution.from_half_width(name, half, source=f"accuracy, dialect {dialect.name}")

    def _as_measured(self, ohm: float) -> list[Contribution]:
        """The smallest range stated that holds it, as an ohmmeter that chooses its range would take."""
        name, entry, dialect = self.accuracy.file.at(f"{self.place.partition('.')[0]}.sense")
        leads = Contribution.from_half_width(f"{name}, leads", LEADS_ohm, source=SOURCE)
        certified = _certified(f"{name}, ohmmeter", entry.certificate, ohm)
        if certified is not None:
            return [certified, leads]
        span = _smallest(dialect.accuracy.ohmmeter, ohm)
        if span is None:
            raise ValueError(f"{name}: its dialect states no accuracy for measuring {si(ohm, 'Ω')}")
        half, source = span.reading * ohm + span.of_range * span.range, f"accuracy, dialect {dialect.name}"
        lines = [Contribution.from_half_width(f"{name}, ohmmeter", half, source=source), leads]
        if span.resolution is not None:
            lines.append(Contribution.from_resolution(f"{name}, resolution", span.resolution, source=source))
        return lines

    def _repeatability(self, ohm: float) -> list[Contribution]:
        """How much one setting differs from another of the same value: relays, and the ohmmeter's noise.

        Pooled over every value that was set more than once, as a share of it (JCGM 100:2008, H.5.2.5); the charger was
        shown one such setting, so it is the standard deviation of one, not of a mean.
        """
        groups = [
            np.array(values) / np.mean(values) for key, values in self.measured.items() if key and len(values) > 1
        ]
        freedom = sum(group.size - 1 for group in groups)
        if not freedom:
            return []
        share = math.sqrt(sum(float(np.sum((group - 1.0) ** 2)) for group in groups) / freedom)
        source = f"{sum(group.size for group in groups)} measurements of {len(groups)} settings"
        return [Contribution("repeatability", share * ohm, dof=float(freedom), source=source)]


Span = TypeVar("Span", OhmSpan, OhmmeterSpan)


def _smallest(spans: tuple[Span, ...], ohm: float) -> Span | None:
    return min((span for span in spans if span.range >= ohm), key=lambda span: span.range, default=None)


def _certified(name: str, certificate: Certificate | None, ohm: float) -> Contribution | None:
    """What the certificate of this individual states (k = 2); None where it says nothing of that resistance."""
    if certificate is None or certificate.resistance is None or certificate.resistance.range < ohm:
        return None
    return Contribution.from_expanded(name, certificate.resistance.U, source=f"certificate {certificate.number}")


def in_kelvins(evidence: Evidence, budget: Budget) -> str:
    """Words for what U in ohms is on the declared curve; nothing where there is none, or it does not reach so far."""
    curve = evidence.declared.curve
    low_ohm, high_ohm = (0.0, 0.0) if curve is None else curve.span_ohm
    if curve is None or not low_ohm <= budget.value <= high_ohm:
        return ""
    slope = abs(curve.slope_ohm_per_K(curve.celsius_at(budget.value)))
    return f"; U of {budget.U / slope * 1e3:.0f} mK at each end, without the curve's own tolerance"


def _key(ohm: float) -> float:
    """Settings that a resistor cannot tell apart are one: to nine digits."""
    return float(f"{ohm:.9g}")
