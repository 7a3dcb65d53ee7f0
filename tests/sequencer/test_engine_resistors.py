"""Resistors are measured with the charger away: what stands there counts, and a broken one ends the run."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import pytest

from drivers.trouble import InstrumentFault
from sequencer.engine import resistors

SPAN = SimpleNamespace(range=1e6, set=0.001, residual=0.3)


class Bench:
    """Hands, journal and clock of a bench whose ohmmeter answers what it is told to."""

    def __init__(self, ohm: float, reads: bool = True) -> None:
        dialect = SimpleNamespace(readings={"ohms": None} if reads else {})
        scanner = SimpleNamespace(dialect=dialect, ask=lambda what, channels: what, answers=lambda *_: [ohm])
        resistor = SimpleNamespace(
            name="decade_id",
            to=lambda value: value,
            dialect=SimpleNamespace(accuracy=SimpleNamespace(resistance=(SPAN,))),
        )
        self.line: Any = SimpleNamespace(scanner=scanner, sense="111", resistor=resistor)
        self.rows: list[tuple[str, float]] = []
        journal = SimpleNamespace(append=lambda name, at_s, value: self.rows.append((name, value)))
        loop = SimpleNamespace(journal=journal, now_s=1.0, set=lambda *deeds: None, observe=lambda seconds: None)
        hands = SimpleNamespace(ask=lambda job: job)
        signals = SimpleNamespace(id=self.line, thermistor=None)
        self.site: Any = SimpleNamespace(loop=loop, bench=SimpleNamespace(hands=hands, signals=signals))


@pytest.mark.parametrize(
    ("setpoint", "ohm"),
    [(1e3, 1003.9), (1e3, 996.1), ("open", float("nan")), ("open", 2e7), ("short", 0.4), (1e6, 997e3)],
)
def test_what_stands_as_set_is_written_down(setpoint: float | str, ohm: float) -> None:
    bench = Bench(ohm)
    resistors.measure(bench.site, setpoint, None)
    assert bench.rows == ([("id.ohm", ohm)] if ohm == ohm else [])  # nan: open, and nothing to write down


@pytest.mark.parametrize(
    ("setpoint", "ohm", "told"),
    [
        (1e3, 1010.0, "was set to 1 kΩ and measures 1.01 kΩ"),
        (1e3, float("nan"), "was set to 1 kΩ and measures open"),
        ("open", 3e3, "was set to open and measures 3 kΩ"),
        ("short", 47.0, "was set to short and measures 47 Ω"),
        ("short", float("nan"), "was set to short and measures open"),
    ],
)
def test_a_broken_resistor_is_the_benchs_fault(setpoint: float | str, ohm: float, told: str) -> None:
    with pytest.raises(InstrumentFault, match=told) as caught:
        resistors.measure(Bench(ohm).site, setpoint, None)
    assert caught.value.instrument == "decade_id"


def test_a_bench_without_ohmmeter_measures_nothing() -> None:
    bench = Bench(47.0, reads=False)
    resistors.measure(bench.site, "short", None)
    resistors.measure_again(bench.site, bench.line, (1e3, 1.1e3))
    assert bench.rows == []


def test_measured_again_is_set_anew_first() -> None:
    bench = Bench(1000.2)
    resistors.measure_again(bench.site, bench.line, (1e3, 1001.0))
    assert bench.rows == [("set.id", 1e3), ("id.ohm", 1000.2), ("set.id", 1001.0), ("id.ohm", 1000.2)]
