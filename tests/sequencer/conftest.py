"""Charges whose truth is known: a pack with a straight OCV line, stepped through time, and the closed form of CC-CV."""

import math
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
import pytest


@dataclass
class Pack:
    """OCV = empty_V + slope_V_per_As q, behind R; `grid_V` makes the OCV move in steps, as an instrument plays it.

    Each method appends rows (time, terminal voltage, current) one period apart.
    """

    empty_V: float = 15.0
    capacity_Ah: float = 2.0
    resistance_ohm: float = 0.15
    span_V: float = 6.25
    period_s: float = 1.0
    grid_V: float = 0.0
    charge_As: float = 0.0
    time_s: float = 0.0
    rows: list[tuple[float, float, float]] = field(default_factory=list)

    @property
    def ocv_V(self) -> float:
        level = self.empty_V + self.span_V * self.charge_As / (3600.0 * self.capacity_Ah)
        return math.floor(level / self.grid_V) * self.grid_V if self.grid_V else level

    def terminal_V(self, current_A: float) -> float:
        return self.ocv_V + current_A * self.resistance_ohm

    def put(self, current_A: float) -> None:
        self.rows.append((self.time_s, self.terminal_V(current_A), current_A))
        self.time_s += self.period_s
        self.charge_As += current_A * self.period_s

    def rest(self, duration_s: float) -> None:
        for _ in range(int(duration_s / self.period_s)):
            self.put(0.0)

    def flow(self, current_A: float, duration_s: float) -> None:
        for _ in range(max(1, round(duration_s / self.period_s))):
            self.put(current_A)

    def constant_current(self, current_A: float, until_V: float) -> None:
        while self.terminal_V(current_A) < until_V:
            self.put(current_A)

    def constant_voltage(self, level_V: float, until_A: float, most_A: float = math.inf) -> None:
        while (current := min(most_A, (level_V - self.ocv_V) / self.resistance_ohm)) >= until_A:
            self.put(current)

    def constant_power(self, power_W: float, until_V: float) -> float:
        while True:
            e, r = self.ocv_V, self.resistance_ohm
            current = (math.sqrt(e * e + 4.0 * r * power_W) - e) / (2.0 * r)
            if self.terminal_V(current) >= until_V:
                return current
            self.put(current)

    def foldback(self, from_A: float, to_A: float, duration_s: float) -> None:
        for share in np.linspace(0.0, 1.0, max(10, int(duration_s / self.period_s))):
            self.put(from_A + (to_A - from_A) * float(share))

    def steps_at_voltage(self, level_V: float, from_A: float, step_A: float, until_A: float) -> None:
        """A charger that regulates in digital steps: one step down each time the voltage is reached."""
        current = from_A
        while current > until_A:
            self.constant_current(current, level_V)
            current -= step_A

    def log(self, seed: int, *, noise_A: float = 0.0, noise_V: float = 0.0, digit_A: float = 0.0) -> np.ndarray:
        """time_s, voltage_V, current_A as three rows, with meter noise and last digit."""
        time, voltage, current = np.array(self.rows).T
        rng = np.random.default_rng(seed)
        current = current + noise_A * rng.normal(size=current.size)
        voltage = voltage + noise_V * rng.normal(size=voltage.size)
        if digit_A:
            current = np.round(current / digit_A) * digit_A
        return np.array([time, voltage, current])


@dataclass(frozen=True)
class ClosedForm:
    """CC-CV on a cell with a straight OCV line: 3 Ah, 3.0 to 4.2 V, 9000 F, 50 mΩ, 3 A, 4.2 V, 0.3 A (computed).

    compressed: how many times faster the state of charge moves.
    """

    compressed: float = 1.0
    E0_V: float = 3.0
    R_ohm: float = 0.05
    I0_A: float = 3.0
    limit_V: float = 4.2
    cutoff_A: float = 0.3

    @property
    def capacitance_F(self) -> float:
        return 9000.0 / self.compressed

    @property
    def cc_s(self) -> float:
        return self.capacitance_F * (self.limit_V - self.I0_A * self.R_ohm - self.E0_V) / self.I0_A

    @property
    def tau_s(self) -> float:
        return self.R_ohm * self.capacitance_F

    @property
    def cv_s(self) -> float:
        return self.tau_s * math.log(self.I0_A / self.cutoff_A)

    def current_A(self, time_s: np.ndarray) -> np.ndarray:
        tail = self.I0_A * np.exp(-np.maximum(0.0, time_s - self.cc_s) / self.tau_s)
        return np.where(time_s <= self.cc_s + self.cv_s, tail, 0.0)

    def voltage_V(self, time_s: np.ndarray) -> np.ndarray:
        rising = self.E0_V + self.I0_A * time_s / self.capacitance_F + self.I0_A * self.R_ohm
        held = np.where(time_s <= self.cc_s, rising, self.limit_V)
        return np.where(time_s <= self.cc_s + self.cv_s, held, self.limit_V - self.cutoff_A * self.R_ohm)

    def log(
        self, seed: int, *, period_s: float = 1.0, noise_A: float = 2e-3, noise_V: float = 5e-4, rest_s: float = 200.0
    ) -> np.ndarray:
        time = np.arange(0.0, self.cc_s + self.cv_s + rest_s, period_s)
        rng = np.random.default_rng([seed, round(1000.0 * period_s), round(self.compressed)])
        voltage = self.voltage_V(time) + noise_V * rng.normal(size=time.size)
        return np.array([time, voltage, self.current_A(time) + noise_A * rng.normal(size=time.size)])


@pytest.fixture(scope="session")
def pack() -> Callable[..., Pack]:
    """Makes a pack to be charged."""
    return Pack


@pytest.fixture(scope="session")
def closed_form() -> Callable[..., ClosedForm]:
    """Makes the CC-CV charge that is known in closed form."""
    return ClosedForm
