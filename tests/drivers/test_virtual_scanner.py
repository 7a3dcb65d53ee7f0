"""Scanner, cell supply and thermometer: real SCPI citizens that read what stands there, within their accuracy."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from drivers import virtual
from drivers.dialect import Dialect
from drivers.text.binding import bind
from drivers.text.document import read
from drivers.text.faults import Faults
from drivers.virtual import scanner, tap_supply
from drivers.virtual.charger_plan import Pin
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]
DIALECTS = Path(virtual.__file__).parents[1] / "dialects"


def numbers(text: str) -> list[float]:
    return [float(part) for part in text.split(",")]


def dialect(name: str) -> Dialect:
    faults = Faults()
    bound = bind(Dialect, read(DIALECTS / f"{name}.yaml"), "dialect", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def test_list_is_read_in_its_order(breadth_world: Make, ask: Ask, insert: Callable[..., None]) -> None:
    world = breadth_world(errors=0.0)
    insert(world, id_ohm=1000.0)
    world.advance(0.1)
    id_V, taps_V = 3.3 / 11.0, 20e-6  # 1 kΩ under 10 kΩ to 3.3 V; 20 µA in 1 Ω, by hand
    found = numbers(ask(world, "scanner", "MEAS:VOLT:DC? (@111,112,101:104)"))
    assert found == pytest.approx([id_V, 3.3 / 2, *[taps_V] * 4], rel=1e-4)
    assert numbers(ask(world, "scanner", "MEASure:VOLTage? (@104,111)")) == pytest.approx([taps_V, id_V], rel=1e-4)


def test_pulsed_excitation_is_averaged_by_the_aperture(
    breadth_world: Make, ask: Ask, insert: Callable[..., None]
) -> None:
    pulsed = Pin(10e3, 3.3, 0.05, every_s=0.01, on_s=0.001)
    world = breadth_world(errors=0.0, charger={"id_pin": pulsed})
    insert(world, id_ohm=1000.0)
    world.advance(0.1)
    # one power line cycle of 20 ms holds two pulses of 1 ms: a tenth of the level
    assert numbers(ask(world, "scanner", "MEAS:VOLT:DC? (@111)")) == pytest.approx([0.03], rel=1e-6)


def test_nothing_is_excited_without_mains(breadth_world: Make, ask: Ask, insert: Callable[..., None]) -> None:
    world = breadth_world(errors=0.0)
    insert(world)
    ask(world, "mains", "ROUT:OPEN (@1)")
    world.advance(0.1)
    assert numbers(ask(world, "scanner", "MEAS:VOLT:DC? (@111,112)")) == [0.0, 0.0]


@pytest.mark.parametrize("message", ["MEAS:VOLT:DC? (@113)", "MEAS:VOLT:DC? (@1)"])
def test_channels_that_are_not_there(breadth_world: Make, ask: Ask, message: str) -> None:
    assert ask(breadth_world(), "scanner", f"{message};:SYST:ERR?") == '-222,"Data out of range"'


def test_scanner_errs_within_what_its_dialect_states(
    breadth_world: Make, ask: Ask, insert: Callable[..., None]
) -> None:
    spans = dialect("scpi-scanner").accuracy.voltage
    widest = max(spans, key=lambda span: span.range)
    mine = next(span for span in scanner.SPANS if span.range == widest.range)
    assert (widest.reading, widest.of_range) == pytest.approx((mine.reading, mine.of_range))
    true_V, found = 3.3 / 2, []
    for seed in range(25):
        world = breadth_world(seed=seed)
        insert(world)
        world.advance(0.1)
        resistor = world.circuit.terminals.signals["thermistor"].resistor_ohm
        contact = world.circuit.terminals.contacts["thermistor"]
        true_V = 3.3 * resistor / (10e3 + resistor + contact)
        found += [value - true_V for value in numbers(ask(world, "scanner", "MEAS:VOLT:DC? (@112)"))]
    half_V = widest.reading * true_V + widest.of_range * widest.range
    assert all(abs(error) <= half_V for error in found)
    assert max(found) - min(found) > 0.2 * half_V


def test_each_channel_has_a_thermal_voltage_of_its_own(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world()
    found = numbers(ask(world, "scanner", "MEAS:VOLT:DC? (@101:104)"))
    assert len(set(found)) > 1
    assert all(abs(value) < 10e-6 for value in found)


# -- cell supply ------------------------------------------------------------------------------------------------


def test_cells_are_set_measured_and_asked_by_list(breadth_world: Make, ask: Ask) -> None:
    world = breadth_world(errors=0.0)
    said = ask(world, "cells", "VOLT 3.7,(@1:4);:VOLT 4.2,(@2);:CURR 0.1,(@1:4);:OUTP ON,(@1,2);:SYST:ERR?")
    assert said == '0,"No error"'
    world.advance(0.1)
    assert numbers(ask(world, "cells", "VOLT? (@1:4)")) == [3.7, 4.2, 3.7, 3.7]
    assert numbers(ask(world, "cells", "CURR? (@4,1)")) == [0.1, 0.1]
    assert ask(world, "cells", "OUTP? (@1:4)") == "1,1,0,0"
    assert numbers(ask(world, "cells", "MEAS:VOLT? (@2,1,3)")) == pytest.approx([4.2, 3.7, 0.0])


@pytest.mark.parametrize(
    ("message", "error"),
    [("VOLT 6.1,(@1)", -222), ("CURR 0.6,(@1)", -222), ("VOLT 3.7", -109), ("VOLT 3.7,(@5)", -222), ("OUTP ON", -109)],
)
def test_cells_refuse_as_citizens(breadth_world: Make, ask: Ask, message: str, error: int) -> None:
    assert ask(breadth_world(), "cells", f"{message};:SYST:ERR?").startswith(f"{error},")


def test_cells_err_within_what_the_dialect_states(breadth_world: Make, ask: Ask) -> None:
    (span,) = dialect("scpi-tap-supply").accuracy.voltage
    assert (span.range, span.reading, span.of_range) == pytest.approx(
        (tap_supply.SPAN.range, tap_supply.SPAN.reading, tap_supply.SPAN.of_range)
    )
    found = []
    for seed in range(20):
        world = breadth_world(seed=seed)
        ask(world, "cells", "VOLT 3.7,(@1:4);:OUTP ON,(@1:4)")
        world.advance(0.1)
        found += [tap.cell.voltage_V - 3.7 for tap in world.circuit.terminals.taps]
    half_V = span.reading * 3.7 + span.of_range * span.range
    assert all(abs(error) <= half_V for error in found)
    assert max(found) - min(found) > half_V / 2


def test_cell_whose_limit_is_too_low_collapses(breadth_world: Make, ask: Ask, insert: Callable[..., None]) -> None:
    world = breadth_world(errors=0.0, charger={"tap_drain_A": 0.01})
    insert(world)
    ask(world, "cells", "CURR 0.015,(@4,3);:CURR 0.1,(@1,2)")  # 10 mA through cell 4, 20 mA through cell 3
    world.advance(0.1)
    assert numbers(ask(world, "cells", "MEAS:VOLT? (@1:4)")) == pytest.approx([3.7, 3.7, 0.0, 3.7])


# -- thermometer ------------------------------------------------------------------------------------------------


def test_thermometer_reads_the_room(breadth_world: Make, ask: Ask) -> None:
    exact = breadth_world(errors=0.0, ambient_C=31.5)
    assert float(ask(exact, "thermometer", "MEAS:TEMP?")) == 31.5
    found = [float(ask(breadth_world(seed=seed), "thermometer", "MEAS:TEMP?")) for seed in range(20)]
    assert all(abs(value - 23.0) < 1.0 for value in found)
    assert len(set(found)) > 5


def test_a_resistor_is_measured_with_its_contact_open(
    breadth_world: Make, ask: Ask, insert: Callable[..., None]
) -> None:
    world = breadth_world(errors=0.0)
    ask(world, "decade_id", "OUTP:MODE RES;:RES 1234.5")
    world.advance(0.1)
    assert numbers(ask(world, "scanner", "MEAS:RES? (@111)")) == [pytest.approx(1234.5)]
    ask(world, "decade_id", "OUTP:MODE OPEN")
    world.advance(0.1)
    assert numbers(ask(world, "scanner", "MEAS:RES? (@111,112)")) == [9.9e37, 9.9e37]
    assert numbers(ask(world, "scanner", "MEAS:RES? (@101)")) == [pytest.approx(1.0, rel=2e-3)]  # a tap's shunt


def test_a_pin_beside_it_spoils_a_resistance(breadth_world: Make, ask: Ask, insert: Callable[..., None]) -> None:
    """1 kΩ with 10 kΩ to 3.3 V beside it: with 1 mA in it reads 909.09 Ω * 1.33 = 1209.09 Ω, beyond that range; with
    0.1 mA in 909.09 Ω * (0.1 + 0.33) / 0.1 = 3909.09 Ω, by hand.
    """
    world = breadth_world(errors=0.0)
    insert(world, id_ohm=1000.0)
    world.advance(0.1)
    assert numbers(ask(world, "scanner", "MEAS:RES? (@111)")) == [pytest.approx(3909.09, rel=1e-4)]


def test_the_ohmmeter_errs_within_what_its_dialect_states(breadth_world: Make, ask: Ask) -> None:
    spans = dialect("scpi-scanner").accuracy.ohmmeter
    for stated, mine in zip(spans, scanner.OHM_SPANS, strict=True):
        assert (stated.range, stated.reading, stated.of_range) == pytest.approx(
            (mine.range, mine.reading, mine.of_range)
        )
    for seed in range(25):
        world = breadth_world(seed=seed)
        ask(world, "decade_id", "OUTP:MODE RES;:RES 4700")
        world.advance(0.1)
        true_ohm = world.instruments["decade_id"].true_ohm  # type: ignore[attr-defined]
        (read_ohm,) = numbers(ask(world, "scanner", "MEAS:RES? (@111)"))
        assert abs(read_ohm - true_ohm) <= 0.0001 * 4700 + 0.1 + 0.1  # reading, of range, leads
