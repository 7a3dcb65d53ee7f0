"""What chargers move between cells: Kirchhoff at every junction, Ohm over every resistor, exact over an aperture."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import asdict
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.document import compose
from drivers.text.faults import BadInput, Faults
from drivers.virtual.balancing import moved_A
from drivers.virtual.charger_file import ChargerFile, read_charger
from drivers.virtual.charger_plan import Balancer, ChargerPlan
from drivers.virtual.terminals import OPEN, Cell, Tap, Terminals
from drivers.virtual.trace import CHARGER
from drivers.virtual.world import World

FILE = """packmime: charger 1
name: compost turner charger
cells: 4
algorithm: cc-cv
stages: [{current: 2.0 A}]
voltage_per_cell: 4.20 V
cutoff: 200 mA
"""
MakeWorld = Callable[..., World]
Ask = Callable[[World, str, str], str]


def model(text: str) -> ChargerFile:
    faults = Faults()
    bound = read_charger(compose((FILE + text).encode(), "c.yaml"), faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def balancer(**changes: Any) -> Balancer:
    given = {"charges": False, "ohm": None, "current_A": None, "level_V": None, "difference_V": None}
    return Balancer(**{**given, "cells": (1, 2, 3, 4), **changes})


def ladder(cells_V: list[float], drain_A: float = 0.0) -> Terminals:
    """Channels of all but the top cell behind 1 Ω of shunt, 0.5 Ω of source, 20 mΩ of contact."""
    pack = Terminals(None, (), [Tap(Cell(volts, True, 0.5, 0.5), 1.0, 0.5) for volts in cells_V[:-1]], drain_A)
    for number in range(1, len(cells_V)):
        pack.touch(f"tap{number}", 0.02)
    return pack


def taps_A(pack: Terminals) -> list[float]:
    return [pack.tap_A(number) for number in range(1, len(pack.taps) + 1)]


def test_a_bleed_leaves_above_its_cell_and_comes_back_below() -> None:
    """I_tap,j = b_j - b_(j+1): Kirchhoff at the junction."""
    pack = ladder([4.0, 4.0, 4.1, 4.0], drain_A=20e-6)
    pack.moved_A = moved_A(balancer(current_A=0.004, level_V=4.05), pack, 16.1)
    assert pack.moved_A == (0.0, 0.0, 0.004, 0.0)
    assert taps_A(pack) == pytest.approx([20e-6, 20e-6 - 0.004, 20e-6 + 0.004])


def test_a_charge_through_taps_enters_above_its_cell() -> None:
    pack = ladder([4.0, 3.9, 4.0, 4.0])
    pack.moved_A = moved_A(balancer(charges=True, current_A=0.03, difference_V=0.02), pack, 15.9)
    assert pack.moved_A == (0.0, -0.03, 0.0, 0.0)
    assert taps_A(pack) == pytest.approx([0.03, -0.03, 0.0])


def test_the_top_cell_is_what_is_left_to_the_contacts() -> None:
    pack = ladder([4.0, 4.0, 4.0, 0.0])
    assert moved_A(balancer(current_A=0.004, difference_V=0.02), pack, 16.1) == (0.0, 0.0, 0.0, 0.004)


def test_one_bleed_resistor_is_in_series_with_both_taps() -> None:
    """4.1 V over 470 Ω and twice 1.52 Ω of tap: 8.667 mA (Ohm's law, computed)."""
    pack = ladder([4.0, 4.1, 4.0, 4.0])
    assert moved_A(balancer(ohm=470.0, level_V=4.05), pack, 16.1)[1] == pytest.approx(4.1 / (470.0 + 2 * 1.52))


@given(
    cells_V=st.lists(st.floats(3.5, 4.3), min_size=2, max_size=8),
    ohm=st.floats(10.0, 5e3),
    drain_A=st.floats(-1e-4, 1e-4),
)
def test_each_resistor_carries_what_stands_over_it(cells_V: list[float], ohm: float, drain_A: float) -> None:
    """Cell voltage less what the currents drop in the taps is R b for each cell that is moved (Ohm, Kirchhoff)."""
    pack = ladder(cells_V, drain_A)
    cells = tuple(range(1, len(cells_V) + 1))
    contacts_V = float(sum(cells_V))
    out_A = moved_A(balancer(ohm=ohm, level_V=3.9, cells=cells), pack, contacts_V)
    pack.moved_A = out_A
    drops_V = [1.52 * tap_A for tap_A in taps_A(pack)]
    pins_V = [0.0, *(np.cumsum(cells_V)[:-1] - drops_V), contacts_V]
    for number, b in enumerate(out_A):
        across_V = pins_V[number + 1] - pins_V[number]
        assert b == pytest.approx(across_V / ohm if b else 0.0, rel=1e-9)
        assert b != 0.0 or cells_V[number] < 3.9 + 1e-3


def test_nothing_is_moved_through_an_open_tap() -> None:
    pack = ladder([4.1, 4.1, 4.1, 4.1])
    pack.moved_A = (0.004,) * 4
    assert taps_A(pack) == pytest.approx([0.0, 0.0, 0.0])  # equal in all cells: the inner taps see nothing
    pack.touch("tap1", OPEN)
    assert taps_A(pack) == pytest.approx([0.0, -0.004, 0.0])  # cells 1 and 2 have an open end
    assert moved_A(balancer(ohm=1e3, level_V=4.0), pack, 16.4)[:2] == (0.0, 0.0)


def test_file_to_plan_and_through_json() -> None:
    plan = model("bleed: {resistance: 1 kΩ, difference: 20 mV, every: 4 s, for: 1 s, cells: [1, 3]}\n").plan()
    expected = balancer(ohm=1000.0, difference_V=0.02, cells=(1, 3), every_s=4.0, on_s=1.0)
    assert plan.balancer == expected
    assert ChargerPlan.from_json(json.loads(json.dumps(asdict(plan)))) == plan
    assert model("").plan().balancer is None
    charge = model("tap_charge: {current: 30 mA, below: 3.9 V}\n").plan().balancer
    assert charge == balancer(charges=True, current_A=0.03, level_V=3.9)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("bleed: {difference: 20 mV}", "a bleed has a 'resistance' or a 'current'; one of them"),
        ("bleed: {current: 4 mA, resistance: 1 kΩ, above: 4 V}", "a 'resistance' or a 'current'"),
        ("bleed: {current: 4 mA}", "a bleed begins 'above' a cell voltage, or at a 'difference'"),
        ("bleed: {current: 4 mA, above: 4 V, every: 4 s}", "'every' and 'for' belong together"),
        ("bleed: {current: 4 mA, above: 4 V, every: 4 s, for: 4 s}", "'for' must be shorter than 'every'"),
        ("bleed: {current: 4 mA, above: 4 V, cells: [5]}", "cell 5 is balanced; the pack has 4"),
        ("tap_charge: {below: 3.9 V}", "'current' is missing"),
        ("tap_charge: {current: 9 mA}", "begins 'below' a cell voltage, or at a 'difference'"),
        ("bleed: {current: 4 mA, above: 4 V}\ntap_charge: {current: 9 mA, below: 3.9 V}", "balances in one way"),
    ],
)
def test_faults_say_what_is_wrong(text: str, words: str) -> None:
    with pytest.raises(BadInput, match=words.replace("[", r"\[")):
        model(text + "\n")


