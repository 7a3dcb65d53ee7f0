"""Whose doing a trip is, on scans made up for the purpose; then rehearsals of the same troubles.

The bench: 5 cells, bound 21.75 V (full open-circuit voltage and 150 mV per cell) and 8 A (twice the rated current),
a load of 5.625 A, 110 mΩ between contacts and node, charger at 3 A.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from drivers.bench import Limits
from drivers.roles import LoadMode, LoadReading, SupplyMode, SupplyReading
from drivers.trouble import LinkFault
from drivers.virtual.meter import OVERLOAD
from drivers.virtual.world import World
from sequencer.engine.evidence import open_evidence
from sequencer.engine.guard import Bounds, Guard, Trip
from sequencer.engine.inputs import FOLDERS, Asked, gather
from sequencer.engine.scan import Scan, Seen

BOUNDS = Bounds(node_V=21.75, charger_V=21.75, current_A=8.0, charge_Ah=5.0, time_s=43200.0, equal_readings=50)
OHM, LOAD_A = 0.11, 5.625
ON, CV, CC = LoadMode.ON, SupplyMode.CONSTANT_VOLTAGE, SupplyMode.CONSTANT_CURRENT


def scan(
    time_s: float = 0.0,
    current_A: float = 3.0,
    node_V: float = 19.0,
    *,
    charger_V: float | None = None,
    true_A: float | None = None,
    supply: SupplyMode = CV,
    load: LoadMode = ON,
    drawn_A: float = LOAD_A,
) -> Scan:
    """One look at a bench in order; `true_A` is the current that supply and load see, where the shunt lies."""
    source_A = drawn_A - (current_A if true_A is None else true_A)
    return Scan(
        time_s,
        Seen(node_V, time_s),
        Seen(node_V + current_A * OHM if charger_V is None else charger_V, time_s),
        Seen(current_A, time_s),
        SupplyReading(node_V, max(source_A, 0.0), supply),
        Seen(node_V, time_s),
        LoadReading(node_V, drawn_A if load is ON else 0.0, load),
        Seen(node_V, time_s),
    )


STOOD = [scan(-1), scan(0)]  # two scans in which all stood: what the load draws is known


def guard(*before: Scan, fixture_ohm: float | None = OHM) -> Guard:
    made = Guard(BOUNDS, OHM, fixture_ohm)
    for one in before:
        made.check(one, 1.0)
    return made


def tripped(made: Guard, one: Scan, period_s: float = 1.0, set_V: float | None = None) -> Trip:
    with pytest.raises(Trip) as caught:
        made.check(one, period_s, set_V)
    return caught.value


# bounds: from bench and pack alone


def test_bounds_are_the_lower_of_bench_and_pack() -> None:
    inputs = gather(Asked("charge-profile", bench="virtual-mains-in-process"))
    pack, limits = inputs.pack.model, inputs.bench.bench.limits
    assert Bounds.of(limits, pack).node_V == pytest.approx(5 * 4.35)
    assert Bounds.of(limits, pack).current_A == pytest.approx(8.0)
    tight = Limits(node=20.0, current=2.0, charge=1.0)
    assert Bounds.of(tight, pack).charger_V == 20.0
    assert Bounds.of(tight, pack).current_A == 2.0


def test_a_bench_in_order_passes() -> None:
    made = guard(*(scan(t, node_V=18.5 + t / 1e3 + t % 7 * 1e-4, current_A=3 + t % 5 * 1e-4) for t in range(200)))
    assert made.charge_Ah == pytest.approx(199 * 3.0 / 3600.0, rel=1e-3)


# the charger's doing: every output stood, and two readings agree


def test_a_charger_too_high_with_good_outputs() -> None:
    trip = tripped(guard(*STOOD), scan(1, 1.0, 21.70))
    assert (trip.cause, trip.quantity) == ("charger", "charger voltage")
    assert trip.value == pytest.approx(21.81)


def test_a_charger_with_too_much_current_with_good_outputs() -> None:
    high = replace(scan(1, 8.5), load=LoadReading(19.0, 11.0, ON), supply=SupplyReading(19.0, 2.5, CV))
    assert tripped(guard(*STOOD), high).cause == "charger"


def test_a_charger_that_takes_the_node_from_the_supply() -> None:
    made = guard(scan(0), scan(1, 5.6, true_A=5.6))
    trip = tripped(guard(scan(0), scan(1, 5.6), scan(2, 5.6)), scan(3, 5.6))
    assert (trip.cause, trip.quantity) == ("charger", "supply current")
    made.check(scan(2.5, 5.6), 1.0)  # for less than two seconds it is only not read
    made.check(scan(3.0), 1.0)
    made.check(scan(4.0, 5.6), 1.0)


def test_more_charge_than_the_bench_allows() -> None:
    made = guard(scan(0))
    made.charge_Ah = 4.9999
    trip = tripped(made, scan(1))
    assert (trip.cause, trip.quantity) == ("charger", "charge")


# the bench's doing


@pytest.mark.parametrize(
    ("before", "now", "why"),
    [
        ([], scan(1, 1.0, 21.70), "no scan before"),
        ([scan(0, supply=CC)], scan(1, 1.0, 21.70), "current limit in the scan before"),
        ([scan(0, load=LoadMode.OFF)], scan(1, 1.0, 21.70), "load was not on"),
        (STOOD, scan(1, 1.0, 21.5, charger_V=22.4), "voltage meters differ"),
        (STOOD[1:], scan(1, 1.0, 21.70), "did not draw"),
        ([*STOOD, replace(scan(0.5), load=LoadReading(19.0, 2.0, ON))], scan(1, 1.0, 21.70), "did not draw"),
        (STOOD, scan(1, 0.4, 21.73, true_A=0.0), "two ways to measure"),
        (STOOD, scan(1, 0.01, 21.80), "no charging current flows"),
        (STOOD, replace(scan(1, 1.0, 21.7), supply=SupplyReading(19.0, 4.6, CV)), "supply's readback differ"),
        (STOOD, scan(1, 8.5, true_A=3.0), "two ways to measure"),
        ([scan(0, supply=CC)], scan(1, 8.5), "current limit in the scan before"),
        ([scan(0)], scan(1, -0.3), "flows out of the pack"),
        ([scan(0)], scan(1, load=LoadMode.TRIPPED), "load tripped"),
    ],
)
def test_what_is_put_down_to_the_bench(before: list[Scan], now: Scan, why: str) -> None:
    trip = tripped(guard(*before), now)
    assert trip.cause == "bench"
    assert why in trip.why


def test_a_reading_missing_in_the_scan_before_leaves_the_cause_unknown() -> None:
    before = replace(scan(1), load_seen=Seen(math.nan, 1.0, LinkFault("load", "no answer in time")))
    trip = tripped(guard(scan(0), before), scan(2, 1.0, 21.70))
    assert trip.cause == "bench"
    assert "missing in the scan before" in trip.why


@pytest.mark.parametrize(
    ("lost", "why"),
    [
        ({"supply": CC}, "current limit"),
        ({"supply": SupplyMode.OFF}, "not on"),
        ({"current_A": 3.0, "true_A": 5.6}, "two ways to measure the current differ"),
        ({"drawn_A": 2.0, "current_A": 2.0}, "no longer draws"),
        ({"drawn_A": 0.0, "current_A": 0.0, "supply": SupplyMode.UNREGULATED}, "no longer draws"),
    ],
)
def test_a_voltage_condition_that_the_bench_lost(lost: dict[str, Any], why: str) -> None:
    trip = tripped(guard(*STOOD, scan(1, **lost), scan(2, **lost)), scan(3, **lost))
    assert trip.cause == "bench"
    assert why in trip.why


@pytest.mark.parametrize("what", ["node_V", "charger_V", "current_A"])
def test_overload_trips_at_once(what: str) -> None:
    trip = tripped(guard(scan(0)), replace(scan(1), **{what: Seen(math.nan, 1.0)}))
    assert trip.cause == "bench"
    assert "nan" not in str(trip)


@pytest.mark.parametrize("what", ["node_V", "charger_V", "current_A", "supply_seen", "load_seen"])
def test_one_late_answer_is_forgiven_and_three_in_a_row_are_a_lost_link(what: str) -> None:
    def late(t: float) -> Scan:
        return replace(scan(t), **{what: Seen(math.nan, t, LinkFault("one", "no answer in time"))})

    made = guard(scan(0), late(1), late(2), scan(3), late(4), late(5))
    trip = tripped(made, late(6))
    assert (trip.cause, "no answer in time" in trip.why) == ("bench", True)


def test_a_closed_link_is_lost_at_once() -> None:
    closed = replace(scan(1), node_V=Seen(math.nan, 1.0, LinkFault("meter", "the link is closed (reset by peer)")))
    assert tripped(guard(scan(0)), closed).cause == "bench"


@pytest.mark.parametrize(
    ("period_s", "gap_s", "trips"), [(0.1, 1.0, False), (0.1, 1.2, True), (1, 4, False), (1, 4.1, True)]
)
def test_a_clock_that_jumps(period_s: float, gap_s: float, trips: bool) -> None:
    made = guard(scan(0))
    if trips:
        assert tripped(made, scan(gap_s), period_s).quantity == "time between scans"
    else:
        made.check(scan(gap_s), period_s)


def test_the_benchs_longest_time() -> None:
    assert tripped(guard(scan(43199.5)), scan(43200.5)).quantity == "run time"


def test_a_shunt_meter_that_stands_still() -> None:
    made = guard(*(scan(t, 3.0, 18.0 + t / 1000) for t in range(49)))
    trip = tripped(made, scan(49, 3.0))
    assert (trip.cause, trip.quantity) == ("bench", "charger current")
    assert str(trip) == "charger current 3 A: 50 readings equal to the last digit: the meter does not measure"


def test_a_node_that_was_not_moved_may_read_the_same_for_ever() -> None:
    made = Guard(BOUNDS, OHM)
    for t in range(200):
        made.check(scan(t, 3.0 + t * 1e-5, 19.0), 1.0, 19.0)
    trip = tripped(made, scan(200, 2.9, 19.0), set_V=19.03)
    assert (trip.cause, trip.quantity) == ("bench", "node voltage")


def test_equal_readings_can_be_left_unwatched() -> None:
    made = Guard(replace(BOUNDS, equal_readings=0), OHM)
    for t in range(200):
        made.check(scan(t), 1.0)


def test_two_voltage_meters_that_part_are_the_benchs_doing() -> None:
    """A charger's meter that stands still would otherwise be a charger that regulates too low."""

    def apart(t: float) -> Scan:
        return scan(t, charger_V=19.0)

    made = guard(scan(0), apart(1), apart(2), scan(3), apart(4), apart(5))
    trip = tripped(made, apart(6))
    assert (trip.cause, trip.quantity) == ("bench", "voltage between the meters")
    guard(scan(0), *(apart(t) for t in range(1, 9)), fixture_ohm=None)  # not before the fixture is known


