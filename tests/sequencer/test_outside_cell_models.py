"""Classification of charges of physics-based cell models that nobody here wrote: PyBaMM 26.10 and its published cells.

The single-particle model with electrolyte (SPMe) of PyBaMM, with parameter sets that ship with it, each named after its
publication (all in J. Electrochem. Soc.):

    Chen2020     C.-H. Chen et al., 167 (2020) 080534: nickel-rich oxide against graphite with silicon
    Marquis2019  S. G. Marquis et al., 166 (2019) A3693: cobalt oxide against graphite
    Prada2013    E. Prada et al., 160 (2013) A616: iron phosphate against graphite
    Ai2020       W. Ai et al., 167 (2020) 013512: cobalt oxide against graphite
    Ecker2015    M. Ecker et al., 162 (2015) A1836: nickel-cobalt oxide against graphite

What the charger does is what the model was told to do; what the log looks like is the model's. Tolerances as of the
published logs: currents within 1 %, limits within 10 mV, cut-off within 5 %, and what the spacing of the rows hides.

Left out of a plain run: PyBaMM takes 800 MB. `pip install -e ".[test,outside]"`, then `pytest -m pybamm`.
"""

from __future__ import annotations

import socket
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
import pytest

from sequencer.analysis.classify import Classification, classify

# What PyBaMM and its solvers warn of is theirs.
pytestmark = [pytest.mark.pybamm, pytest.mark.filterwarnings("default")]


@pytest.fixture(autouse=True, scope="module")
def no_network() -> Iterator[None]:
    """PyBaMM would tell its makers of each use; here nothing leaves the machine, and a try is a fault."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("PYBAMM_DISABLE_TELEMETRY", "true")

        def refused(*_: object) -> None:
            raise AssertionError("a cell model asked for the network")

        patch.setattr(socket.socket, "connect", refused)
        yield


@dataclass(frozen=True)
class Cell:
    """A published parameter set; the voltages that end a pre-charge, and from which on the charger's power is short."""

    name: str
    precharge_V: float
    power_V: float


CELLS = [
    Cell("Chen2020", 3.0, 3.9),
    Cell("Marquis2019", 3.2, 3.8),
    Cell("Prada2013", 2.6, 3.43),
    Cell("Ai2020", 3.2, 3.9),
    Cell("Ecker2015", 3.0, 3.9),
]


@dataclass(frozen=True)
class Charge:
    """Levels as (share of the capacity in A, how far below the limit it ends in V); what follows; what must be seen."""

    algorithm: str
    levels: tuple[tuple[float, float], ...] = ()
    power: float | None = None  # as a current at the cell's power_V, share of the capacity in A
    held: bool = False  # at the limit down to CUTOFF
    precharge: bool = False


CUTOFF = 0.05  # of the capacity in A
PRECHARGE = 0.05
CHARGES = {
    "cc-cv at C/2": Charge("cc-cv", ((0.5, 0.0),), held=True),
    "cc-cv at 1 C": Charge("cc-cv", ((1.0, 0.0),), held=True),
    "cc only": Charge("cc-only", ((0.5, 0.0),)),
    "two levels": Charge("stepped-cc", ((1.0, 0.05), (0.5, 0.0))),
    "three levels": Charge("stepped-cc", ((1.0, 0.1), (0.6, 0.05), (0.3, 0.0))),
    "three levels, one threshold": Charge("stepped-cc", ((1.0, 0.0), (0.5, 0.0), (0.25, 0.0))),
    "two levels, then held": Charge("stepped-cc-cv", ((1.0, 0.1), (0.5, 0.0)), held=True),
    "power, then held": Charge("cc-cv", power=0.5, held=True),
    "power only": Charge("constant-power", power=0.5),
    "limited in power, at C/2": Charge("cc-cv", ((0.5, 0.0),), power=0.5, held=True),
    "limited in power, at 0.8 C": Charge("cc-cv", ((0.8, 0.0),), power=0.8, held=True),
    "pre-charge, then cc-cv": Charge("cc-cv", ((0.5, 0.0),), held=True, precharge=True),
}


