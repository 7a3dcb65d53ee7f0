"""What a virtual charger makes of ID, thermistor and cell taps: bands, windows, filters, latches, removal."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import pytest

from drivers.virtual.charger_plan import IdBand, Pin, Stage, TapMonitor, Temperature, Window
from drivers.virtual.contacts import OPERATE_s
from drivers.virtual.trace import CHARGER, NODE, SHUNT, SUPPLY_CURRENT, FADE_TAU_s
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]
Insert = Callable[..., None]
PIN = Pin(10e3, 3.3, 0.05)
WINDOWS = Temperature(PIN, Window(25040.0, 4847.0), Window(28700.0, 4101.0), Window(27000.0, 4350.0))


def at(world: World, signal: int) -> float:
    return world.circuit.value(signal, world.circuit.now_s)


def amperes(world: World) -> float:
    return at(world, SHUNT) / world.circuit.constants.shunt_ohm


def after_insertion(make: Make, insert: Insert, wait_s: float = 3.0, **what: object) -> World:
    packs = {key: what.pop(key) for key in ("id_ohm", "thermistor_ohm", "cell_V") if key in what}
    world = make(**{"errors": 0.0, **what})
    insert(world, **packs)
    world.advance(wait_s)
    return world


# -- ID bands -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("ohm", "amperes_"),
    [(819.9, 0.0), (820.1, 1.5), (1219.9, 1.5), (1220.1, 0.0), (2449.0, 0.0), (2451.0, 3.0), (3699.0, 3.0), (0.0, 0.0)],
)
def test_id_selects_the_current_and_nothing_lies_between(
    breadth_world: Make, insert: Insert, ohm: float, amperes_: float
) -> None:
    assert amperes(after_insertion(breadth_world, insert, id_ohm=ohm)) == pytest.approx(amperes_, abs=1e-3)


def test_contact_resistance_belongs_to_the_id(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    """1219.99 Ω and a contact of up to 20 mΩ: the edge at 1220 Ω moves by what the contact adds."""
    found = set()
    for seed in range(12):
        world = breadth_world(seed=seed, contact_walk_ohm=0.02)
        insert(world, id_ohm=1000.0)
        world.advance(0.1)
        true_ohm = world.circuit.terminals.signals["id"].resistor_ohm + world.circuit.terminals.contacts["id"]
        assert world.circuit.terminals.seen_ohm("id") == true_ohm
        found.add(world.circuit.terminals.contacts["id"])
    assert len(found) == 12


def test_later_stages_keep_their_ratio_to_the_first(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    charger = {"stages": (Stage(3.0, 20.0), Stage(1.0, 20.6)), "cutoff_A": None, "tap_monitor": None}
    world = after_insertion(breadth_world, insert, id_ohm=1000.0, charger=charger)
    assert amperes(world) == pytest.approx(1.5, abs=1e-3)
    ask(world, "node_supply", "VOLT 20.1")
    world.advance(2.0)
    assert amperes(world) == pytest.approx(0.5, abs=1e-3)


def test_id_is_read_at_insertion_only(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert, id_ohm=1000.0)
    ask(world, "decade_id", "RES 3000")
    world.advance(5.0)
    assert amperes(world) == pytest.approx(1.5, abs=1e-3)


def test_id_that_opens_ends_the_charge_after_its_filter(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert, charger={"fault_latch": "none"})
    ask(world, "decade_id", "OUTP:MODE OPEN")
    world.advance(0.049)
    assert amperes(world) == pytest.approx(3.0, abs=1e-3)
    world.advance(0.002)
    assert amperes(world) == pytest.approx(0.0, abs=1e-3)
    ask(world, "decade_id", "OUTP:MODE RES")
    world.advance(10.0)  # it came back before `clear`: for this charger the pack never left, and it had ended
    assert world.charger.state == "ended"
    ask(world, "decade_id", "OUTP:MODE OPEN")
    world.advance(1.2)
    ask(world, "decade_id", "OUTP:MODE RES")
    world.advance(3.0)
    assert world.charger.state == "charging"


@pytest.mark.parametrize(("filter_s", "state"), [(0.005, "ended"), (0.05, "charging")])
def test_glitch_of_a_switching_resistor_ends_the_charge_of_a_quick_charger(
    breadth_world: Make, ask: Ask, insert: Insert, filter_s: float, state: str
) -> None:
    """A bench that switches a resistor under charge makes this mistake: 20 ms of "no ID" against a filter of 5 ms."""
    pin = replace(PIN, filter_s=filter_s)
    world = after_insertion(breadth_world, insert, id_ohm=1000.0, charger={"id_pin": pin})
    assert world.charger.state == "charging"
    ask(world, "decade_id", "RES 1001")
    world.advance(1.0)
    assert world.charger.state == state


# -- thermistor ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("ohm", "starts"), [(25039, True), (25041, False), (4848, True), (4846, False), (0, False)])
def test_start_window(breadth_world: Make, insert: Insert, ohm: float, starts: bool) -> None:
    world = after_insertion(breadth_world, insert, thermistor_ohm=float(ohm))
    assert (amperes(world) > 1.0) is starts


def test_open_thermistor_reads_very_cold(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = breadth_world()
    insert(world)
    ask(world, "decade_thermistor", "OUTP:MODE OPEN")
    world.advance(5.0)
    assert amperes(world) == pytest.approx(0.0, abs=1e-3)


def test_run_window_trips_and_releases_with_hysteresis(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert, charger={"fault_latch": "none"})
    states = []
    for ohm in (26000, 28690, 28710, 28000, 27001, 26999, 4102, 4100, 4349, 4351):
        ask(world, "decade_thermistor", f"RES {ohm}")
        world.advance(2.0)
        states.append(world.charger.state)
    charging, paused = ["charging"], ["paused"]
    assert states == charging * 2 + paused * 3 + charging * 2 + paused * 2 + charging


def test_latched_temperature_fault_is_cleared_by_removal(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert)
    ask(world, "decade_thermistor", "RES 30000")
    world.advance(1.0)
    assert world.charger.state == "fault"
    ask(world, "decade_thermistor", "RES 10000")
    world.advance(20.0)
    assert world.charger.state == "fault"
    ask(world, "relays", "ROUT:OPEN (@1)")
    world.advance(0.3 + 0.9)
    assert world.charger.state == "fault"  # the contacts fade for 0.2 s, then `clear` is 1 s
    world.advance(0.1)
    assert world.charger.state == "waiting"


def test_bad_pack_latches_at_insertion_where_the_charger_latches(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    for latch, state in (("none", "waiting"), ("removal", "fault"), ("mains", "fault")):
        world = after_insertion(breadth_world, insert, id_ohm=1500.0, charger={"fault_latch": latch})
        assert world.charger.state == state


def test_fault_that_only_the_mains_clear(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert, id_ohm=1500.0, charger={"fault_latch": "mains"})
    ask(world, "relays", "ROUT:OPEN:ALL")
    world.advance(30.0)
    insert(world)
    world.advance(5.0)
    assert world.charger.state == "fault"
    ask(world, "mains", "ROUT:OPEN (@1)")
    world.advance(1.0)
    ask(world, "mains", "ROUT:CLOS (@1)")
    world.advance(3.0)
    assert world.charger.state == "charging"


def test_fault_for_good_survives_removal_and_mains(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert, id_ohm=1500.0, charger={"fault_latch": "for good"})
    for name in ("relays", "mains"):
        ask(world, name, "ROUT:OPEN (@1)")
        world.advance(10.0)
        insert(world)
        world.advance(5.0)
        assert world.charger.state == "fault"
    whole = after_insertion(breadth_world, insert, charger={"fault_latch": "for good"})
    ask(whole, "mains", "ROUT:OPEN (@1)")
    whole.advance(1.0)
    ask(whole, "mains", "ROUT:CLOS (@1)")
    whole.advance(3.0)
    assert whole.charger.state == "charging"


# -- cell taps ----------------------------------------------------------------------------------------------------


def offset(world: World, ask: Ask, cell: int, volts: float, sum_V: float) -> None:
    """One cell at `volts`, the others sharing the rest of the sum."""
    other_V = (sum_V - volts) / 4
    said = [ask(world, "cells", f"VOLT {volts if k == cell else other_V},(@{k});:SYST:ERR?") for k in range(1, 5)]
    assert set(said) == {'0,"No error"'}


@pytest.mark.parametrize("cell", [1, 2, 3, 4, 5])
def test_each_cell_stops_the_charge_at_its_threshold(breadth_world: Make, ask: Ask, insert: Insert, cell: int) -> None:
    world = after_insertion(breadth_world, insert)
    contacts_V = at(world, CHARGER)  # what the top cell's upper end stands at
    states = []
    for volts in (4.20, 4.235, 4.245):
        offset(world, ask, cell, volts, contacts_V)
        world.advance(1.0)
        states.append(world.charger.state)
    assert states == ["charging", "charging", "fault"]


@pytest.mark.parametrize(("high_s", "state"), [(0.499, "charging"), (0.501, "fault")])
def test_cell_must_stand_high_for_the_filter_time(
    breadth_world: Make, ask: Ask, insert: Insert, high_s: float, state: str
) -> None:
    world = after_insertion(breadth_world, insert)
    offset(world, ask, 2, 4.30, at(world, CHARGER))
    world.advance(high_s)
    offset(world, ask, 2, 3.70, at(world, CHARGER))
    world.advance(5.0)
    assert world.charger.state == state


def test_monitor_that_does_not_latch_resumes_below_its_hysteresis(
    breadth_world: Make, ask: Ask, insert: Insert
) -> None:
    monitor = TapMonitor(4.24, 0.5, 0.05, False, (1, 2, 3, 4, 5))
    world = after_insertion(breadth_world, insert, charger={"tap_monitor": monitor, "fault_latch": "none"})
    sum_V, states = at(world, CHARGER), []
    for volts in (4.25, 4.20, 4.18):
        offset(world, ask, 3, volts, sum_V)
        world.advance(3.0)
        states.append(world.charger.state)
    assert states == ["paused", "paused", "charging"]


def test_cell_that_is_not_monitored_does_not_stop_it(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    monitor = TapMonitor(4.24, 0.5, 0.05, True, (1, 2, 4, 5))
    world = after_insertion(breadth_world, insert, charger={"tap_monitor": monitor})
    offset(world, ask, 3, 4.40, at(world, CHARGER))
    world.advance(3.0)
    assert world.charger.state == "charging"


def test_high_cell_at_insertion_is_no_start(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = breadth_world(errors=0.0)
    insert(world)
    offset(world, ask, 4, 4.30, 18.5)
    world.advance(5.0)
    assert amperes(world) == pytest.approx(0.0, abs=1e-3)


def test_open_tap_shows_two_cells_as_one(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert)
    ask(world, "relays", "ROUT:OPEN (@12)")
    world.advance(1.0)
    assert world.charger.state == "fault"


def test_what_is_not_wired_is_soldered_to_the_right_pack(virtual_world: Make, ask: Ask) -> None:
    charger = {"id_pin": PIN, "id_bands": (IdBand(1.0, 2.0, 0.5),), "temperature": WINDOWS, "clear_s": 1.0}
    world = virtual_world(errors=0.0, charger=charger)
    ask(world, "node_supply", "VOLT 18.5;:CURR 10;:OUTP ON")
    ask(world, "node_load", "CURR 4.5;:INP ON")
    ask(world, "mains", "ROUT:CLOS (@1)")
    world.advance(3.0)
    assert amperes(world) == pytest.approx(3.0, abs=1e-3)


# -- the power path -----------------------------------------------------------------------------------------------


def test_open_path_shares_nothing(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert, wait_s=1.0)  # before the start delay is over
    opened_V = at(world, CHARGER)
    ask(world, "relays", "ROUT:OPEN (@1)")
    world.advance(0.002 + 0.15)
    assert at(world, CHARGER) == pytest.approx(opened_V * 2.718281828 ** -(0.15 / FADE_TAU_s), rel=1e-6)
    assert amperes(world) == 0.0
    assert (at(world, NODE), at(world, SUPPLY_CURRENT)) == pytest.approx((18.5, 4.5))
    end_s = world.circuit.now_s
    mean_V = world.circuit.mean(CHARGER, end_s - 0.1, end_s)
    first_V = world.circuit.value(CHARGER, end_s - 0.1)
    # the mean of an exponential over a span: tau (first - last) / span, computed
    assert mean_V == pytest.approx(FADE_TAU_s * (first_V - at(world, CHARGER)) / 0.1, rel=1e-9)


def test_contacts_of_a_driven_charger_stand_at_its_limit(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert)
    ask(world, "relays", "ROUT:OPEN (@1)")
    world.advance(0.5)
    assert (at(world, CHARGER), amperes(world)) == (21.0, 0.0)
    world.advance(0.6)  # no current is less than the cut-off, for the response time of 1 s
    assert world.charger.state == "ended"
    world.advance(0.5)
    assert at(world, CHARGER) < 1.0
    world.advance(1.0)
    assert world.charger.state == "waiting"


def test_precharge_resistor_carries_what_it_can(breadth_world: Make, ask: Ask, insert: Insert) -> None:
    world = breadth_world(errors=0.0)
    insert(world)
    ask(world, "relays", "ROUT:CLOS (@3);:ROUT:OPEN (@1)")
    world.advance(1.7)
    outer_ohm = world.circuit.constants.outer_ohm + 47.0
    # the charger regulates 21 V against 18.5 V behind 47 Ω and the leads: Ohm's law
    assert amperes(world) == pytest.approx((21.0 - 18.5) / outer_ohm, rel=1e-9)
    assert at(world, CHARGER) == pytest.approx(21.0)


def test_kirchhoff_holds_with_closed_contacts(breadth_world: Make, insert: Insert) -> None:
    world = after_insertion(breadth_world, insert)
    world2 = after_insertion(breadth_world, insert, errors=1.0, seed=4)
    for bench in (world, world2):
        contacts_ohm = bench.circuit.terminals.path_ohm
        assert 0.0 <= contacts_ohm < 6e-3
        outer_ohm = bench.circuit.constants.outer_ohm + contacts_ohm
        assert at(bench, CHARGER) - at(bench, NODE) == pytest.approx(amperes(bench) * outer_ohm, rel=1e-9)
        load_A = bench.circuit.load.active_A
        assert at(bench, SUPPLY_CURRENT) == pytest.approx(load_A - amperes(bench), rel=1e-9)


def test_start_delay_counts_from_the_last_bounce_on(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world(errors=0.0, charger={"id_pin": None, "temperature": None, "tap_monitor": None})
    ask(world, "node_supply", "VOLT 18.5;:CURR 10;:OUTP ON")
    ask(world, "node_load", "CURR 4.5;:INP ON")
    ask(world, "mains", "ROUT:CLOS (@1)")
    ask(world, "relays", "ROUT:CLOS (@2)")
    world.advance(1.0)
    ask(world, "relays", "ROUT:CLOS (@1)")
    # the contacts fade by 4 % in a bounce of less than 1 ms, far from "no pack": the first touch counts
    world.advance(OPERATE_s + 1.499)
    assert world.charger.state == "waiting"
    world.advance(0.002)
    assert world.charger.state == "charging"
