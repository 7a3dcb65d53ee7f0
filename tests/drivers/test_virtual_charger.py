"""The charger: its states and moments, and whole charges against closed forms."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace

import pytest

from drivers.virtual.charger import Charger
from drivers.virtual.charger_plan import ChargerPlan, Stage
from drivers.virtual.circuit import Circuit, Constants
from drivers.virtual.trace import CHARGER, NODE, SHUNT

CC_CV = ChargerPlan("c", 5, (Stage(3.0),), 21.0, 0.3, True, 1.5, 1.0, 0.0, True)
STEPPED = replace(CC_CV, stages=(Stage(3.0, 20.5), Stage(1.5, 21.0)), limit_V=21.25, cutoff_A=None)
SHUNT_ohm = 0.01


def bench_with(plan: ChargerPlan, path_ohm: float = 0.12) -> Circuit:
    """A supply without delay or settling and a load of 10 A: a node that stands where it is put."""
    constants = Constants(0.0, path_ohm - SHUNT_ohm, SHUNT_ohm, 0.0, 0.0)
    bench = Circuit(constants, Charger(plan))
    bench.supply.limit_A, bench.supply.on = 15.0, True
    bench.change(lambda: None)
    bench.change(lambda: vars(bench.load).update(current_A=10.0, on=True))
    return bench


def put(bench: Circuit, volts: float) -> None:
    bench.command(lambda: setattr(bench.supply, "voltage_V", volts))
    bench.catch_up()


def amperes(bench: Circuit) -> float:
    return bench.value(SHUNT, bench.now_s) / SHUNT_ohm


def charging(plan: ChargerPlan, volts: float = 18.0, path_ohm: float = 0.12) -> Circuit:
    bench = bench_with(plan, path_ohm)
    put(bench, volts)
    bench.set_mains(True)
    bench.advance_to(plan.start_delay_s + plan.surge_s)
    return bench


# -- states ---------------------------------------------------------------------------------------------------


def test_starts_after_its_delay_to_the_moment() -> None:
    bench = bench_with(CC_CV)
    put(bench, 18.0)
    bench.advance_to(10.0)
    bench.set_mains(True)
    bench.advance_to(11.5 - 1e-9)
    assert bench.charger.state == "waiting"
    bench.advance_to(11.5)
    assert bench.charger.state == "charging"
    assert amperes(bench) == pytest.approx(3.0)


def test_no_charge_without_a_pack() -> None:
    bench = bench_with(CC_CV)
    put(bench, 2.4)  # below 0.5 V a cell
    bench.set_mains(True)
    bench.advance_to(60.0)
    assert bench.charger.state == "waiting"
    put(bench, 2.6)
    bench.advance_to(61.4)
    assert bench.charger.state == "waiting"
    bench.advance_to(61.6)
    assert bench.charger.state == "charging"


def test_dead_charger_does_nothing() -> None:
    bench = bench_with(replace(CC_CV, works=False))
    put(bench, 18.0)
    bench.set_mains(True)
    bench.advance_to(100.0)
    assert amperes(bench) == pytest.approx(-0.2e-3 * 18 / 21, rel=1e-3)


def test_mains_off_stops_at_once_and_on_again_starts_anew() -> None:
    bench = charging(CC_CV)
    bench.set_mains(False)
    assert amperes(bench) < 0
    bench.advance_to(5.0)
    bench.set_mains(True)
    bench.advance_to(6.4)
    assert bench.charger.state == "waiting"
    bench.advance_to(6.5)
    assert bench.charger.state == "charging"


def test_pack_taken_out_stops_after_the_response_time() -> None:
    bench = charging(CC_CV)
    put(bench, 0.0)
    bench.change(lambda: setattr(bench.supply, "on", False))
    bench.advance_to(2.4)
    assert bench.charger.state == "charging"
    bench.advance_to(2.6)
    assert bench.charger.state == "waiting"


def test_ended_stays_ended_until_the_mains_are_cycled() -> None:
    bench = charging(CC_CV, volts=20.99)
    bench.advance_to(3.0)
    assert bench.charger.state == "ended"
    put(bench, 18.0)
    bench.advance_to(1000.0)
    assert bench.charger.state == "ended"
    bench.set_mains(False)
    bench.set_mains(True)
    bench.advance_to(1002.0)
    assert bench.charger.state == "charging"


def test_short_dip_below_cut_off_does_not_end_the_charge() -> None:
    """The condition must hold without a break for the response time."""
    bench = charging(CC_CV)
    for _ in range(20):
        put(bench, 20.99)
        bench.advance_to(bench.now_s + 0.9)
        put(bench, 20.0)
        bench.advance_to(bench.now_s + 0.1)
    assert bench.charger.state == "charging"


def test_filter_time_runs_on_while_other_things_move() -> None:
    """The supply moves every 0.3 s, always above the threshold: the step still comes 1 s after it was reached."""
    bench = charging(STEPPED, volts=20.15)
    for step in range(4):
        put(bench, 20.15 + step / 1000)
        bench.advance_to(1.5 + 0.3 * (step + 1) - (0.2 + 1e-6) * (step == 3))
    assert (bench.now_s, bench.charger.stage) == (pytest.approx(2.5), 0)
    bench.advance_to(2.5 + 1e-6)
    assert bench.charger.stage == 1


def test_new_start_begins_with_the_first_stage() -> None:
    bench = charging(STEPPED, volts=20.15)
    bench.advance_to(3.0)
    assert bench.charger.stage == 1
    bench.set_mains(False)
    put(bench, 18.0)
    bench.set_mains(True)
    bench.advance_to(5.0)
    assert amperes(bench) == pytest.approx(3.0)


def test_step_down_lowers_the_voltage_by_the_drop_and_is_done_once() -> None:
    """At 20.15 V the contacts stand at 20.15 V + 3 A x 0.12 Ω = 20.51 V; after the step at 20.33 V; computed."""
    bench = charging(STEPPED, volts=20.15)
    assert bench.value(CHARGER, bench.now_s) == pytest.approx(20.51)
    bench.advance_to(2.5 - 1e-9)
    assert amperes(bench) == pytest.approx(3.0)
    bench.advance_to(60.0)
    assert (bench.charger.state, bench.charger.stage) == ("charging", 1)
    assert bench.value(CHARGER, bench.now_s) == pytest.approx(20.33)
    put(bench, 20.83)
    bench.advance_to(60.99)
    assert bench.charger.state == "charging"
    bench.advance_to(61.01)
    assert bench.charger.state == "ended"


def test_each_step_on_a_node_without_drop_waits_its_own_filter_time() -> None:
    """Same threshold for three stages and hardly any resistance: still one step a response time."""
    plan = replace(STEPPED, stages=(Stage(3.0, 20.0), Stage(2.0, 20.0), Stage(1.0, 20.0)))
    bench = charging(plan, volts=20.1, path_ohm=SHUNT_ohm)
    seen = []
    for tenth in range(50):
        bench.advance_to(1.5 + tenth / 10)
        seen.append(round(amperes(bench), 3))
    assert [seen.count(level) for level in (3.0, 2.0, 1.0)] == [10, 10, 10]
    assert bench.charger.state == "ended"


@pytest.mark.parametrize("plan", [CC_CV, STEPPED, replace(STEPPED, stages=(Stage(1.5, 20.75),))])
def test_charger_without_termination_stays_at_its_limit(plan: ChargerPlan) -> None:
    bench = charging(replace(plan, ends=False), volts=plan.limit_V - 0.012)
    bench.advance_to(3600.0)
    assert bench.charger.state == "charging"
    assert amperes(bench) == pytest.approx(0.1)  # 12 mV over 0.12 Ω
    assert bench.value(CHARGER, 3600.0) == pytest.approx(plan.limit_V)


def test_source_resistance_lies_before_the_contacts() -> None:
    bench = charging(replace(CC_CV, source_ohm=0.08), volts=20.9)
    assert amperes(bench) == pytest.approx((21.0 - 20.9) / 0.20)
    assert bench.value(CHARGER, bench.now_s) == pytest.approx(21.0 - 0.5 * 0.08)


def test_surge_at_the_start() -> None:
    bench = charging(replace(CC_CV, surge_A=4.0, surge_s=0.3))
    assert bench.value(SHUNT, 1.6) / SHUNT_ohm == pytest.approx(4.0)
    assert bench.value(SHUNT, 1.79) / SHUNT_ohm == pytest.approx(4.0)
    assert amperes(bench) == pytest.approx(3.0)


# -- whole charges ----------------------------------------------------------------------------------------------
# A pack with linear open-circuit voltage E0 + q/Ce behind R (here the charger's path), played in fine steps:
# 5 cells of 3 Ah, 3.0 V to 4.2 V, so Ce = 0.5 Ah/V = 1800 F and E0 = 15 V; R = 250 mΩ; 3 A, 21 V, 0.3 A.

E0_V, CE_F, R_ohm = 15.0, 1800.0, 0.25


def played(plan: ChargerPlan, step_s: float) -> Iterator[tuple[Circuit, float]]:
    """(bench, charge in A s) after each step, from the first current to the end of the charge."""
    plan = replace(plan, start_delay_s=0.0, response_s=1e-6)
    bench = charging(plan, E0_V, R_ohm)
    charge_As = 0.0
    yield bench, charge_As
    while bench.charger.state == "charging":
        begun_s = bench.now_s
        bench.advance_to(begun_s + step_s)
        charge_As += bench.mean(SHUNT, begun_s, bench.now_s) / SHUNT_ohm * step_s
        put(bench, E0_V + charge_As / CE_F)
        yield bench, charge_As


def ends(plan: ChargerPlan, step_s: float) -> tuple[float, float, float]:
    """(time of the last full current, time of the end, charge in A s) of a charge, s and A s."""
    full_s, charge_As, bench = 0.0, 0.0, None
    for bench, charge_As in played(plan, step_s):  # noqa: B007  # the last ones count
        if amperes(bench) > 0.999999 * plan.stages[0].current_A:
            full_s = bench.now_s
    assert bench is not None
    return full_s, bench.now_s, charge_As


def test_cc_cv_charge_in_closed_form() -> None:
    """Textbook relation, OCV linear in charge: t_cc 3150 s, t_cv = tau ln 10 = 1036.1633 s, tau 450 s; 2.9625 Ah."""
    full_s, end_s, charge_As = ends(CC_CV, 1.0)
    assert full_s == pytest.approx(3150.0, abs=2.0)
    assert end_s - full_s == pytest.approx(1036.1633, abs=3.0)  # steps of 1 s: tau is short by half a step, 0.1 %
    assert charge_As / 3600 == pytest.approx(2.9625, abs=2e-3)


def test_cc_cv_charge_converges_to_the_closed_form() -> None:
    """The error falls with the step, so that it is the step's and not the circuit's."""
    coarse, fine = (sum(ends(CC_CV, step_s)[1:2]) - 4186.1633 for step_s in (8.0, 1.0))
    assert abs(fine) < 2.0 < abs(coarse) < 12.0


def test_current_in_constant_voltage_is_log_linear() -> None:
    """Slope -1/tau, tau = 450 s, and V at the contacts flat at 21 V."""
    times, logs = [], []
    for bench, _ in played(CC_CV, 1.0):
        if bench.charger.state == "charging" and 0.4 < amperes(bench) < 2.9:
            times.append(bench.now_s)
            logs.append(math.log(amperes(bench)))
            assert bench.value(CHARGER, bench.now_s) == pytest.approx(21.0, abs=1e-9)
    slopes = [(logs[k + 100] - logs[k]) / 100 for k in range(0, len(logs) - 100, 50)]
    assert slopes == pytest.approx([-1 / 450] * len(slopes), rel=2e-3)


def test_stepped_charge_in_closed_form() -> None:
    """Same relation: 3, 1.5, 0.75 A to 4.2 V a cell each; 2.625, 0.1875, 0.09375 Ah in 3150, 450, 450 s."""
    plan = replace(CC_CV, stages=tuple(Stage(a, 21.0) for a in (3.0, 1.5, 0.75)), limit_V=21.25, cutoff_A=None)
    spent_s, added_As, last = [0.0] * 3, [0.0] * 3, (0.0, 0.0)
    for bench, charge_As in played(plan, 0.5):
        stage = {3.0: 0, 1.5: 1, 0.75: 2}.get(round(amperes(bench), 6))
        if stage is not None and bench.now_s:
            spent_s[stage] += bench.now_s - last[0]
            added_As[stage] += charge_As - last[1]
        last = bench.now_s, charge_As
    assert spent_s == pytest.approx([3150.0, 450.0, 450.0], abs=1.5)
    assert [charge / 3600 for charge in added_As] == pytest.approx([2.625, 0.1875, 0.09375], abs=1e-3)


def test_cc_only_charge_in_closed_form() -> None:
    """1.5 A from E0 until 20.75 V at the contacts: q = Ce (20.75 - 1.5 R - E0), t = q / I; computed."""
    plan = replace(CC_CV, stages=(Stage(1.5, 20.75),), limit_V=21.0, cutoff_A=None)
    full_s, end_s, charge_As = ends(plan, 0.5)
    expected_As = CE_F * (20.75 - 1.5 * R_ohm - E0_V)
    assert charge_As == pytest.approx(expected_As, abs=2.0)
    assert end_s == pytest.approx(expected_As / 1.5, abs=1.0)
    assert end_s - full_s <= 1.0


def test_node_follows_the_pack() -> None:
    bench = charging(CC_CV, 17.5)
    assert bench.value(NODE, bench.now_s) == 17.5