def shunts_V(ask: Ask, world: World) -> list[float]:
    return [float(value) for value in ask(world, "scanner", "MEAS:VOLT:DC? (@101:104)").split(",")]


def raised(ask: Ask, world: World, cells_V: tuple[float, ...]) -> None:
    said = [ask(world, "cells", f"VOLT {volts:.4f},(@{n});:SYST:ERR?") for n, volts in enumerate(cells_V, 1)]
    assert set(said) == {'0,"No error"'}
    world.advance(1.0)


def bleeding(breadth_world: MakeWorld, insert: Callable[..., None], ask: Ask, **changes: Any) -> World:
    """Five equal cells, charging: each tap at its share of what stands at the charger's contacts."""
    kind = balancer(cells=(1, 2, 3, 4, 5), difference_V=0.02, current_A=0.004, **changes)
    world = breadth_world(charger={"balancer": kind, "tap_monitor": None}, errors=0.0)
    insert(world, cell_V=3.8)
    world.advance(3.0)
    share_V = world.circuit.value(CHARGER, world.now) / 5
    raised(ask, world, (share_V,) * 4)
    return world


def test_a_charging_charger_bleeds_the_cell_that_was_raised(
    breadth_world: MakeWorld, insert: Callable[..., None], ask: Ask
) -> None:
    world = bleeding(breadth_world, insert, ask)
    rest_V = 20e-6  # its taps' dividers over 1 Ω
    assert shunts_V(ask, world) == pytest.approx([rest_V] * 4, rel=2e-3)
    raised(ask, world, (3.86, 3.96, 3.86, 3.86))
    assert shunts_V(ask, world) == pytest.approx([rest_V - 0.004, rest_V + 0.004, rest_V, rest_V], rel=2e-3)
    ask(world, "mains", "ROUT:OPEN (@1)")
    world.advance(1.0)
    assert shunts_V(ask, world) == pytest.approx([rest_V] * 4, rel=2e-3)


def test_a_bleed_in_pulses_is_exact_over_any_aperture(
    breadth_world: MakeWorld, insert: Callable[..., None], ask: Ask
) -> None:
    """On for 1 s every 4 s from the bench's time 0: the mean over 4 s is a quarter, wherever it begins."""
    world = bleeding(breadth_world, insert, ask, every_s=4.0, on_s=1.0)
    raised(ask, world, (3.86, 3.96, 3.86, 3.86))
    world.advance(6.0)
    terminals, now_s = world.circuit.terminals, world.now
    tap = terminals.taps[1]
    for back_s in (0.0, 0.3, 1.1):
        mean_V = terminals.shunt_V(tap, now_s - 4.0 - back_s, now_s - back_s)
        assert mean_V == pytest.approx((20e-6 + 0.001) * tap.shunt_ohm, rel=1e-9)
    seen = set()
    for _ in range(8):
        world.advance(0.5)
        seen.add(round(shunts_V(ask, world)[1], 4))
    assert seen == {0.0, 0.004}
