"""The pack's contacts: dividers against published thresholds, Kirchhoff by hand."""

from __future__ import annotations

import math

import pytest

from drivers.virtual.charger_plan import Pin
from drivers.virtual.terminals import MOST_TAP_V, OPEN, Cell, Signal, Tap, Terminals


def beta_ohm(celsius: float, r25_ohm: float, beta_K: float) -> float:
    """The two-point law of a thermistor (IEC 60539-1)."""
    return r25_ohm * math.exp(beta_K * (1.0 / (celsius + 273.15) - 1.0 / 298.15))


@pytest.mark.parametrize(
    ("celsius", "volts"),
    # thresholds of a published charger circuit for a 10 kΩ, 3380 K thermistor under a 10 kΩ pull-up to 1.25 V
    [
        (-10, 1.024),
        (-5, 0.976),
        (0, 0.923),
        (5, 0.867),
        (10, 0.807),
        (15, 0.747),
        (45, 0.411),
        (50, 0.367),
        (60, 0.291),
    ],
)
def test_thermistor_divider_gives_published_thresholds(celsius: float, volts: float) -> None:
    signal = Signal(beta_ohm(celsius, 10e3, 3380.0), Pin(10e3, 1.25, 0.0))
    assert signal.sense_V(0.0) == pytest.approx(volts, abs=1.1e-3)


def test_sense_is_the_bench_side_of_the_contact() -> None:
    signal = Signal(1000.0, Pin(10e3, 3.3, 0.0))
    assert signal.sense_V(OPEN) == 0.0
    assert signal.sense_V(100.0) == pytest.approx(3.3 * 1000.0 / 11_100.0)
    signal.resistor_ohm = OPEN
    assert signal.sense_V(0.02) == 3.3
    signal.resistor_ohm = 0.0
    assert signal.sense_V(0.02) == 0.0
    signal.pin = None  # a charger without this pin
    assert signal.sense_V(0.02) == 0.0


def test_power_path_is_direct_through_the_resistor_or_open() -> None:
    pack = Terminals(precharge_ohm=47.0)
    assert pack.path_ohm == OPEN
    pack.touch("b_minus", 0.002)
    assert pack.path_ohm == OPEN
    pack.touch("precharge", 0.001)
    assert pack.path_ohm == pytest.approx(47.003)
    pack.touch("b_plus", 0.003)
    assert pack.path_ohm == pytest.approx(1 / (1 / 0.003 + 1 / 47.001) + 0.002)  # in parallel, computed
    pack.touch("precharge", OPEN)
    assert pack.path_ohm == pytest.approx(0.005)
    pack.touch("b_minus", OPEN)
    assert pack.path_ohm == OPEN


def test_without_power_contacts_the_path_is_soldered() -> None:
    assert Terminals().path_ohm == 0.0


def ladder(drain_A: float = 20e-6, cells_V: tuple[float, ...] = (3.7, 3.8, 3.9)) -> Terminals:
    taps = [Tap(Cell(volts, True, 0.1, 0.05), 1.0, 0.5) for volts in cells_V]
    pack = Terminals(None, (), taps, drain_A)
    for number in range(1, len(taps) + 1):
        pack.touch(f"tap{number}", 0.02)
    return pack


def test_pins_stand_below_their_junctions_by_what_the_charger_takes() -> None:
    pack = ladder()
    assert pack.junctions_V() == pytest.approx([3.7, 7.5, 11.4])
    drop_V = 20e-6 * (0.5 + 1.0 + 0.02)  # Ohm's law: source, shunt, contact
    assert pack.pins_V() == pytest.approx([3.7 - drop_V, 7.5 - drop_V, 11.4 - drop_V], abs=1e-12)
    pack.record(1.0)
    assert [tap.shunt.last for tap in pack.taps] == pytest.approx([20e-6] * 3)


def test_open_tap_sinks_to_the_tap_below_and_its_neighbour_sees_both_cells() -> None:
    pack = ladder(drain_A=0.0)
    pack.touch("tap2", OPEN)
    assert pack.pins_V() == pytest.approx([3.7, 3.7, 11.4])
    pack.touch("tap1", OPEN)
    assert pack.pins_V() == pytest.approx([0.0, 0.0, 11.4])


def test_channel_that_cannot_give_or_take_what_flows_gives_way() -> None:
    giving = ladder(drain_A=0.06)  # 0.18 A through the lowest channel, 0.12 A and 0.06 A through those above
    assert giving.junctions_V() == pytest.approx([0.0, 0.0, 3.9])
    taking = ladder(drain_A=-0.02)  # 60 mA into the lowest: more than its bleeder takes
    assert taking.junctions_V() == pytest.approx([MOST_TAP_V, MOST_TAP_V + 3.8, MOST_TAP_V + 7.7])


def test_open_minus_leaves_nothing_connected() -> None:
    tap = Tap(Cell(3.7, True, 0.1, 0.05), 1.0, 0.5)
    pack = Terminals(47.0, ("id",), [tap], 20e-6)
    pack.signals["id"].resistor_ohm, pack.signals["id"].pin = 1000.0, Pin(10e3, 3.3, 0.0)
    pack.powered = True
    for name in ("id", "tap1", "b_plus"):
        pack.touch(name, 0.01)
    pack.record(1.0)
    assert (pack.seen_ohm("id"), pack.pins_V(), pack.tap_A(1)) == (OPEN, [0.0], 0.0)
    assert pack.signals["id"].sense.last == 0.0
    pack.touch("b_minus", 0.002)
    pack.record(2.0)
    assert pack.seen_ohm("id") == pytest.approx(1000.01)
    assert pack.signals["id"].sense.last == pytest.approx(3.3 / 11.00001, rel=1e-5)
