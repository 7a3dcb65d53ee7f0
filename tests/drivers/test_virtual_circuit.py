"""The circuit against closed forms: exponentials, logarithms, Kirchhoff by hand."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.virtual.charger import Charger
from drivers.virtual.charger_plan import ChargerPlan, Stage
from drivers.virtual.circuit import Circuit, Constants
from drivers.virtual.trace import CHARGER, LOAD_CURRENT, NODE, SHUNT, SUPPLY_CURRENT

CONSTANTS = Constants(leads_ohm=0.01, ballast_ohm=0.1, shunt_ohm=0.01, delay_s=0.2, settling_s=0.15)
PLAN = ChargerPlan("c", 5, (Stage(3.0),), 21.0, 0.3, True, 1.5, 1.0, 0.0, True)
SWAP_s = 1e-9


def circuit(constants: Constants = CONSTANTS, **charger: object) -> Circuit:
    return Circuit(constants, Charger(replace(PLAN, **charger)))  # type: ignore[arg-type]


def supply_on(bench: Circuit, volts: float, limit_A: float = 10.0) -> None:
    def act() -> None:
        bench.supply.voltage_V, bench.supply.limit_A, bench.supply.on = volts, limit_A, True

    bench.command(act)


def load_on(bench: Circuit, amperes: float) -> None:
    def act() -> None:
        bench.load.current_A, bench.load.on = amperes, True

    bench.change(act)


def charging(volts: float = 18.0, load_A: float = 4.0, **charger: object) -> Circuit:
    """A bench at 5 s, its charger in constant current."""
    bench = circuit(**charger)
    supply_on(bench, volts)
    bench.advance_to(2.0)
    load_on(bench, load_A)
    bench.set_mains(True)
    bench.advance_to(5.0)
    return bench


def at(bench: Circuit, signal: int) -> float:
    return bench.value(signal, bench.now_s)


# -- the supply's step -------------------------------------------------------------------------------------


def test_supply_reacts_after_its_delay_and_settles_as_a_first_order_lag() -> None:
    bench = circuit()
    bench.advance_to(1.0)
    supply_on(bench, 18.0)
    bench.advance_to(4.0)
    assert bench.value(NODE, 1.2 - SWAP_s) == 0.0
    for taus in (0.5, 1.0, 3.0):
        expected = 18.0 * (1.0 - math.exp(-taus))  # step response of a first-order lag, computed
        assert bench.value(NODE, 1.2 + taus * 0.15) == pytest.approx(expected, rel=1e-9)


def test_mean_of_the_step_is_its_integral() -> None:
    bench = circuit()
    supply_on(bench, 18.0)
    bench.advance_to(3.0)
    # integral of 18 (1 - exp(-(t - 0.2)/0.15)) from 0.2 to 0.5, and nothing before, computed
    area = 18.0 * (0.3 - 0.15 * (1.0 - math.exp(-2.0)))
    assert bench.mean(NODE, 0.1, 0.5) == pytest.approx(area / 0.4, rel=1e-9)
    assert bench.mean(NODE, 0.3, 0.3) == pytest.approx(bench.value(NODE, 0.3), rel=1e-12)


def test_commands_keep_their_order_and_their_delay() -> None:
    bench = circuit(replace(CONSTANTS, settling_s=0.0))
    supply_on(bench, 10.0)
    bench.advance_to(0.1)
    supply_on(bench, 12.0)
    bench.advance_to(1.0)
    assert [bench.value(NODE, t) for t in (0.19, 0.21, 0.29, 0.31)] == [0.0, 10.0, 10.0, 12.0]


# -- operating points ----------------------------------------------------------------------------------------


def test_charging_point_by_hand() -> None:
    bench = charging()
    assert at(bench, NODE) == pytest.approx(18.0)
    assert at(bench, CHARGER) == pytest.approx(18.0 + 3.0 * 0.12)
    assert at(bench, SHUNT) == pytest.approx(0.03)
    assert at(bench, SUPPLY_CURRENT) == pytest.approx(1.0)
    assert at(bench, LOAD_CURRENT) == 4.0
    assert bench.supply_mode == "cv"


def test_regulated_point_by_hand() -> None:
    bench = charging(volts=20.9)
    assert at(bench, CHARGER) == pytest.approx(21.0)
    assert at(bench, SHUNT) / 0.01 == pytest.approx((21.0 - 20.9) / 0.12)


def test_supply_pushed_out_gives_nothing_and_is_unregulated() -> None:
    bench = charging(load_A=2.0)
    assert at(bench, NODE) == pytest.approx(21.0 - 2.0 * 0.12)
    assert at(bench, SUPPLY_CURRENT) == 0.0
    assert at(bench, LOAD_CURRENT) == 2.0
    assert bench.supply_mode == "unregulated"


def test_supply_in_limit_lets_the_node_collapse() -> None:
    bench = circuit()
    supply_on(bench, 18.0, limit_A=3.0)
    bench.advance_to(5.0)
    load_on(bench, 4.0)
    assert at(bench, NODE) == pytest.approx(3.0 * 0.05, rel=1e-4)  # 3 A through a load that is fully on
    assert at(bench, SUPPLY_CURRENT) == pytest.approx(3.0, rel=1e-6)
    assert bench.supply_mode == "cc"


def test_bench_supply_that_limits_early() -> None:
    bench = circuit(replace(CONSTANTS, supply_most_A=2.0))
    supply_on(bench, 18.0, limit_A=10.0)
    bench.advance_to(5.0)
    load_on(bench, 4.0)
    assert at(bench, SUPPLY_CURRENT) == pytest.approx(2.0, rel=1e-6)


def test_load_off_leaves_the_open_circuit_voltage_of_the_charger() -> None:
    bench = charging()
    bench.change(lambda: setattr(bench.load, "on", False))
    assert at(bench, NODE) == pytest.approx(21.0)
    assert at(bench, SHUNT) == pytest.approx(0.0, abs=1e-12)


def test_idle_charger_drains_a_little_from_the_node() -> None:
    bench = circuit()
    supply_on(bench, 21.0)
    bench.advance_to(5.0)
    assert at(bench, SHUNT) / 0.01 == pytest.approx(-0.2e-3, rel=1e-3)
    assert bench.supply_mode == "cv"


def test_supply_off_falls_to_nothing() -> None:
    bench = charging()
    bench.set_mains(False)
    bench.command(lambda: setattr(bench.supply, "on", False))
    bench.advance_to(15.0)
    assert [at(bench, signal) for signal in (NODE, SHUNT, SUPPLY_CURRENT, LOAD_CURRENT)] == [0.0] * 4
    assert bench.supply_mode == "off"


# -- events --------------------------------------------------------------------------------------------------


def test_overvoltage_trips_at_its_logarithm() -> None:
    """The node on its way from 18 V to 23 V passes 22 V at delay + tau ln(5 V / 1 V), computed."""
    bench = circuit()
    supply_on(bench, 18.0)
    bench.change(lambda: setattr(bench.supply, "overvoltage_V", 22.0))
    bench.advance_to(10.0)
    supply_on(bench, 23.0)
    bench.advance_to(13.0)
    trip_s = 10.2 + 0.15 * math.log(5.0)
    assert bench.supply.tripped == {"voltage"}
    assert bench.value(NODE, trip_s) == pytest.approx(22.0, abs=1e-6)
    assert bench.value(NODE, trip_s + 0.15) == pytest.approx(22.0 / math.e, rel=1e-6)  # falls from there
    assert bench.supply_mode == "off"


def test_overvoltage_sees_a_node_that_the_charger_pushes() -> None:
    bench = charging(volts=18.0)
    bench.change(lambda: setattr(bench.supply, "overvoltage_V", 20.5))
    bench.change(lambda: setattr(bench.load, "on", False))
    bench.catch_up()
    assert bench.supply.tripped == {"voltage"}
    assert at(bench, NODE) == pytest.approx(21.0)  # tripping a supply does not stop a charger


def test_overcurrent_trips_by_current() -> None:
    bench = circuit()
    supply_on(bench, 18.0)
    bench.change(lambda: setattr(bench.supply, "overcurrent_A", 2.0))
    bench.advance_to(5.0)
    load_on(bench, 1.9)
    bench.catch_up()
    assert not bench.supply.tripped
    load_on(bench, 2.1)
    bench.catch_up()
    assert bench.supply.tripped == {"current"}


@pytest.mark.parametrize(
    ("amperes", "settings", "cause"),
    [
        (5.0, {"overcurrent_A": 4.5}, "current"),
        (5.0, {"overpower_W": 80.0}, "power"),
        (1.0, {"overvoltage_V": 17.0}, "voltage"),
    ],
)
def test_load_protections(amperes: float, settings: dict[str, float], cause: str) -> None:
    bench = circuit()
    supply_on(bench, 18.0)
    bench.advance_to(5.0)
    for name, value in settings.items():
        setattr(bench.load, name, value)
    load_on(bench, amperes)
    bench.catch_up()
    assert bench.load.tripped == {cause}
    assert at(bench, LOAD_CURRENT) == 0.0


def test_cut_off_moment_of_a_regulated_charger() -> None:
    """From 20.7 V to 20.99 V: I < 0.3 A once v > 21 V - 0.3 A x 0.12 Ω = 20.964 V; then 1 s of filter; computed."""
    bench = charging(volts=20.7)
    supply_on(bench, 20.99)
    below_s = 5.2 + 0.15 * math.log((20.99 - 20.7) / (20.99 - 20.964))
    bench.advance_to(below_s + 1.0 - 1e-6)
    assert bench.charger.state == "charging"
    bench.advance_to(below_s + 1.0 + 1e-6)
    assert bench.charger.state == "ended"


# -- exactness ------------------------------------------------------------------------------------------------

moves = st.tuples(st.sampled_from(["volts", "load", "mains"]), st.floats(0, 24), st.integers(1, 4_000))


def play(steps: list[tuple[str, float, int]], cuts: int) -> list[float]:
    """Go through the moves; each wait cut into so many pieces. Times in ms, so that they are the same numbers."""
    bench, now_ms, seen = circuit(), 0, []
    for what, value, wait_ms in steps:
        if what == "volts":
            supply_on(bench, value)
        elif what == "load":
            load_on(bench, value / 4)
        else:
            bench.set_mains(value > 8)
        for piece in range(1, cuts + 1):
            bench.advance_to((now_ms + wait_ms * piece // cuts) / 1000)
            bench.value(SHUNT, bench.now_s)
        now_ms += wait_ms
        seen += [at(bench, signal) for signal in (NODE, CHARGER, SHUNT, SUPPLY_CURRENT, LOAD_CURRENT)]
        seen.append(bench.mean(CHARGER, bench.now_s - 0.02, bench.now_s))
    return seen


@given(st.lists(moves, min_size=1, max_size=12), st.integers(2, 7))
def test_time_in_pieces_is_the_same_time(steps: list[tuple[str, float, int]], cuts: int) -> None:
    """Bit for bit: where an advance ends is no event."""
    assert play(steps, 1) == play(steps, cuts)


@given(st.lists(moves, min_size=1, max_size=8))
def test_currents_sum_at_every_moment(steps: list[tuple[str, float, int]]) -> None:
    """Kirchhoff at the node: supply + charger = load."""
    bench = circuit()
    for what, value, wait_ms in steps:
        supply_on(bench, value) if what == "volts" else load_on(bench, value / 4)
        bench.set_mains(True)
        bench.advance_to(bench.now_s + wait_ms / 1000)
        charger_A = at(bench, SHUNT) / 0.01
        assert at(bench, SUPPLY_CURRENT) + charger_A == pytest.approx(at(bench, LOAD_CURRENT), abs=1e-7)
        assert at(bench, CHARGER) - at(bench, NODE) == pytest.approx(charger_A * 0.12, abs=1e-7)


def test_mean_agrees_with_quadrature() -> None:
    """Against Simpson's rule over a second with a command, a crossing and a settling in it."""
    bench = charging(volts=20.5)
    supply_on(bench, 20.95)
    bench.advance_to(6.0)
    n = 20_000
    for signal in (NODE, CHARGER, SHUNT, SUPPLY_CURRENT):
        values = [bench.value(signal, 5.0 + k / n) for k in range(n + 1)]
        simpson = (values[0] + values[-1] + 4 * sum(values[1:-1:2]) + 2 * sum(values[2:-1:2])) / (3 * n)
        assert bench.mean(signal, 5.0, 6.0) == pytest.approx(simpson, rel=1e-6)


def test_the_past_is_kept_and_the_distant_past_forgotten() -> None:
    bench = circuit(replace(CONSTANTS, settling_s=0.0, delay_s=0.0))
    for second in range(1, 500):
        supply_on(bench, float(second % 20))
        bench.advance_to(float(second))
    assert bench.value(NODE, 495.5) == float(496 % 20)
    assert len(bench._trace._stretches) < 20


def test_no_time_no_event() -> None:
    bench = charging()
    before = bench.events
    for _ in range(10):
        bench.advance_to(bench.now_s)
        bench.value(NODE, bench.now_s)
    assert bench.events == before
