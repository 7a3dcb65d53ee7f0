"""CC-CV and stepped CC in closed form, through the whole chain: bench, engine, record, analysis.

Source of every expected figure: computed, textbook relation. A pack whose open-circuit voltage is a straight line
over charge is a capacity Ce = dq/dV behind a resistance R, so that

    t_cc = Ce (V - I0 R - E0) / I0,  I(t) = I0 exp(-t / tau) with tau = R Ce,  t_cv = tau ln(I0 / I_term),

for 3 Ah over 3.0 ... 4.2 V, R = 50 mΩ, 3 A / 4.2 V / 0.3 A: 3150 s, 450 s, 1036.16 s, 2.9625 Ah, 11.064375 Wh a cell.

Tolerances, none of them fitted: the loop looks once a second (T); the stand-in follows with a lag T/a, which the
record states; the charger decides 0.2 s late (its filter); the supply is not moved by less than 0.5 mV, which is a
step of 0.5 mV / Rp in the current and can put the end off by tau x step / I_term. The bench is ideal (errors: 0).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from sequencer.engine.evidence import Trace, open_evidence

T_s = 1.0  # quiet pace
RESPONSE_s = 0.2
SMALLEST_MOVE_V = 0.5e-3
TAU_s, I0_A, END_A = 450.0, 3.0, 0.3
T_CC_s, T_CV_s = 3150.0, TAU_s * np.log(I0_A / END_A)

PACK = """packmime: pack 1
name: straight line
cells: {cells}
capacity: 3 Ah
ocv: [[0 %, 3.0 V], [100 %, 4.2 V]]
resistance: {mohm} mΩ
rated_current: 3 A
"""
SPECIFICATION = """packmime: specification 1
model: closed form
pack: {pack}
dwell: {{start_delay: 1 s, clear: 1 s, response: 0.2 s}}
charge:
"""
CC_CV = """  algorithm: cc-cv
  stages: [{current: 3 A ± 5 %}]
  voltage_per_cell: 4.2 V ± 25 mV
  cutoff: 0.3 A ± 20 %
  ends: true
"""
STEPPED = """  algorithm: stepped-cc
  stages: [{current: 3 A ± 5 %}, {current: 1.5 A ± 5 %}, {current: 0.75 A ± 5 %}]
  ends: true