@dataclass(frozen=True)
class Log:
    """What the model did, one row a second; `end`: last row with current."""

    time_s: np.ndarray
    voltage_V: np.ndarray
    current_A: np.ndarray
    capacity_Ah: float
    limit_V: float

    @property
    def end(self) -> int:
        return int(np.flatnonzero(self.current_A > 0.0)[-1])

    def every(self, period_s: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        time_s = np.arange(0.0, self.time_s[-1], period_s)
        rows = np.searchsorted(self.time_s, time_s - 1e-6)
        return time_s, self.voltage_V[rows], self.current_A[rows]

    def moved(self, column: np.ndarray, period_s: int) -> float:
        """How far a quantity moves between two rows just before the charge ends."""
        before = int(np.searchsorted(self.time_s, self.time_s[self.end] - period_s))
        return abs(float(column[self.end] - column[before]))


@cache
def charged(cell: Cell, charge: str) -> Log:
    import pybamm

    pybamm.set_logging_level("ERROR")
    values: Any = pybamm.ParameterValues(cell.name)
    capacity = float(values["Nominal cell capacity [A.h]"])
    limit = float(values["Upper voltage cut-off [V]"])
    steps = tuple(_steps(cell, CHARGES[charge], capacity, limit))
    experiment = pybamm.Experiment([steps], period="1 second")
    simulation = pybamm.Simulation(pybamm.lithium_ion.SPMe(), parameter_values=values, experiment=experiment)
    solution = simulation.solve(initial_soc=0.0 if CHARGES[charge].precharge else 0.05)
    columns = [solution[name].entries for name in ("Time [s]", "Voltage [V]", "Current [A]")]
    return Log(columns[0], columns[1], -columns[2], capacity, limit)  # there, discharge is positive


def _steps(cell: Cell, charge: Charge, capacity: float, limit: float) -> Iterator[str]:
    if charge.precharge:
        yield f"Charge at {PRECHARGE * capacity:.6g} A until {cell.precharge_V} V"
    for share, below in charge.levels:
        until = limit - below if charge.power is None else cell.power_V
        yield f"Charge at {share * capacity:.6g} A until {until:.6g} V"
    if charge.power is not None:
        yield f"Charge at {charge.power * capacity * cell.power_V:.6g} W until {limit} V"
    if charge.held:
        yield f"Hold at {limit} V until {CUTOFF * capacity:.6g} A"
    yield "Rest for 10 minutes"


NOISES = {"exact": (0.0, 0.0, 0.0, 0.0), "fine": (2e-4, 1e-3, 1e-4, 1e-4), "coarse": (4e-4, 2e-3, 1e-3, 1e-3)}


def read(log: Log, period_s: int, noise: str) -> Classification:
    """As a meter shows it: noise and last digit, V and share of the capacity in A, by a fixed seed."""
    time_s, voltage_V, current_A = log.every(period_s)
    noise_V, noise_share, digit_V, digit_share = NOISES[noise]
    rng = np.random.default_rng([period_s, len(noise)])
    if noise != "exact":
        digit_A = digit_share * log.capacity_Ah
        voltage_V = np.round((voltage_V + noise_V * rng.normal(size=time_s.size)) / digit_V) * digit_V
        current_A = current_A + noise_share * log.capacity_Ah * rng.normal(size=time_s.size)
        current_A = np.round(current_A / digit_A) * digit_A
    return classify(time_s, voltage_V, current_A)


@pytest.mark.parametrize("noise", NOISES)
@pytest.mark.parametrize("period_s", [1, 10])
@pytest.mark.parametrize("charge", CHARGES)
@pytest.mark.parametrize("cell", CELLS, ids=lambda cell: cell.name)
def test_what_the_model_was_told(cell: Cell, charge: str, period_s: int, noise: str) -> None:
    pytest.importorskip("pybamm", reason="install the extra 'outside'")
    told, log = CHARGES[charge], charged(cell, charge)
    found = read(log, period_s, noise)
    assert found.algorithm == told.algorithm, found.why
    assert found.precharge is told.precharge
    levels = [PRECHARGE] * told.precharge + [share for share, _ in told.levels]
    shown = [stage.current_A.value / log.capacity_Ah for stage in found.stages if stage.kind in ("precharge", "cc")]
    assert shown == pytest.approx(levels, rel=0.01)
    assert found.voltage_limit_V is not None
    hidden_V = 0.0 if told.held else log.moved(log.voltage_V, period_s)
    assert found.voltage_limit_V.value == pytest.approx(log.limit_V, abs=0.010 + hidden_V)
    if told.held:
        assert found.cutoff_current_A is not None
        hidden_A = log.moved(log.current_A, period_s) + 4.0 * NOISES[noise][1] * log.capacity_Ah
        cutoff_A = CUTOFF * log.capacity_Ah
        assert found.cutoff_current_A.value == pytest.approx(cutoff_A, abs=max(0.05 * cutoff_A, hidden_A))
    else:
        assert found.cutoff_current_A is None
    _flags_tell(found, told, cell, log, period_s)


def _flags_tell(found: Classification, told: Charge, cell: Cell, log: Log, period_s: int) -> None:
    """A power limit is told where at least thirty rows show it; no flag tells of what was not there."""
    flags = set(found.flags) - {"noisy", "undersampled"}
    if told.power is None or told.algorithm == "constant-power":
        assert flags == set()
        return
    power_W = told.power * log.capacity_Ah * cell.power_V
    limited = np.abs(log.voltage_V * log.current_A / power_W - 1.0) < 1e-3
    assert flags <= {"power-limited"}
    if np.count_nonzero(limited) >= 30 * period_s:
        assert flags == {"power-limited"}
