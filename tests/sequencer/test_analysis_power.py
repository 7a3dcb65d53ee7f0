"""Where a charger's power is short: P / V with and without a plateau before it, and what is no limit in power."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sequencer.analysis.classify import classify
from sequencer.analysis.power import holds_power, onset_of_limit, power_of
from sequencer.analysis.sanitise import sanitise
from sequencer.analysis.trace import Trace, trace_of

# Open-circuit voltage of an iron phosphate cell at 0, 10, ... 100 %: hardly moves from 20 to 90 %.
# A public repository's battery tables, https://docs.zephyrproject.org/apidoc/latest/dt-bindings_2battery_2battery_8h_source.html
FLAT_V = [2.013, 3.068, 3.159, 3.194, 3.210, 3.221, 3.229, 3.246, 3.256, 3.262, 3.348]
STEEP_V = [3.0, 3.45, 3.55, 3.61, 3.67, 3.73, 3.82, 3.9, 4.0, 4.08, 4.2]


@dataclass(frozen=True)
class Limited:
    """min(plateau, P / V) into a cell of 1 Ah and 50 mΩ, a row every 5 s."""

    ocv_V: list[float]
    plateau_A: float
    watts: float
    soc: float = 0.05

    def log(self, noise: float = 0.0, seed: int = 1) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        soc, rows = self.soc, list[tuple[float, float]]()
        while soc < 0.97:
            e = float(np.interp(soc, np.linspace(0.0, 1.0, 11), self.ocv_V))
            current = min(self.plateau_A, (np.sqrt(e * e + 0.2 * self.watts) - e) / 0.1)
            rows.append((e + 0.05 * current, current))
            soc += current * 5.0 / 3600.0
        voltage, current_A = np.array([*rows, *[(rows[-1][0] - 0.05, 0.0)] * 60]).T
        rng = np.random.default_rng(seed)
        return (
            5.0 * np.arange(current_A.size),
            voltage * (1.0 + 0.05 * noise * rng.normal(size=voltage.size)),
            current_A + noise * self.plateau_A * rng.normal(size=voltage.size),
        )

    def onset(self) -> int:
        """First row at the limit."""
        return int(np.argmax(self.log()[2] < self.plateau_A))

    def trace(self) -> Trace:
        return trace_of(sanitise(*self.log()), current_u_A=None, voltage_u_V=None)


FEW = settings(max_examples=25)
NOISE = st.sampled_from([0.0, 0.0005, 0.002])


@FEW
@given(st.floats(3.5, 4.0), NOISE, st.integers(0, 2**32 - 1))
def test_a_plateau_and_then_the_limit(crossing_V: float, noise: float, seed: int) -> None:
    """However short the plateau is against the slope after it: here from 7 % to 80 % of the charge."""
    charge = Limited(STEEP_V, 0.5, 0.5 * crossing_V)
    found = classify(*charge.log(noise, seed))
    assert [stage.kind for stage in found.stages if stage.kind != "rest"] == ["cc", "constant-power"], found.why
    assert found.stages[0].current_A.value == pytest.approx(0.5, rel=0.005)
    # the row at which the voltage stands as far below the crossing as the noise hides, or 0.2 %
    near = crossing_V * (1.0 - max(0.002, 6.0 * noise) - 1e-3)
    voltage = charge.log()[1]
    first_s, last_s = 5.0 * int(np.argmax(voltage > near)), 5.0 * int(np.argmax(voltage > 2 * crossing_V - near))
    assert first_s <= found.stages[0].end_s <= last_s


@FEW
@given(st.floats(0.3, 0.9), NOISE, st.integers(0, 2**32 - 1))
def test_one_power_is_one_stage_where_the_voltage_hardly_moves(rate: float, noise: float, seed: int) -> None:
    found = classify(*Limited(FLAT_V, 10.0, 3.2 * rate, soc=0.1).log(noise * rate / 10.0, seed))
    assert found.algorithm == "constant-power", found.why
    assert [stage.kind for stage in found.stages if stage.kind != "rest"] == ["constant-power"]
    assert found.flags == ()


@FEW
@given(st.floats(0.3, 0.9), NOISE, st.integers(0, 2**32 - 1))
def test_one_current_is_no_power_where_the_voltage_hardly_moves(rate: float, noise: float, seed: int) -> None:
    found = classify(*Limited(FLAT_V, rate, 1e3, soc=0.3).log(noise, seed))
    assert found.algorithm == "cc-only", found.why
    assert [stage.kind for stage in found.stages if stage.kind != "rest"] == ["cc"]


def test_the_onset_is_the_row_at_which_the_plateau_is_left() -> None:
    charge = Limited(STEEP_V, 0.5, 0.5 * 3.8)
    trace, onset = charge.trace(), charge.onset()
    stop = int(np.argmax(trace.current_A <= 0.0))
    watts = power_of(trace, onset, stop)
    assert watts == pytest.approx(1.9, rel=1e-9)
    found = onset_of_limit(trace, 0, stop, watts)
    assert found is not None
    assert trace.voltage_V[found] == pytest.approx(3.8, rel=0.003)  # 0.2 % below P / V counts as at the limit
    assert onset_of_limit(trace, 0, stop, 1.05 * watts) is None


@pytest.mark.parametrize(("rise", "held"), [(0.025, True), (0.0, False), (-0.02, False)])
def test_a_small_fall_is_a_power_only_where_the_voltage_makes_up_for_it(rise: float, held: bool) -> None:
    """The current falls by 2.4 %: with the voltage rising by as much, standing still, or falling too (a foldback)."""
    share = np.linspace(0.0, 1.0, 200)
    voltage, current = 18.0 * (1.0 + rise * share), 2.0 / (1.0 + 0.025 * share)
    trace = trace_of(sanitise(np.arange(200.0), voltage, current), current_u_A=None, voltage_u_V=None)
    assert holds_power(trace, 0, 200) is held
