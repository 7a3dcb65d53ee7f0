"""Classification against real logs of others, a battery model of others, and charges whose truth is known."""

import json
import math
import os
from collections.abc import Callable
from pathlib import Path
from time import perf_counter
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
from hypothesis import strategies as st
from ruamel.yaml import YAML

from sequencer.analysis.classify import Classification, classify

ROOT = Path(__file__).resolve().parents[2]
DATA = Path(os.environ.get("PACKMIME_SHARED", ROOT.parent / "shared")) / "data"
INDEX = DATA / "cases.yaml"


def cases() -> list[Any]:
    if not INDEX.is_file():
        reason = "the published logs are not here (../shared beside the project, or PACKMIME_SHARED)"
        return [pytest.param(None, marks=pytest.mark.skip(reason=reason), id="absent")]
    listed = YAML(typ="safe").load(INDEX.read_text(encoding="utf-8"))["cases"]
    return [pytest.param(case, id=f"case-{number:02d}") for number, case in enumerate(listed)]


def read(case: dict[str, Any]) -> np.ndarray:
    return np.genfromtxt(DATA / case["file"], delimiter=",", skip_header=1, unpack=True)


@pytest.mark.parametrize("case", cases())
def test_published_logs(case: dict[str, Any]) -> None:
    """Labels as listed; currents within 1 %, limits within 10 mV, cut-off within 5 % or 1 mA (the data's README)."""
    found = classify(*read(case))
    stated = case["stated"]
    assert found.algorithm == case["algorithm"], found.why
    levels = [step["cc_A"] for step in stated.get("steps", []) if "cc_A" in step]
    levels += [stated[key] for key in ("precharge_A", "cc_A") if key in stated]
    plateaus = [stage.current_A.value for stage in found.stages if stage.kind in ("cc", "precharge")]
    assert plateaus == pytest.approx(levels, rel=0.01)
    limit = stated.get("cv_V", stated.get("end_V"))
    if limit is not None:
        assert found.voltage_limit_V is not None
        assert found.voltage_limit_V.value == pytest.approx(limit, abs=0.010)
    if "cutoff_A" in stated:
        assert found.cutoff_current_A is not None
        cutoff = stated["cutoff_A"]
        assert found.cutoff_current_A.value == pytest.approx(cutoff, abs=max(0.05 * cutoff, min(0.001, 0.1 * cutoff)))
    assert found.precharge == ("precharge_A" in stated)


def test_a_battery_model_of_others() -> None:
    """CC-CV on an equivalent-circuit model that nobody here wrote (thevenin), its sign turned: there discharge is +."""
    thevenin = pytest.importorskip("thevenin")
    parameters = {
        "num_RC_pairs": 1, "soc0": 0.05, "capacity": 3.0, "ce": 1.0, "gamma": 0.0, "mass": 0.07, "isothermal": True,
        "Cp": 1150.0, "T_inf": 298.15, "h_therm": 12.0, "A_therm": 1.0,
        "ocv": lambda soc: 3.0 + 1.1 * soc + 0.12 * soc**2 - 0.25 * np.exp(-20.0 * soc),
        "M_hyst": lambda soc: 0.0, "R0": lambda soc, T: 0.03, "R1": lambda soc, T: 0.02, "C1": lambda soc, T: 2000.0,
    }  # fmt: skip
    experiment = thevenin.Experiment(max_step=5.0)
    experiment.add_step("current_A", 0.0, (60.0, 1.0))
    experiment.add_step("current_A", -3.0, (9000.0, 1.0), limits=("voltage_V", 4.2))
    experiment.add_step("voltage_V", 4.2, (9000.0, 1.0), limits=("current_A", -0.15))
    experiment.add_step("current_A", 0.0, (300.0, 1.0))
    shown = thevenin.Simulation(parameters).run(experiment).vars
    found = classify(shown["time_s"], shown["voltage_V"], -shown["current_A"])
    assert (found.algorithm, [stage.kind for stage in found.stages]) == ("cc-cv", ["rest", "cc", "cv", "rest"])
    assert found.stages[1].current_A.value == pytest.approx(3.0, rel=1e-3)
    assert found.voltage_limit_V is not None
    assert found.voltage_limit_V.value == pytest.approx(4.2, abs=1e-3)
    assert found.cutoff_current_A is not None
    assert found.cutoff_current_A.value == pytest.approx(0.15, rel=0.01)