# whole rehearsals

BENCHS = {"charge.algorithm", "charge.stage1.current", "charge.voltage", "charge.end_voltage", "charge.ends"}


@pytest.fixture
def at_60_s(monkeypatch: pytest.MonkeyPatch) -> Callable[[Callable[[World], None]], None]:
    """Let something happen to the virtual bench once its time has passed 60 s: in the middle of the charge."""

    def arrange(happens: Callable[[World], None]) -> None:
        advance = World.advance

        def advancing(world: World, dt_s: float) -> float:
            now_s = advance(world, dt_s)
            if now_s >= 60.0 and not world.__dict__.get("happened"):
                world.__dict__["happened"] = True
                happens(world)
            return now_s

        monkeypatch.setattr(World, "advance", advancing)

    return arrange


def load_trips(world: World) -> None:
    world.circuit.change(lambda: world.circuit.load.tripped.add("power"))


def overload_of(meter: str) -> Callable[[World], None]:
    return lambda world: setattr(world.instruments[meter], "_converted", lambda true_V: OVERLOAD)


def standing_still(meter: str) -> Callable[[World], None]:
    def happens(world: World) -> None:
        latest: float = world.instruments[meter]._latest  # type: ignore[attr-defined]
        world.instruments[meter]._converted = lambda true_V: latest  # type: ignore[attr-defined]

    return happens


