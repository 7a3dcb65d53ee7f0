"""One look at the bench: what comes back, and what stands beside a quantity that did not."""

from __future__ import annotations

import math
from collections.abc import Iterator

import pytest

from drivers.exchange import Job, Reply
from drivers.open_bench import OpenBench, open_bench
from drivers.roles import LoadMode, LoadReading, SupplyMode, SupplyReading
from drivers.trouble import LinkFault
from sequencer.cli.access import access_to, charger_for
from sequencer.engine.inputs import Asked, gather
from sequencer.engine.scan import Scan, Scanner, Seen

CV, CC, PUSHED = SupplyMode.CONSTANT_VOLTAGE, SupplyMode.CONSTANT_CURRENT, SupplyMode.UNREGULATED


@pytest.fixture
def bench() -> Iterator[OpenBench]:
    inputs = gather(Asked("charge-profile", bench="virtual-mains-in-process"))
    with access_to(inputs.bench, charger_for(inputs.bench, None, "sprayer"), 1) as access:
        opened = open_bench(inputs.bench, access)
        yield opened
        opened.close()


def scan(supply: SupplyMode, source_A: float, load: LoadMode = LoadMode.ON, drawn_A: float = 4.0) -> Scan:
    seen = Seen(19.0, 1.0)
    return Scan(
        1.0,
        seen,
        seen,
        Seen(3.0, 1.0),
        SupplyReading(19.0, source_A, supply),
        seen,
        LoadReading(19.0, drawn_A, load),
        seen,
    )


@pytest.mark.parametrize(
    ("one", "held"),
    [
        (scan(CV, 1.0), True),
        (scan(CV, 0.2), True),  # 5 % of the load's current
        (scan(CV, 0.19), False),
        (scan(CC, 4.4), False),
        (scan(PUSHED, 0.0), False),
        (scan(CV, 0.0, LoadMode.OFF, 0.0), True),
        (scan(SupplyMode.OFF, 0.0), False),
    ],
)
def test_the_voltage_condition(one: Scan, held: bool) -> None:
    assert one.voltage_condition is held


def test_the_chargers_current_by_the_second_way() -> None:
    """Kirchhoff at the node: what the load draws less what the supply gives."""
    assert scan(CV, 1.0).difference_A == pytest.approx(3.0)


def test_a_bench_at_rest(bench: OpenBench) -> None:
    seen = Scanner(bench).scan(0.1)
    assert seen.faults == []
    assert all(abs(one.value) < 0.1 for one in (seen.node_V, seen.charger_V, seen.current_A))
    assert (seen.supply.mode, seen.load.mode) == (SupplyMode.OFF, LoadMode.OFF)


def test_the_shunts_voltage_becomes_a_current_and_one_question_goes_to_each(
    bench: OpenBench, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked: list[str] = []

    def exchange(jobs: list[Job], wait_s: float) -> list[Reply]:
        asked.extend(job.instrument for job in jobs)
        answers = {"meter_shunt": ("0.03",), "meter_node": ("9.9E37",), "meter_charger": ("nonsense",)}
        states = {"node_supply": LinkFault("node_supply", "no answer in time"), "node_load": None}
        return [
            Reply(job.instrument, answers.get(job.instrument, ("19", "4", "1", "0")), 7.0, states.get(job.instrument))
            for job in jobs
        ]

    monkeypatch.setattr(bench, "exchange", exchange)
    seen = Scanner(bench).scan(0.1)
    assert sorted(asked) == ["meter_charger", "meter_node", "meter_shunt", "node_load", "node_supply"]
    assert seen.current_A.value == pytest.approx(3.0)  # 30 mV over 10 mΩ
    assert seen.current_A.good
    assert math.isnan(seen.node_V.value)  # overload: SCPI-1999, 7.2.1.4
    assert seen.node_V.fault is None
    assert not seen.node_V.good
    assert seen.charger_V.fault is not None
    assert [fault.instrument for fault in seen.faults] == ["meter_charger", "node_supply"]
    assert seen.supply.mode == SupplyMode.OFF  # nothing is known of it
    assert math.isnan(seen.supply.current_A)