@pytest.mark.parametrize("period_s", [0.1, 1.0, 10.0])
def test_closed_form_cc_cv(closed_form: Callable[..., Any], period_s: float) -> None:
    """Textbook relation, computed: 3150 s of CC, 1036.2 s of CV, 2.625 and 0.3375 Ah."""
    truth = closed_form()
    found = classify(*truth.log(1, period_s=period_s))
    cc, cv = (stage for stage in found.stages if stage.kind in ("cc", "cv"))
    assert found.algorithm == "cc-cv"
    assert cc.end_s == pytest.approx(3150.0, abs=max(10.0, 1.5 * period_s))  # 2 % of sag takes 9 s
    assert cv.end_s == pytest.approx(3150.0 + 1036.1633, abs=1.5 * period_s)
    assert cc.charge_Ah + cv.charge_Ah == pytest.approx(2.9625, abs=0.006 + 3.0 * period_s / 3600.0)
    assert cc.current_A.value == pytest.approx(3.0, abs=0.003)
    assert found.voltage_limit_V is not None
    assert found.voltage_limit_V.value == pytest.approx(4.2, abs=4.0 * found.voltage_limit_V.u)


def test_closed_form_stepped_cc(pack: Callable[..., Any]) -> None:
    """Textbook relation, computed: 3, 1.5, 0.75 A to 4.2 V each: 3150, 450, 450 s; 2.625, 0.1875, 0.09375 Ah."""
    cell = pack(empty_V=3.0, capacity_Ah=3.0, resistance_ohm=0.05, span_V=1.2)
    for current in (3.0, 1.5, 0.75):
        cell.constant_current(current, 4.2)
    cell.rest(100.0)
    found = classify(*cell.log(1, noise_A=0.001, noise_V=0.0003))
    steps = [stage for stage in found.stages if stage.kind == "cc"]
    assert found.algorithm == "stepped-cc"
    assert [s.end_s - s.start_s for s in steps] == pytest.approx([3150.0, 450.0, 450.0], abs=3.0)
    assert [s.charge_Ah for s in steps] == pytest.approx([2.625, 0.1875, 0.09375], abs=0.002)
    assert [s.voltage_V.value for s in steps] == pytest.approx([4.2, 4.2, 4.2], abs=0.002)
    assert found.step_ratios == pytest.approx([0.5, 0.5], rel=1e-3)
    assert (found.precharge, found.cutoff_current_A) == (False, None)


CHARGES = st.fixed_dictionaries({
    "cells": st.sampled_from([1, 3, 5, 10]),
    "capacity_Ah": st.sampled_from([0.02, 1.0, 2.0, 40.0]),
    "rate": st.floats(0.4, 1.8),
    "resistance": st.floats(0.08, 0.2),  # V per cell that a current of 1 C drops
    "period_s": st.sampled_from([0.5, 1.0, 2.0, 5.0]),
    "grid_V": st.sampled_from([0.0, 0.0, 0.004, 0.010]),
    "noise": st.floats(1e-6, 0.004),
    "seed": st.integers(0, 2**32 - 1),
})  # fmt: skip


class Charge:
    """A pack of the drawn kind and what to charge it with; the stand-in's steps move the current by 5 % at most."""

    def __init__(self, pack: Callable[..., Any], drawn: dict[str, Any], cell_V: float = 3.3) -> None:
        cells, capacity = drawn["cells"], drawn["capacity_Ah"]
        self.cells = cells
        self.current_A = drawn["rate"] * capacity
        self.limit_V = 4.2 * cells
        self.pack = pack(
            empty_V=cell_V * cells, capacity_Ah=capacity, resistance_ohm=cells * drawn["resistance"] / capacity,
            span_V=1.25 * cells, period_s=drawn["period_s"],
            grid_V=min(drawn["grid_V"], 0.05 * 0.1 * cells * drawn["rate"] * drawn["resistance"]),
        )  # fmt: skip
        self.drawn = drawn

    def classified(self) -> Classification:
        noise = self.drawn["noise"]
        log = self.pack.log(self.drawn["seed"], noise_A=noise * self.current_A, noise_V=0.03 * noise * self.limit_V)
        return classify(*log)


FEW = settings(max_examples=25)


@FEW
@given(CHARGES, st.floats(0.03, 0.15))
def test_cc_cv(pack: Callable[..., Any], drawn: dict[str, Any], cutoff: float) -> None:
    charge = Charge(pack, drawn)
    charge.pack.constant_current(charge.current_A, charge.limit_V)
    charge.pack.constant_voltage(charge.limit_V, cutoff * charge.current_A, charge.current_A)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert found.algorithm == "cc-cv", found.why
    assert found.confidence < 1.0
    assert found.voltage_limit_V is not None
    assert found.voltage_limit_V.value == pytest.approx(charge.limit_V, rel=0.001)
    plateau = next(stage for stage in found.stages if stage.kind == "cc")
    assert plateau.current_A.value == pytest.approx(charge.current_A, rel=0.01)


