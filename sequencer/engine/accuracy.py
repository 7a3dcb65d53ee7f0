"""What the instruments add to an uncertainty: accuracy statement or certificate, shunt, readback; as budget lines.

An accuracy statement without a coverage factor bounds the error: rectangular (JCGM 100:2008, 4.3.7). A
certificate's U is taken with k = 2 as it states.
"""

from __future__ import annotations

from dataclasses import dataclass

from drivers.bench_file import BenchFile
from drivers.dialect import CurrentSpan, VoltageSpan
from sequencer.analysis.uncertainty import Contribution
from sequencer.engine.fixture import range_for

THERMAL_V = 1e-6  # of the leads at the shunt: common practice, no source


@dataclass(frozen=True)
class Accuracy:
    """Budget lines of one bench, for a pack whose node reaches `highest_V`."""

    file: BenchFile
    highest_V: float

    def volts(self, where: str, value_V: float, sensitivity: float = 1.0) -> list[Contribution]:
        """Of the voltmeter at `where` ("node.voltage", "node.charger_voltage") reading `value_V`."""
        name, entry, dialect = self.file.at(where)
        certificate = entry.certificate
        if certificate is not None and certificate.voltage is not None and certificate.voltage.range >= abs(value_V):
            source = f"certificate {certificate.number}"
            return [
                Contribution.from_expanded(name, certificate.voltage.U, 2.0, sensitivity=sensitivity, source=source)
            ]
        span = self._span(dialect.accuracy.voltage, range_for(dialect, self._most_V(where)))
        return self._stated(name, span, value_V, sensitivity, f"accuracy, dialect {dialect.name}")

    def _most_V(self, where: str) -> float:
        limits, wiring = self.file.bench.limits, self.file.bench.wiring.node
        if where == "node.current.meter":
            return limits.current * wiring.current.shunt_ohm
        drop_V = limits.current * (wiring.ballast + 2 * wiring.current.shunt_ohm)
        return self.highest_V + (drop_V if where == "node.charger_voltage" else 0.0)

    def current(self, value_A: float) -> list[Contribution]:
        """Of the charger's current by shunt: the meter across it, and the shunt itself."""
        path = self.file.bench.wiring.node.current
        meter = self.volts("node.current.meter", value_A * path.shunt_ohm, 1.0 / path.shunt_ohm)
        assert path.shunt.high is not None
        half_ohm = path.shunt.high - path.shunt_ohm
        shunt = Contribution.from_half_width(
            "shunt",
            half_ohm,
            "rectangular",
            sensitivity=abs(value_A) / path.shunt_ohm,
            source=f"bench file: {path.shunt.text}",
        )
        thermal = Contribution.from_half_width(
            "thermal EMF", THERMAL_V, sensitivity=1.0 / path.shunt_ohm, source="common practice, no source"
        )
        return [*meter, shunt, thermal]

    def readback(self, where: str, value_A: float) -> list[Contribution]:
        """Of the current that a supply or load reads back."""
        name, entry, dialect = self.file.at(where)
        certificate = entry.certificate
        if certificate is not None and certificate.current is not None:
            return [
                Contribution.from_expanded(name, certificate.current.U, 2.0, source=f"certificate {certificate.number}")
            ]
        spans = dialect.accuracy.current
        return self._stated(name, spans[0] if spans else None, value_A, 1.0, f"accuracy, dialect {dialect.name}")

    @staticmethod
    def _span(spans: tuple[VoltageSpan, ...], chosen: float) -> VoltageSpan | None:
        return next((span for span in spans if span.range == chosen), None)

    @staticmethod
    def _stated(
        name: str, span: VoltageSpan | CurrentSpan | None, value: float, sensitivity: float, source: str
    ) -> list[Contribution]:
        if span is None:
            raise ValueError(f"{name}: its dialect states no accuracy, and it has no certificate")
        half = span.reading * abs(value) + span.of_range * span.range
        lines = [Contribution.from_half_width(name, half, "rectangular", sensitivity=sensitivity, source=source)]
        if span.resolution is not None:
            lines.append(
                Contribution.from_resolution(
                    f"{name}, resolution", span.resolution, sensitivity=sensitivity, source=source
                )
            )
        return lines

    def tap(self, number: int, value_V: float) -> list[Contribution]:
        """Of the supply channel that plays a cell, reading its own output."""
        name, _, dialect = self.file.at(f"taps.{number - 1}.supply")
        spans = sorted(
            (span for span in dialect.accuracy.voltage if span.range >= value_V), key=lambda span: span.range
        )
        source = f"accuracy, dialect {dialect.name}"
        return self._stated(f"{name}, cell {number}", spans[0] if spans else None, value_V, 1.0, source)

    def scanned(self, where: str, value_V: float, name: str) -> list[Contribution]:
        """Of a scanner's reading at `where`, such as "taps.0.meter": the smallest range stated that holds it."""
        _, _, dialect = self.file.at(where)
        spans = sorted(
            (span for span in dialect.accuracy.voltage if span.range >= value_V), key=lambda span: span.range
        )
        return self._stated(name, spans[0] if spans else None, value_V, 1.0, f"accuracy, dialect {dialect.name}")

    def tap_scale(self, number: int, difference_A: float = 1.0) -> list[Contribution]:
        """Of a difference between two currents of a tap, by scanner and shunt: what is of a range cancels in it."""
        shunt = self.file.bench.wiring.taps[number - 1].shunt
        assert shunt.nominal is not None
        assert shunt.high is not None
        _, _, dialect = self.file.at(f"taps.{number - 1}.meter")
        gain = max((span.reading for span in dialect.accuracy.voltage), default=0.0)
        tolerance, amount_A = shunt.high / shunt.nominal - 1.0, abs(difference_A)
        return [
            Contribution.from_half_width(
                f"tap {number}, scanner's gain", amount_A * gain, source=f"accuracy, dialect {dialect.name}"
            ),
            Contribution.from_half_width(
                f"tap {number}, shunt",
                amount_A * tolerance,
                source=f"bench file: {shunt.text}",
            ),
        ]
