"""The limits that a specification sets on the findings that a procedure judges."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from drivers.text.measures import Band, Rule
from sequencer.model.curves import Curve
from sequencer.model.findings import Kind, definitions
from sequencer.model.specification import Specification


@dataclass(frozen=True)
class LimitRow:
    """One thing to be judged: `band` for a quantity or an interval, `expected` for a state or a class.

    Neither: not declared. `place`: which stage, band, cell or range of start voltages, from 1. `words`: how the
    specification writes the limit. `least`: the smallest amount of what is expected to be found.
    """

    name: str
    finding: str
    kind: Kind
    unit: str
    rule: Rule
    band: Band | None = None
    expected: str | None = None
    place: int | None = None
    words: str | None = None
    least: float | None = None

    @property
    def declared(self) -> bool:
        return self.band is not None or self.expected is not None


@dataclass(frozen=True)
class Declared:
    """What a specification says for one pack: limits are looked up here by finding."""

    specification: Specification
    cells: int
    curve: Curve | None = None

    def rows(self, judged: tuple[str, ...], rule: Rule | None = None) -> list[LimitRow]:
        """The limits behind `judged`, in its order; `rule` overrides every rule."""
        return [row for name in judged for row in self._rows(name, rule)]

    def elsewhere(self, judged: tuple[str, ...]) -> list[str]:
        """Limits that are declared and not judged."""
        others = tuple(name for name in definitions() if name not in judged and name != "charges")
        return [row.name for row in self.rows(others) if row.declared]

    def _rows(self, name: str, rule: Rule | None) -> list[LimitRow]:
        spec = self.specification
        counts = {"stage": len(spec.charge.stages), "band": len(spec.id_bands), "cell": self.cells}
        counts["start"] = 0 if spec.low_start is None else len(spec.low_start.starts)
        each = definitions()[name].each
        if each is None:
            return [self._row(name, name, None, rule)]
        family, _, what = name.rpartition(".")
        if self._undeclared(each, name):
            return [self._row(name, name, 1, rule)]  # one line says that nothing is declared, not one for each cell
        top = family.partition(".")[0]
        return [self._row(f"{top}.{each}{place}.{what}", name, place, rule) for place in range(1, counts[each] + 1)]

    def _undeclared(self, each: str, name: str) -> bool:
        """Whether nothing is declared for any cell or start voltage."""
        if name.startswith("tap_trip."):
            return self.specification.tap_trip is None
        return each in ("cell", "start") and self._declared(name, 1) is None

    def _row(self, label: str, name: str, place: int | None, rule: Rule | None) -> LimitRow:
        definition = definitions()[name]
        found = self._declared(name, place)
        band, expected = (found, None) if isinstance(found, Band) else (None, found)
        words = None
        if band is not None and definition.unit == "Ω" and name.startswith("temperature."):
            band, words = self._in_ohms(band), band.text
        own = band.rule if band is not None and band.rule is not None else self._family_rule(name)
        least = self._least_balancing() if name == "balancing.screening" else None
        return LimitRow(label, name, definition.kind, definition.unit, rule or own, band, expected, place, words, least)

    def _least_balancing(self) -> float | None:
        balancing = self.specification.balancing
        return None if balancing is None or balancing.current is None else balancing.current.low

    def _family_rule(self, name: str) -> Rule:
        spec = self.specification
        declared: dict[str, Any] = {
            "temperature": spec.temperature,
            "tap_trip": spec.tap_trip,
            "balancing": spec.balancing,
            "low_start": spec.low_start,
        }
        family: Any = declared.get(name.partition(".")[0])
        rule: Rule | None = getattr(family, "rule", None)
        return rule or spec.rule

    def _in_ohms(self, band: Band) -> Band:
        """A thermistor limit is judged in ohms, by the declared curve; the curve adds no uncertainty."""
        assert self.curve is not None
        low, high = self.curve.ohm_limits(band.low, band.high)
        return Band(low, high, None, band.rule, band.text)

    def _declared(self, name: str, place: int | None) -> Band | str | None:
        family, _, what = name.rpartition(".")
        match family:
            case "":
                return "charges"
            case "charge":
                return self._of_charge(what)
            case "charge.stage":
                stage = self.specification.charge.stages[(place or 1) - 1]
                return stage.current if what == "current" else stage.threshold_per_cell
            case "id.band":
                band = self.specification.id_bands[(place or 1) - 1]
                return self._of_band(band, what)
            case "id":
                return self._elsewhere(what)
            case "temperature":
                return self._of_temperature(what)
            case "tap_trip":
                trip = self.specification.tap_trip
                found: Band | str | None = None if trip is None else getattr(trip, what)
                return found
            case "balancing":
                return self._of_balancing(what)
            case "low_start":
                return self._of_low_start(what, place)
        raise KeyError(name)

    def _of_balancing(self, what: str) -> Band | str | None:
        """A screening is held against either; the absence itself is declared by `none_above` alone."""
        balancing = self.specification.balancing
        if balancing is None:
            return None
        if what == "current":
            return balancing.current
        return balancing.most or ("found" if what == "screening" else None)

    def _of_charge(self, what: str) -> Band | str | None:
        charge = self.specification.charge
        if what == "ends":
            return None if charge.ends is None else "ends" if charge.ends else "does not end"
        per_cell = {"voltage": charge.voltage_per_cell, "end_voltage": charge.end_voltage_per_cell}
        found: Band | str | None = per_cell[what] if what in per_cell else getattr(charge, what)
        return found

    @staticmethod
    def _of_band(band: Any, what: str) -> Band | None:
        """An edge that is not declared must at least lie outside its band."""
        if what == "current":
            return band.current  # type: ignore[no-any-return]
        if what == "lower_edge":
            return band.lower_edge or Band(None, band.low_ohm, text=f"below {band.id.text}")
        return band.upper_edge or Band(band.high_ohm, None, text=f"above {band.id.text}")

    def _elsewhere(self, what: str) -> str | None:
        """With bands declared, anything else must not charge, unless the specification says otherwise."""
        said: str | None = getattr(self.specification.id_elsewhere, what)
        return said or ("no charge" if self.specification.id_bands else None)

    def _of_low_start(self, what: str, place: int | None) -> Band | str | None:
        low = self.specification.low_start
        if low is None:
            return None
        if what == "response":
            return low.starts[(place or 1) - 1].response if low.starts else None
        if what == "weak_cell":
            return low.weak_cell
        part: Any = low.precharge if what in ("precharge_current", "threshold", "precharge_time") else low.probe
        keys = {"threshold": "threshold_per_cell"}
        found: Band | None = getattr(part, keys.get(what, what.rpartition("_")[2]), None)
        return found

    def _of_temperature(self, what: str) -> Band | str | None:
        window = self.specification.temperature
        if window is None:
            return None
        if what in ("open", "short"):
            said: str | None = getattr(window, what)
            return said or "no charge"
        pair: Any = getattr(window, what.partition("_")[0])
        found: Band | None = None if pair is None else pair[0 if what.endswith("low") else 1]
        return found