@FEW
@given(CHARGES)
def test_cc_only(pack: Callable[..., Any], drawn: dict[str, Any]) -> None:
    charge = Charge(pack, drawn)
    charge.pack.constant_current(charge.current_A, charge.limit_V)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert (found.algorithm, found.cutoff_current_A) == ("cc-only", None), found.why


@FEW
@given(CHARGES, st.floats(0.4, 0.75), st.integers(2, 4), st.booleans())
def test_stepped_cc(pack: Callable[..., Any], drawn: dict[str, Any], ratio: float, steps: int, held: bool) -> None:
    assume(ratio ** (steps - 1) > 0.13)  # what is lower may be a float
    charge = Charge(pack, drawn)
    levels = [charge.current_A * ratio**k for k in range(steps)]
    for level in levels:
        charge.pack.constant_current(level, charge.limit_V)
    if held:
        charge.pack.constant_voltage(charge.limit_V, 0.2 * levels[-1], levels[-1])
    charge.pack.rest(120.0)
    found = charge.classified()
    assert found.algorithm == ("stepped-cc-cv" if held else "stepped-cc"), found.why
    assert found.step_ratios == pytest.approx([ratio] * (steps - 1), rel=0.02)


@FEW
@given(CHARGES, st.floats(0.01, 0.05))
def test_fine_digital_steps_are_cc_cv(pack: Callable[..., Any], drawn: dict[str, Any], step: float) -> None:
    charge = Charge(pack, drawn)
    charge.pack.steps_at_voltage(charge.limit_V, charge.current_A, step * charge.current_A, 0.1 * charge.current_A)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert found.algorithm == "cc-cv", found.why


@FEW
@given(CHARGES, st.integers(6, 30), st.integers(4, 40), st.integers(4, 30))
def test_pulses(pack: Callable[..., Any], drawn: dict[str, Any], pulses: int, on: int, off: int) -> None:
    charge = Charge(pack, drawn)
    for _ in range(pulses):
        charge.pack.flow(charge.current_A, on * drawn["period_s"])
        charge.pack.rest(off * drawn["period_s"])
    found = charge.classified()
    assert found.algorithm == "pulsed", found.why
    pulse = next(stage for stage in found.stages if stage.kind == "pulse")
    assert pulse.current_A.value == pytest.approx(charge.current_A, rel=0.01)


@FEW
@given(CHARGES, st.floats(0.5, 0.8), st.floats(0.05, 0.15))
def test_foldback_stays_cc_cv(pack: Callable[..., Any], drawn: dict[str, Any], to: float, lasting: float) -> None:
    charge = Charge(pack, drawn | {"grid_V": 0.0})
    reduced = to * charge.current_A
    charge.pack.constant_current(charge.current_A, 0.95 * charge.limit_V)
    charge.pack.foldback(charge.current_A, reduced, lasting * 3600.0 / drawn["rate"])
    charge.pack.constant_current(reduced, charge.limit_V)
    charge.pack.constant_voltage(charge.limit_V, 0.1 * reduced, reduced)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert found.algorithm == "cc-cv", found.why
    assert "thermal-foldback" in found.flags


@FEW
@given(CHARGES, st.booleans())
def test_constant_power(pack: Callable[..., Any], drawn: dict[str, Any], held: bool) -> None:
    charge = Charge(pack, drawn, cell_V=3.1)
    last = charge.pack.constant_power(charge.current_A * charge.limit_V, charge.limit_V)
    if held:
        charge.pack.constant_voltage(charge.limit_V, 0.1 * last, last)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert found.algorithm == ("cc-cv" if held else "constant-power"), found.why
    assert ("power-limited" in found.flags) == held


@FEW
@given(CHARGES, st.floats(0.05, 0.2))
def test_precharge_is_a_stage(pack: Callable[..., Any], drawn: dict[str, Any], share: float) -> None:
    charge = Charge(pack, drawn, cell_V=2.6)
    charge.pack.constant_current(share * charge.current_A, 2.95 * charge.cells)
    charge.pack.constant_current(charge.current_A, charge.limit_V)
    charge.pack.constant_voltage(charge.limit_V, 0.1 * charge.current_A, charge.current_A)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert (found.algorithm, found.precharge) == ("cc-cv", True), found.why
    assert found.stages[0].kind == "precharge"


