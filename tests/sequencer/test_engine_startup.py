"""Before energy: outputs that were left on, and a voltage that nobody here made."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

import pytest

from drivers.open_bench import OpenBench, open_bench
from drivers.roles import Deed, SupplyMode
from drivers.trouble import InstrumentFault
from drivers.virtual.meter import OVERLOAD, Meter
from sequencer.cli.access import access_to, charger_for
from sequencer.engine.evidence import open_evidence
from sequencer.engine.inputs import Asked, gather
from sequencer.engine.startup import drive_down, refuse_foreign_voltage


@pytest.fixture
def bench() -> Iterator[OpenBench]:
    inputs = gather(Asked("charge-profile", bench="virtual-mains-in-process"))
    with access_to(inputs.bench, charger_for(inputs.bench, None, "sprayer"), 1) as access:
        opened = open_bench(inputs.bench, access)
        yield opened
        opened.close()


def test_a_bench_at_rest_is_left_alone(bench: OpenBench) -> None:
    assert drive_down(bench) is None
    refuse_foreign_voltage(bench)


@pytest.mark.parametrize("left_on", [["supply"], ["supply", "load"], ["supply", "load", "mains"]])
def test_outputs_that_were_left_on_are_driven_down(bench: OpenBench, left_on: list[str]) -> None:
    deeds = {
        "supply": [
            Deed(bench.supply, "voltage", 18.0),
            Deed(bench.supply, "current_limit", 6.0),
            Deed(bench.supply, "on"),
        ],
        "load": [Deed(bench.load, "current", 5.0), Deed(bench.load, "on")],
        "mains": [Deed(bench.mains, "on")],
    }
    for what in left_on:
        bench.hands.do(deeds[what])
    bench.clock.wait_until(bench.clock.now() + 5.0)  # long enough for a charger to begin
    state = drive_down(bench)
    assert state is not None
    assert state.verified
    supply = bench.supply.read(bench.hands.ask(bench.supply.reading("state")))
    assert supply.mode == SupplyMode.OFF
    refuse_foreign_voltage(bench)


@pytest.mark.parametrize(("meter", "volts"), [("meter_node", 18.2), ("meter_charger", -0.6), ("meter_node", OVERLOAD)])
def test_a_foreign_voltage_is_refused(
    bench: OpenBench, monkeypatch: pytest.MonkeyPatch, meter: str, volts: float
) -> None:
    converted = Meter._converted
    monkeypatch.setattr(Meter, "_converted", lambda self, v: volts if self.name == meter else converted(self, v))
    with pytest.raises(InstrumentFault, match="a real pack") as fault:
        refuse_foreign_voltage(bench)
    assert fault.value.instrument == meter


def test_a_run_does_not_begin_with_a_real_pack_on_the_node(
    rehearse: Callable[..., Any], monkeypatch: pytest.MonkeyPatch
) -> None:
    converted = Meter._converted
    monkeypatch.setattr(Meter, "_converted", lambda self, v: 18.2 if self.name == "meter_node" else converted(self, v))
    done = rehearse()
    assert done.ended.ended == "bench fault"
    assert "a real pack" in done.ended.why
    assert not done.failing
    events = open_evidence(done.record)
    assert [event["on"] for event in events.events("mains") if event["on"]] == []
    assert set(done.verdicts.values()) == {"not run", "not applicable"}