"""


@dataclass(frozen=True)
class Run:
    """What the record of one full charge holds; charge and energy up to each reading."""

    rehearsed: Any
    time_s: np.ndarray
    current_A: np.ndarray
    voltage_V: np.ndarray
    standin: dict[str, Any]

    @property
    def lag_s(self) -> float:
        return float(self.standin["quiet"]["lag_s"])

    def charge_Ah(self, start: int, stop: int) -> float:
        """The supply holds the node between two scans, so what a scan reads has flowed since the one before."""
        spacing_s = np.diff(self.time_s)[start:stop]
        return float(np.sum(self.current_A[start + 1 : stop + 1] * spacing_s)) / 3600.0

    def energy_Wh(self, start: int, stop: int) -> float:
        power_W = (self.current_A * self.voltage_V)[start + 1 : stop + 1]
        return float(np.sum(power_W * np.diff(self.time_s)[start:stop])) / 3600.0

    def steps(self, least_A: float) -> np.ndarray:
        """Index of the last reading before each step of the current by more than `least_A`."""
        return np.flatnonzero(np.abs(np.diff(self.current_A)) > least_A)


@pytest.fixture
def full_charge(rehearse: Callable[..., Any], tmp_path: Path) -> Callable[..., Run]:
    def charging(like: str, cells: int, ballast: str, charge: str, **charger: str) -> Run:
        pack, spec = tmp_path / "straight.yaml", tmp_path / f"{like}.yaml"
        pack.write_text(PACK.format(cells=cells, mohm=50 * cells), "utf-8")
        spec.write_text(SPECIFICATION.format(pack=pack.name) + charge, "utf-8")
        done = rehearse(
            spec=str(spec),
            charger={"cells": str(cells), "response": "0.2 s", "start_delay": "1 s", **charger},
            bench={"ballast: 100 mΩ": ballast, "errors: 1": "errors: 0", "5 Ah}": "5 Ah, equal_readings: 0}"},
            changes={"start": "3.0 V", "compression": "1", "after": "10 s"},
        )
        evidence = open_evidence(done.record)
        # where nothing is declared to end the charge, the mains are cycled after it: that is no part of it
        window = evidence.window("charge")
        assert window is not None
        current, voltage = (
            evidence.trace(name).within(0.0, window.end_s) for name in ("charger.current", "charger.voltage")
        )
        assert np.array_equal(current.time_s, voltage.time_s)
        return Run(done, current.time_s, current.value, voltage.value, evidence.manifest["standin"])

    return charging


@pytest.mark.parametrize(("cells", "ballast"), [(1, "ballast: 20 mΩ"), (5, "ballast: 150 mΩ")])
def test_cc_cv(full_charge: Callable[..., Run], cells: int, ballast: str) -> None:
    run = full_charge("sprayer", cells, ballast, CC_CV)
    first, last = run.steps(0.2)[[0, -1]]
    knee = int(np.flatnonzero(run.current_A > I0_A * (1 - 1e-4))[-1])
    late_s = TAU_s * SMALLEST_MOVE_V / run.standin["Rp_ohm"] / END_A + RESPONSE_s + 2 * T_s

    t_cc_s = run.time_s[knee] - run.time_s[first]
    assert -T_s <= t_cc_s - T_CC_s <= run.lag_s + 2 * T_s
    t_cv_s = run.time_s[last] - run.time_s[knee]
    assert -2 * T_s <= t_cv_s - T_CV_s <= late_s

    taper = Trace(run.time_s, run.current_A).within(run.time_s[knee] + 20, run.time_s[last] - 5)
    tau_s = -1.0 / np.polyfit(taper.time_s, np.log(taper.value), 1)[0]
    # Charge that flows in steps of T: I_k+1 = I_k (1 - T/tau), whose time constant is tau - T/2 to first order.
    assert tau_s == pytest.approx(TAU_s - T_s / 2, abs=T_s)

    more_Ah = END_A * (late_s + run.lag_s) / 3600.0
    assert -I0_A * 0.1 / 3600.0 <= run.charge_Ah(first, last) - 2.9625 <= more_Ah
    assert run.energy_Wh(first, last) / cells == pytest.approx(11.064375, abs=4.2 * more_Ah)
    assert run.voltage_V[knee + 5 : last] / cells == pytest.approx(4.2, abs=1e-4)

    # and it is read as what it is
    assert set(run.rehearsed.verdicts.values()) <= {"pass", "not applicable"}
    for limit, true in (("charge.stage1.current", 3.0), ("charge.voltage", 4.2), ("charge.cutoff", 0.3)):
        verdict = run.rehearsed.verdict(limit)
        assert verdict["value"] == pytest.approx(true, abs=verdict["k"] * verdict["u"]), limit


def test_stepped_cc(full_charge: Callable[..., Run]) -> None:
    stages = ", ".join(f"{{current: {current} A, until: 4.2 V}}" for current in (3, 1.5, 0.75))
    run = full_charge("lantern", 5, "ballast: 150 mΩ", STEPPED, stages=f"[{stages}]")
    edges = run.steps(0.2)
    assert len(edges) == 4
    # dq = Ce R (I_before - I); times 3150, 450, 450 s (computed)
    expected = [(3, 2.625, 3150), (1.5, 0.1875, 450), (0.75, 0.09375, 450)]
    for (current_A, charge_Ah, time_s), (begun, ended) in zip(expected, pairwise(edges), strict=True):
        # the node is behind by the lag at the start of each stage and at its end, and one scan at either edge
        assert run.time_s[ended] - run.time_s[begun] == pytest.approx(time_s, abs=run.lag_s + 2 * T_s)
        assert run.charge_Ah(begun, ended) == pytest.approx(charge_Ah, abs=current_A * (run.lag_s + 2 * T_s) / 3600.0)
        assert run.current_A[begun + 2 : ended] == pytest.approx(current_A, abs=1e-4)
        assert run.voltage_V[ended] / 5 == pytest.approx(4.2, abs=1e-3)
    assert run.rehearsed.verdicts["charge.algorithm"] == "pass"
    assert run.rehearsed.verdicts["charge.ends"] == "pass"