NOISY_FLOATS = [  # a slope made of the first readings of a float, its first readings a plateau of their own, a held one
    (5, 1.037109375, 0.099609375, 0.0006004551679450284, 1672780),
    (10, 1.5474774067669879, 0.16199442872039088, 0.0007873098446132463, 635320306),
    (10, 1.3458670800430454, 0.16635279397860636, 0.0005753109323288646, 3070649517),
]


def noisy(number: int) -> dict[str, Any]:
    cells, rate, resistance, noise, seed = NOISY_FLOATS[number]
    drawn = {"cells": cells, "rate": rate, "resistance": resistance, "noise": noise, "seed": seed}
    return drawn | {"capacity_Ah": 0.02, "period_s": 5.0, "grid_V": 0.0}


@FEW
@given(CHARGES)
@example(noisy(0))
@example(noisy(1))
@example(noisy(2))
def test_float_and_top_up_after_the_charge(pack: Callable[..., Any], drawn: dict[str, Any]) -> None:
    charge = Charge(pack, drawn | {"grid_V": 0.0, "noise": min(drawn["noise"], 0.001)})
    charge.pack.constant_current(charge.current_A, charge.limit_V)
    charge.pack.constant_voltage(charge.limit_V, 0.1 * charge.current_A, charge.current_A)
    charge.pack.flow(0.02 * charge.current_A, 600.0)
    charge.pack.rest(600.0)
    charge.pack.charge_As *= 0.98  # self-discharge, so that it charges again
    charge.pack.constant_current(charge.current_A, charge.limit_V)
    charge.pack.constant_voltage(charge.limit_V, 0.1 * charge.current_A, charge.current_A)
    charge.pack.rest(120.0)
    found = charge.classified()
    assert found.algorithm == "cc-cv", found.why
    assert {"float", "top-up"} <= set(found.flags)


def test_taper_alone_is_cv_only(pack: Callable[..., Any]) -> None:
    cell = pack(charge_As=5000.0)
    cell.constant_voltage(21.0, 0.1)
    cell.rest(60.0)
    found = classify(*cell.log(2, noise_A=0.002, noise_V=0.001))
    assert (found.algorithm, found.step_ratios) == ("cv-only", ())


def test_an_interruption_is_a_flag(pack: Callable[..., Any]) -> None:
    cell = pack()
    cell.constant_current(2.0, 18.0)
    cell.rest(120.0)
    cell.constant_current(2.0, 21.0)
    cell.constant_voltage(21.0, 0.2, 2.0)
    cell.rest(60.0)
    found = classify(*cell.log(2, noise_A=0.002, noise_V=0.001))
    assert (found.algorithm, found.flags) == ("cc-cv", ("interruption",))


def test_a_log_cut_at_the_knee_says_so(closed_form: Callable[..., Any]) -> None:
    log = closed_form().log(3)
    whole = classify(*log)
    knee = classify(*log[:, :3220])
    before = classify(*log[:, :3000])
    assert (knee.algorithm, knee.cutoff_current_A) == ("cc-cv", None)
    assert {"ends-at-knee", "ends-in-charge"} <= set(knee.flags)
    assert (before.algorithm, before.flags) == ("cc-only", ("ends-in-charge",))
    assert before.confidence < 0.8
    assert knee.confidence < 0.85 < whole.confidence


def test_few_samples_make_it_less_sure(closed_form: Callable[..., Any]) -> None:
    found = classify(*closed_form().log(3, period_s=200.0, rest_s=1000.0))
    assert (found.algorithm, "undersampled" in found.flags) == ("cc-cv", True)
    assert found.confidence < classify(*closed_form().log(3)).confidence - 0.1


def test_a_swinging_charger_is_flagged(pack: Callable[..., Any]) -> None:
    cell = pack()
    cell.constant_current(2.0, 21.0)
    cell.constant_voltage(21.0, 0.2, 2.0)
    cell.rest(60.0)
    time, voltage, current = cell.log(2, noise_A=0.001, noise_V=0.001)
    swing = np.where(current > 1.9, 0.2 * np.sin(2.0 * math.pi * time / 7.0), 0.0)
    found = classify(time, voltage, current + swing)
    assert "oscillation" in found.flags
    assert found.confidence < 0.9


@pytest.mark.parametrize("seed", range(5))
def test_noise_is_no_charge(seed: int) -> None:
    rng = np.random.default_rng(seed)
    found = classify(np.arange(2000.0), 18.0 + 0.001 * rng.normal(size=2000), 0.0005 * rng.normal(size=2000))
    assert (found.algorithm, found.stages) == ("no-charge", ())