def silent(name: str) -> Callable[[World], None]:
    return lambda world: setattr(world.instruments[name], "stream", lambda data: b"")


@pytest.mark.parametrize(
    ("happens", "proven_safe", "why"),
    [
        (load_trips, True, "the load tripped"),
        (overload_of("meter_shunt"), True, "overload"),
        (overload_of("meter_charger"), True, "overload"),
        (overload_of("meter_node"), False, "overload"),  # without its meter nobody has seen the node go down
        (standing_still("meter_charger"), True, "differ"),
        (silent("meter_charger"), True, "no answer"),
        (silent("node_supply"), False, "no answer"),
    ],
)
def test_trouble_in_the_middle_of_a_charge(
    rehearse: Callable[..., Any], at_60_s: Callable[..., None], happens: Any, proven_safe: bool, why: str
) -> None:
    at_60_s(happens)
    done = rehearse()
    assert done.ended.ended == "trip"
    assert done.ended.sealed
    assert done.ended.safe.verified is proven_safe
    assert done.judged.bench_trip
    assert not done.failing
    assert {limit for limit, word in done.verdicts.items() if word == "inconclusive"} >= BENCHS
    assert why in done.verdict("charge.ends")["why"]
    assert done.verdicts["charges"] == "pass"
    trip = open_evidence(done.record).trip
    assert trip is not None
    assert trip["cause"] == "bench"


