"""Chargers whose edges, windows and trips are shifted by a drawn size: the limit concerned fails, and no other.

Sizes are drawn by a printed seed, beyond what an interval can hide (its width and twice U); half of U never passes.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest

Rehearse = Callable[..., Any]
SEED = 20261201
BAND = {"  - {id: [0.90 kΩ, 1.10 kΩ], current: 1.5 A ± 5 %}\n": ""}
# One band, with limits for both of its edges.
EDGES = {
    **BAND,
    "{id: [2.70 kΩ, 3.30 kΩ], current: 3.0 A ± 5 %}": (
        "{id: [2.70 kΩ, 3.30 kΩ], current: 3.0 A ± 5 %, lower_edge: [2.30 kΩ, 2.60 kΩ], upper_edge: [3.50 kΩ, 3.90 kΩ]}"
    ),
}


def drawn(name: str) -> float:
    """A number from 0 to 1 for a defect; the seed is printed with what it made."""
    value = float(np.random.default_rng([SEED, *name.encode()]).uniform())
    print(f"seed {SEED}, {name}: {value:.3f}")
    return value


@dataclass(frozen=True)
class Shift:
    """One end moved past its limit: `at(size)` is the charger, size 0 to 1 the share of the range drawn from."""

    limit: str
    procedure: str
    charger: Callable[[float], dict[str, str]]
    also: tuple[str, ...] = ()


def _bands(low_kohm: float, high_kohm: float) -> dict[str, str]:
    return {"id_bands": f"[{{id: [{low_kohm:.4f} kΩ, {high_kohm:.4f} kΩ], current: 3.0 A}}]"}


def _window(start: tuple[float, float] = (3.0, 45.0), run: tuple[float, float] = (0.0, 50.0)) -> dict[str, str]:
    """10 kΩ at 25 °C, B = 3435 K: R = 10 kΩ exp(B (1/T - 1/298.15 K)), written out here (computed)."""

    def ohm(celsius: float) -> str:
        return f"{10e3 * np.exp(3435.0 * (1 / (celsius + 273.15) - 1 / 298.15)):.1f} Ω"

    ends = [f"{name}: [{ohm(low)}, {ohm(high)}]" for name, (low, high) in (("start", start), ("run", run))]
    return {"temperature": f"{{pull_up: 10 kΩ, reference: 3.3 V, filter: 100 ms, {', '.join(ends)}, hysteresis: 6 %}}"}


def _trip(threshold_V: float, cells: str = "all") -> dict[str, str]:
    text = f"{{threshold: {threshold_V:.4f} V, filter: 0.5 s, hysteresis: 50 mV, latch: true, cells: {cells}}}"
    return {"tap_monitor": text}


def long(shift: Shift) -> Any:
    """One of each kind is enough for every run of the suite."""
    return pytest.param(shift, marks=pytest.mark.benchmark)


SHIFTS = [
    Shift("id.band1.lower_edge", "id-bands", lambda size: _bands(2.24 - 0.25 * size, 3.70)),
    long(Shift("id.band1.upper_edge", "id-bands", lambda size: _bands(2.45, 3.98 + 0.5 * size))),
    Shift("temperature.start_low", "temperature-window", lambda size: _window(start=(0.3 - 0.2 * size, 45.0))),
    long(Shift("temperature.start_high", "temperature-window", lambda size: _window(start=(3.0, 47.8 + 1.5 * size)))),
    long(Shift("temperature.run_low", "temperature-window", lambda size: _window(run=(-2.8 - 5.0 * size, 50.0)))),
    Shift("temperature.run_high", "temperature-window", lambda size: _window(run=(0.0, 52.8 + 5.0 * size))),
]


@pytest.mark.parametrize("shift", SHIFTS, ids=lambda shift: shift.limit)
def test_a_limit_shifted_outward_fails_and_no_other(rehearse_full: Rehearse, shift: Shift) -> None:
    found = rehearse_full(shift.procedure, spec_text=EDGES, charger=shift.charger(drawn(shift.limit)))
    assert found.failing == {shift.limit}, found.verdict(shift.limit)["why"]
    assert found.judged.exit_status == 1


CURRENT, START = ("id.band1.current",), ("temperature.start_high",)
INWARD = [
    # The band's own end selects nothing then: its current fails beside the edge, for the same reason.
    long(Shift("id.band1.lower_edge", "id-bands", lambda size: _bands(2.73 + 0.08 * size, 3.70), CURRENT)),
    Shift("id.band1.upper_edge", "id-bands", lambda size: _bands(2.45, 3.26 - 0.10 * size), CURRENT),
    Shift("temperature.start_low", "temperature-window", lambda size: _window(start=(5.8 + 8.0 * size, 45.0))),
    long(Shift("temperature.run_high", "temperature-window", lambda size: _window((3, 40), (0, 47 - 6 * size)), START)),
]


@pytest.mark.parametrize("shift", INWARD, ids=lambda shift: shift.limit)
def test_a_limit_shifted_inward_fails(rehearse_full: Rehearse, shift: Shift) -> None:
    found = rehearse_full(shift.procedure, spec_text=EDGES, charger=shift.charger(drawn(f"in {shift.limit}")))
    assert shift.limit in found.failing, found.verdict(shift.limit)["why"]
    assert found.failing <= {shift.limit, *shift.also}


@pytest.mark.parametrize("sign", [-1, pytest.param(1, marks=pytest.mark.benchmark)])
def test_a_shifted_tap_threshold_fails_on_every_cell(rehearse_full: Rehearse, sign: int) -> None:
    """Limits 4.20 V and 4.28 V, steps of 10 mV, U of 3 to 7 mV: from 25 mV beyond it must be seen."""
    beyond_V = 0.025 + 0.03 * drawn(f"tap {sign}")
    found = rehearse_full("tap-offset", charger=_trip((4.20 if sign < 0 else 4.28) + sign * beyond_V))
    assert found.failing == {f"tap_trip.cell{cell}.voltage" for cell in range(1, 6)}


def test_one_cell_that_nobody_monitors_fails_alone(rehearse_full: Rehearse) -> None:
    lost = 1 + int(5 * drawn("cell"))
    cells = [cell for cell in range(1, 6) if cell != lost]
    found = rehearse_full("tap-offset", charger=_trip(4.24, str(cells)))
    assert found.failing == {f"tap_trip.cell{lost}.voltage", f"tap_trip.cell{lost}.stop_time"}
    assert "went on with the cell at 4.4" in found.verdict(f"tap_trip.cell{lost}.voltage")["why"]


def test_half_the_uncertainty_beyond_a_limit_is_no_pass(rehearse_full: Rehearse) -> None:
    """U of the upper edge at 3.9 kΩ is about 4 Ω, of a window's cold end 30 Ω, of a cell's trip 3 mV."""
    trip = rehearse_full("tap-offset", charger=_trip(4.2815))
    words = {trip.verdict(f"tap_trip.cell{cell}.voltage")["verdict"] for cell in range(1, 6)}
    assert "pass" not in words


@pytest.mark.benchmark
def test_half_the_uncertainty_beyond_the_limit_of_an_edge_is_no_pass(rehearse_full: Rehearse) -> None:
    edge = rehearse_full("id-bands", spec_text=EDGES, charger=_bands(2.45, 3.9020))
    assert edge.verdict("id.band1.upper_edge")["verdict"] in ("conditional pass", "conditional fail", "fail")


def test_a_charger_that_charges_open_and_shorted_fails(rehearse_full: Rehearse) -> None:
    """It does not read the ID at all: no edge is found, and nothing is refused."""
    found = rehearse_full("id-bands", spec_text=BAND, charger={"id": "", "id_bands": "[]"})
    assert found.failing == {"id.outside", "id.open", "id.short", "id.band1.lower_edge", "id.band1.upper_edge"}


def test_a_charger_that_never_stops_for_temperature_fails(rehearse_full: Rehearse) -> None:
    found = rehearse_full("temperature-window", charger=_window(start=(-39, 110), run=(-39.5, 115)))
    sides = {f"temperature.{side}" for side in ("start_low", "start_high", "run_low", "run_high")}
    assert sides <= found.failing
    assert "went on as far as -5.00 °C" in found.verdict("temperature.run_low")["why"]