def test_an_offset_within_the_meter_is_no_charge() -> None:
    rng = np.random.default_rng(1)
    current = 0.004 + 0.0001 * rng.normal(size=500)
    assert classify(np.arange(500.0), np.full(500, 18.0), current, current_u_A=0.002).algorithm == "no-charge"


def test_a_constant_reading_without_any_rise_is_not_decided() -> None:
    found = classify(np.arange(500.0), np.full(500, 18.0), np.full(500, 0.004))
    assert found.algorithm == "inconclusive"


def test_reset_times_are_left_out_and_flagged(closed_form: Callable[..., Any]) -> None:
    log = closed_form().log(3)
    log[0, [700, 3500]] = 0.0
    log[2, 100] = np.nan
    found = classify(*log)
    assert (found.algorithm, found.flags) == ("cc-cv", ("rows-not-numbers", "time-reset"))


def test_instrument_uncertainty_comes_on_top(closed_form: Callable[..., Any]) -> None:
    log = closed_form().log(3)
    alone, told = classify(*log), classify(*log, current_u_A=0.01, voltage_u_V=0.003)
    for without, with_u in zip(alone.stages, told.stages, strict=True):
        assert with_u.current_A.u == pytest.approx(math.hypot(without.current_A.u, 0.01))
        assert with_u.voltage_V.u == pytest.approx(math.hypot(without.voltage_V.u, 0.003))


def test_an_instruments_error_adds_up_over_a_stage(closed_form: Callable[..., Any]) -> None:
    """10 mA in one direction for as long as the stage lasts (JCGM 100:2008, 5.2.2), half a spacing at either end."""
    for stage in classify(*closed_form().log(3), current_u_A=0.01).stages:
        least_Ah = 0.01 * (stage.end_s - stage.start_s) / 3600.0
        assert least_Ah <= stage.charge_u_Ah <= least_Ah + 2e-3


def test_the_charge_of_a_known_log_lies_within_its_uncertainty(closed_form: Callable[..., Any]) -> None:
    """3 A for 3150 s and the taper to 0.3 A, 450 s x 2.7 A (computed from the closed form): 2.625 Ah and 0.3375 Ah."""
    for seed in range(5):
        cc, cv = (
            one for one in classify(*closed_form().log(seed), current_u_A=0.002).stages if one.kind in ("cc", "cv")
        )
        assert abs(cc.charge_Ah + cv.charge_Ah - 2.9625) <= 2 * math.hypot(cc.charge_u_Ah, cv.charge_u_Ah)


def test_the_sentence_shows_no_more_digits_than_the_uncertainty_lets_stand(closed_form: Callable[..., Any]) -> None:
    assert "a plateau of 3.000 A, then" in classify(*closed_form().log(3), current_u_A=0.01).why


def test_as_the_command_prints_it(closed_form: Callable[..., Any]) -> None:
    shown = json.loads(json.dumps(classify(*closed_form().log(3)).as_dict(), allow_nan=False))
    assert list(shown) == ["algorithm", "confidence", "stages", "voltage_limit_V", "step_ratios", "cutoff_current_A",
                           "precharge", "flags", "why"]  # fmt: skip
    assert set(shown["stages"][0]) == {"kind", "start_s", "end_s", "current_A", "voltage_V", "charge_Ah", "charge_u_Ah"}
    assert set(shown["voltage_limit_V"]) == {"value", "u"}


NUMBERS = st.floats(-1e3, 1e3) | st.sampled_from([0.0, 1.0, math.nan, math.inf])


@settings(max_examples=100)
@given(st.lists(st.tuples(NUMBERS, NUMBERS, NUMBERS), max_size=40))
def test_any_log_gets_an_answer(rows: list[tuple[float, float, float]]) -> None:
    columns = np.array(rows, dtype=float).reshape(-1, 3).T
    found = classify(*columns)
    assert 0.0 <= found.confidence < 1.0
    json.dumps(found.as_dict(), allow_nan=False)


def test_an_empty_log_is_inconclusive() -> None:
    assert classify([], [], []).algorithm == "inconclusive"


def test_impossible_uncertainty_is_refused_by_name() -> None:
    with pytest.raises(ValueError, match=r"^voltage_u_V: "):
        classify([0.0], [0.0], [0.0], voltage_u_V=-1.0)


def test_a_hundred_thousand_rows_take_well_under_a_second(closed_form: Callable[..., Any]) -> None:
    log = closed_form().log(1, period_s=0.0438)
    assert log.shape[1] > 100_000
    started = perf_counter()
    assert classify(*log).algorithm == "cc-cv"
    assert perf_counter() - started < 1.0