def load_draws_less(world: World) -> None:
    world.circuit.change(lambda: setattr(world.circuit.load, "current_A", 2.0))


def supply_gone(world: World) -> None:
    world.circuit.change(lambda: setattr(world.circuit.supply, "on", False))


@pytest.mark.parametrize(("happens", "why"), [(load_draws_less, "no longer draws"), (supply_gone, "no longer")])
def test_an_output_that_no_longer_stands_as_set(
    rehearse: Callable[..., Any], at_60_s: Callable[..., None], happens: Any, why: str
) -> None:
    at_60_s(happens)
    done = rehearse()
    assert done.ended.ended == "trip"
    assert why in done.ended.why
    assert done.judged.bench_trip
    assert not done.failing


def test_a_shunt_meter_whose_zero_moves(rehearse: Callable[..., Any], at_60_s: Callable[..., None]) -> None:
    """30 mA that nobody delivers would be three times the current that is allowed after the end."""

    def happens(world: World) -> None:
        meter: Any = world.instruments["meter_shunt"]
        converted = meter._converted
        meter._converted = lambda true_V: converted(true_V + 0.3e-3)

    at_60_s(happens)
    done = rehearse()
    assert not done.failing
    for limit in ("charge.stage1.current", "charge.cutoff", "charge.current_after_end"):
        assert done.verdicts[limit] == "inconclusive"
    assert "mains off after the charge" in done.verdict("charge.stage1.current")["why"]


def test_an_overshoot_that_lasts_is_a_fail(rehearse: Callable[..., Any]) -> None:
    done = rehearse(charger={"overshoot": "{current: 6 A, time: 4 s}"})
    assert done.ended.ended == "trip"
    assert done.failing == {"charge.stage1.current"}
    assert done.verdict("charge.stage1.current")["value"] == pytest.approx(5.625, rel=5e-3)  # all that the load draws
    assert not done.judged.bench_trip
    assert done.judged.exit_status == 1


def test_a_charger_beyond_the_guards_bound_is_a_fail_by_the_limit_that_is_declared(
    rehearse: Callable[..., Any], tmp_path: Any
) -> None:
    charger = {"voltage_per_cell": "4.40 V"}
    done = rehearse(charger=charger)
    assert done.failing == {"charge.end_voltage"}
    assert done.judged.exit_status == 1
    text = (FOLDERS["specification"] / "sprayer.yaml").read_text("utf-8")
    without = tmp_path / "sprayer.yaml"
    without.write_text(text.replace("  end_voltage_per_cell: {below: 4.25 V}\n", ""), "utf-8")
    done = rehearse(spec=str(without), charger=charger)
    assert done.failing == {"charge.voltage"}
    assert "the guard ended the run" in done.verdict("charge.voltage")["why"]


def test_a_charger_100_mV_per_cell_too_high_is_a_fail(rehearse: Callable[..., Any]) -> None:
    done = rehearse(charger={"voltage_per_cell": "4.30 V"}, changes={"start": "3.95 V", "after": "10 s"})
    assert done.failing == {"charge.voltage", "charge.end_voltage"}
    assert done.judged.exit_status == 1
