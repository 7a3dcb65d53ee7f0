"""Lab instructions on a bench whose wiring is wrong, or whose charger does the unexpected."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from drivers.virtual.meter import Meter
from drivers.virtual.trace import CHARGER, NODE, SHUNT
from drivers.virtual.world import World
from sequencer.engine.evidence import open_evidence
from sequencer.engine.fixture import LOAD_SHARE, load_current_A, range_for
from sequencer.engine.inputs import Asked, gather

QUICK = {"start": "4.00 V", "after": "10 s"}


@pytest.fixture
def miswired(monkeypatch: pytest.MonkeyPatch) -> Callable[[dict[str, int]], None]:
    """Put a meter's leads somewhere else: miswired({"meter_charger": NODE})."""

    def wire(leads: dict[str, int]) -> None:
        made = World.__init__

        def making(world: World, *arguments: Any, **named: Any) -> None:
            made(world, *arguments, **named)
            for meter, signal in leads.items():
                vars(world.instruments[meter])["_signal"] = signal

        monkeypatch.setattr(World, "__init__", making)

    return wire


def test_the_charger_meter_on_the_wrong_side_of_the_ballast(
    rehearse: Callable[..., Any], miswired: Callable[[dict[str, int]], None]
) -> None:
    """It would read 0.35 V too little: a charger in order would fail by 70 mV per cell."""
    miswired({"meter_charger": NODE})
    done = rehearse(changes=QUICK)
    assert done.ended.ended == "bench fault"
    assert "meter_charger" in done.ended.why
    assert "is the meter at the charger's contacts?" in done.ended.why
    assert not done.failing
    assert done.ended.safe.verified


def test_a_charger_meter_whose_lead_is_open(
    rehearse: Callable[..., Any], miswired: Callable[[dict[str, int]], None]
) -> None:
    """Found before the charger's mains are on."""
    miswired({"meter_charger": SHUNT})
    done = rehearse(changes=QUICK)
    assert done.ended.ended == "bench fault"
    assert "with no current flowing" in done.ended.why
    assert not any(event["on"] for event in open_evidence(done.record).events("mains"))


def test_meters_changed_over(rehearse: Callable[..., Any], miswired: Callable[[dict[str, int]], None]) -> None:
    miswired({"meter_charger": NODE, "meter_node": CHARGER})
    done = rehearse(changes=QUICK)
    assert done.ended.ended in ("bench fault", "trip")
    assert not done.failing


def test_a_reversed_shunt(rehearse: Callable[..., Any], monkeypatch: pytest.MonkeyPatch) -> None:
    converted = Meter._converted
    monkeypatch.setattr(Meter, "_converted", lambda self, v: converted(self, -v if self.name == "meter_shunt" else v))
    done = rehearse(changes=QUICK)
    assert done.ended.ended == "trip"
    assert "reversed" in done.ended.why
    assert not done.failing
    assert done.judged.bench_trip


@pytest.mark.parametrize("leads", ["8 mΩ", "40 mΩ"])
def test_what_lies_between_contacts_and_node_is_measured(rehearse: Callable[..., Any], leads: str) -> None:
    """Ballast 100 mΩ, shunt 10 mΩ and leads, as the virtual bench has them; 0.1 % of the shunt's tolerance."""
    done = rehearse(bench={"leads: 8 mΩ": f"leads: {leads}"}, changes=QUICK)
    true_ohm = 0.11 + float(leads.split()[0]) / 1000
    assert open_evidence(done.record).manifest["standin"]["Rp_ohm"] == pytest.approx(true_ohm, rel=2e-3)
    assert done.judged.exit_status == 0


@pytest.mark.parametrize(
    ("node", "least_s", "most_s"), [("5 ms, settling: 10 ms", 0.0, 0.1), ("200 ms, settling: 150 ms", 0.6, 0.9)]
)
def test_settling_is_measured_to_a_scan_and_never_too_short(
    rehearse: Callable[..., Any], node: str, least_s: float, most_s: float
) -> None:
    """To 5 %: delay + 3 time constants (computed: ln 20), 0.65 s for the slow one; looked at every 0.1 s."""
    done = rehearse(bench={"delay: 5 ms, settling: 10 ms": f"delay: {node}"}, changes=QUICK)
    assert least_s <= open_evidence(done.record).manifest["standin"]["settling_s"] <= most_s


def test_a_charger_that_begins_late_is_waited_for_and_one_that_never_does_is_not(rehearse: Callable[..., Any]) -> None:
    """Three start delays and at least 15 s (specification: 2 s)."""
    assert rehearse(charger={"start_delay": "14 s"}, changes=QUICK).verdicts["charges"] == "pass"
    late = rehearse(charger={"start_delay": "18 s"}, changes=QUICK)
    assert late.verdicts["charges"] == "fail"
    window = open_evidence(late.record).window("charges")
    assert window is not None
    assert window.event["watched_s"] == 15.0


def test_the_load_takes_more_than_the_charger_can_deliver() -> None:
    inputs = gather(Asked("charge-profile", bench="virtual-mains-in-process"))
    assert load_current_A(inputs.specification.model) == pytest.approx(LOAD_SHARE * 4.5)


@pytest.mark.parametrize(("most_V", "range_V"), [(0.05, 0.1), (0.1, 0.1), (0.12, 1.0), (21.0, 100.0), (5000.0, 1000.0)])
def test_the_smallest_range_that_holds_what_may_come(most_V: float, range_V: float) -> None:
    inputs = gather(Asked("charge-profile", bench="virtual-mains-in-process"))
    assert range_for(inputs.bench.dialect("meter_node"), most_V) == range_V


def test_long_leads_do_not_lift_the_charger_over_a_threshold_before_they_are_measured(
    rehearse: Callable[..., Any],
) -> None:
    """37 mΩ that nobody has measured yet are 25 mV per cell at 2 A."""
    long_leads = {"leads: 8 mΩ": "leads: 37 mΩ"}
    done = rehearse(spec="lantern", bench=long_leads, changes={"start": "3.94 V", "compression": "5"})
    assert done.judged.exit_status == 0, done.verdicts
