"""Supply, load, meter and mains switch: what each does when it is spoken to."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from drivers import virtual
from drivers.dialect import Dialect
from drivers.text.binding import bind
from drivers.text.document import read
from drivers.text.faults import Faults
from drivers.virtual import load, meter, supply
from drivers.virtual.world import World

Ask = Callable[[World, str, str], str]
Make = Callable[..., World]


def number(text: str) -> float:
    return float(text.split(";")[0])


def ready(make: Make, ask: Ask, **changes: object) -> World:
    """Ideal instruments, 18 V at the node, 4 A in the load, meters at one power line cycle."""
    world = make(**{"errors": 0.0, **changes})
    assert ask(world, "node_supply", "VOLT 18;:CURR 10;:OUTP ON;:SYST:ERR?") == '0,"No error"'
    assert ask(world, "node_load", "FUNC CURR;:CURR 4;:INP ON;:SYST:ERR?") == '0,"No error"'
    for name, volts in (("meter_node", 100), ("meter_charger", 100), ("meter_shunt", 0.1)):
        assert ask(world, name, f"CONF:VOLT:DC {volts};:VOLT:DC:NPLC 1;:SYST:ERR?") == '0,"No error"'
    world.advance(1.0)
    return world


# -- supply ---------------------------------------------------------------------------------------------------


def test_supply_measures_and_reports_constant_voltage(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    answer = ask(world, "node_supply", "MEAS:VOLT?;:MEAS:CURR?;:OUTP?;:STAT:OPER:COND?").split(";")
    assert [float(part) for part in answer] == pytest.approx([18.0, 4.0, 1.0, 256.0], abs=1e-3)


def test_supply_reports_constant_current_and_neither_when_pushed(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    ask(world, "node_supply", "CURR 3")
    world.advance(1.0)
    assert ask(world, "node_supply", "STAT:OPER:COND?") == "1024"
    ask(world, "node_supply", "CURR 10")
    ask(world, "node_load", "CURR 2")
    ask(world, "mains", "ROUT:CLOS (@1)")
    world.advance(5.0)
    assert ask(world, "node_supply", "STAT:OPER:COND?;:OUTP?") == "0;1"


@pytest.mark.parametrize(
    ("message", "number_"),
    [("VOLT 61", -222), ("CURR 16", -222), ("VOLT -1", -222), ("VOLT:PROT 70", -222), ("OUTP 2,3", -108)],
)
def test_supply_refuses_what_it_cannot_do(virtual_world: Make, ask: Ask, message: str, number_: int) -> None:
    world = ready(virtual_world, ask)
    assert ask(world, "node_supply", f"{message};:SYST:ERR?").startswith(f"{number_},")
    assert number(ask(world, "node_supply", "VOLT?")) == 18.0


def test_supply_limits_are_asked_for_by_name(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    assert [number(ask(world, "node_supply", f"{what}? MAX")) for what in ("VOLT", "CURR", "VOLT:PROT")] == [60, 15, 66]
    assert number(ask(world, "node_supply", "CURR MAX;CURR?")) == 15.0


def test_overvoltage_latches_until_cleared_and_output_stays_off(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    ask(world, "node_supply", "VOLT:PROT 19;:VOLT 20")
    assert ask(world, "node_supply", "VOLT:PROT:TRIP?") == "0"  # the command has its delay
    world.advance(1.0)
    assert ask(world, "node_supply", "VOLT:PROT:TRIP?;:OUTP?;:STAT:QUES:COND?") == "1;0;1"
    assert ask(world, "node_supply", "OUTP ON;:SYST:ERR?") == '-221,"Settings conflict"'
    ask(world, "node_supply", "VOLT 18;:OUTP:PROT:CLE")
    world.advance(1.0)
    assert ask(world, "node_supply", "OUTP?;:STAT:QUES:COND?") == "0;0"
    assert number(ask(world, "node_supply", "MEAS:VOLT?")) == pytest.approx(0.0, abs=1e-6)
    ask(world, "node_supply", "OUTP ON")
    world.advance(1.0)
    assert number(ask(world, "node_supply", "MEAS:VOLT?")) == pytest.approx(18.0)


def test_overcurrent_acts_only_when_armed(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    ask(world, "node_supply", "CURR:PROT 3.5")
    world.advance(1.0)
    assert ask(world, "node_supply", "CURR:PROT:TRIP?;STAT?") == "0;0"
    ask(world, "node_supply", "CURR:PROT:STAT ON")
    world.advance(1.0)
    assert ask(world, "node_supply", "CURR:PROT:TRIP?;:OUTP?;:STAT:QUES:COND?") == "1;0;2"


def test_reset_switches_off(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    ask(world, "node_supply", "*RST")
    ask(world, "node_load", "*RST")
    world.advance(5.0)
    assert ask(world, "node_supply", "OUTP?") == ask(world, "node_load", "INP?") == "0"
    assert number(ask(world, "node_supply", "VOLT?")) == 0.0
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx(0.0, abs=1e-9)


def test_node_offset_moves_the_node(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask, node_offset_V=0.05)
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx(18.05)


# -- load -----------------------------------------------------------------------------------------------------


def test_load_trips_latch_and_say_why(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    ask(world, "node_load", "CURR:PROT 3")
    assert ask(world, "node_load", "INP?;:STAT:QUES:COND?") == "0;2"
    assert ask(world, "node_load", "INP ON;:SYST:ERR?") == '-221,"Settings conflict"'
    ask(world, "node_load", "CURR 2;:INP:PROT:CLE;:INP ON")
    assert ask(world, "node_load", "INP?;:STAT:QUES:COND?") == "1;0"
    assert number(ask(world, "node_load", "MEAS:CURR?")) == pytest.approx(2.0)


@pytest.mark.parametrize(("message", "error"), [("CURR 31", -222), ("FUNC VOLT", -224), ("FUNC 1", -104)])
def test_load_refuses(virtual_world: Make, ask: Ask, message: str, error: int) -> None:
    assert ask(virtual_world(), "node_load", f"{message};:SYST:ERR?").startswith(f"{error},")


# -- meter ----------------------------------------------------------------------------------------------------


def test_meters_see_node_contacts_and_shunt(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    ask(world, "mains", "ROUT:CLOS (@1)")
    world.advance(5.0)
    volts = [number(ask(world, name, "READ?")) for name in ("meter_node", "meter_charger", "meter_shunt")]
    assert volts == pytest.approx([18.0, 18.0 + 3.0 * 0.12, 0.03], abs=1e-9)


def test_reading_is_the_mean_over_the_aperture_that_ends_now(virtual_world: Make, ask: Ask) -> None:
    """18 V until 8 ms before the reading, 20 V after (no settling): (12 x 18 + 8 x 20) / 20, computed."""
    world = ready(virtual_world, ask, settling_s=0.0, delay_s=0.0)
    ask(world, "node_supply", "VOLT 20")
    world.advance(0.008)
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx((12 * 18 + 8 * 20) / 20)
    ask(world, "meter_node", "VOLT:DC:NPLC 0.2")
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx(20.0)


def test_late_meter_shows_the_past(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask, settling_s=0.0, delay_s=0.0, meter_delay_s=0.3)
    ask(world, "node_supply", "VOLT 20")
    world.advance(0.25)
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx(18.0)
    world.advance(0.1)
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx(20.0)


def test_aperture_follows_the_line_frequency(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask, settling_s=0.0, delay_s=0.0, line_Hz=60.0)
    ask(world, "node_supply", "VOLT 20")
    world.advance(0.01)
    assert number(ask(world, "meter_node", "READ?")) == pytest.approx(18 + 2 * 0.01 * 60)


@pytest.mark.parametrize(("volts", "answer"), [(18.0, "+9.900000000E+37"), (11.9, None)])
def test_overload_above_120_percent_of_the_range(
    virtual_world: Make, ask: Ask, volts: float, answer: str | None
) -> None:
    """9.9E37 stands for infinity (SCPI-1999 volume 1, 7.2.1.4)."""
    world = ready(virtual_world, ask)
    ask(world, "node_supply", f"VOLT {volts}")
    world.advance(1.0)
    said = ask(world, "meter_node", "CONF:VOLT:DC 10;:READ?")
    assert said == answer or (answer is None and float(said) == pytest.approx(volts))


def test_meter_chooses_its_range_when_it_may(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    assert number(ask(world, "meter_node", "MEAS:VOLT:DC?")) == pytest.approx(18.0)
    assert number(ask(world, "meter_node", "VOLT:DC:RANG?;RANG:AUTO?")) == 100.0
    assert ask(world, "meter_node", "VOLT:DC:RANG:AUTO?") == "1"
    ask(world, "meter_node", "VOLT:DC:RANG 50")
    assert ask(world, "meter_node", "VOLT:DC:RANG:AUTO?;:VOLT:DC:RANG?") == "0;+1.000000000E+02"


def test_configure_resets_the_aperture_and_setting_it_rounds_up(virtual_world: Make, ask: Ask) -> None:
    world = ready(virtual_world, ask)
    assert number(ask(world, "meter_node", "CONF:VOLT:DC 10;:VOLT:DC:NPLC?")) == 10.0
    assert number(ask(world, "meter_node", "VOLT:DC:NPLC 0.5;NPLC?")) == 1.0
    assert ask(world, "meter_node", "CONF?") == '"VOLT +1.000000000E+01"'
    assert ask(world, "meter_node", "CONF:VOLT:DC 2000;:SYST:ERR?").startswith("-222,")


def test_fetch_keeps_the_last_reading_and_has_none_at_first(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    assert ask(world, "meter_node", "FETC?;:SYST:ERR?").startswith("-230,")
    read_ = ask(world, "meter_node", "READ?")
    assert ask(world, "meter_node", "FETC?") == read_
    ask(world, "meter_node", "INIT")
    assert ask(world, "meter_node", "FETC?") != read_  # another reading, another noise


def test_thermal_emf_is_there_in_the_low_range(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    ask(world, "meter_shunt", "CONF:VOLT:DC 0.1;:VOLT:DC:NPLC 100")
    world.advance(3000.0)
    assert 0 < abs(number(ask(world, "meter_shunt", "READ?"))) < 5e-6


# -- mains ----------------------------------------------------------------------------------------------------


def test_mains_relay(virtual_world: Make, ask: Ask) -> None:
    world = virtual_world()
    assert ask(world, "mains", "ROUT:CLOS? (@1);OPEN? (@1)") == "0;1"
    assert ask(world, "mains", "ROUT:CLOS (@1);CLOS? (@1)") == "1"
    assert ask(world, "mains", "ROUT:OPEN:ALL;:ROUT:CLOS? (@1)") == "0"
    assert ask(world, "mains", "ROUT:CLOS (@2);:SYST:ERR?").startswith("-222,")
    assert ask(world, "mains", "ROUT:CLOS;:SYST:ERR?").startswith("-109,")


# -- against the dialects that ship ----------------------------------------------------------------------------

DIALECTS = Path(virtual.__file__).parents[1] / "dialects"


def dialect(name: str) -> Dialect:
    faults = Faults()
    bound = bind(Dialect, read(DIALECTS / f"{name}.yaml"), "dialect", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


@pytest.mark.parametrize(
    ("name", "quantity", "spans"),
    [
        ("scpi-supply", "voltage", [supply.VOLTAGE_SPAN]),
        ("scpi-supply", "current", [supply.CURRENT_SPAN]),
        ("scpi-load", "voltage", [load.VOLTAGE_SPAN]),
        ("scpi-load", "current", [load.CURRENT_SPAN]),
        ("scpi-meter", "voltage", list(meter.SPANS)),
    ],
)
def test_instruments_are_as_accurate_as_their_dialect_states(name: str, quantity: str, spans: list[object]) -> None:
    """The errors drawn for an individual are shares of its own data sheet; the dialect must state the same one."""
    stated = [(span.range, span.reading, span.of_range) for span in getattr(dialect(name).accuracy, quantity)]
    assert [pytest.approx((span.range, span.reading, span.of_range)) for span in spans] == stated  # type: ignore[attr-defined]
