"""How often a stated interval holds the true edge: 100 seeded chargers on benches with seeded errors.

The interval is the bracket widened by U at both ends (k for about 95 % coverage, JCGM 100:2008, 6.2): at least 95 of
100 must hold what the charger file says. Procedures are cut down to one edge each.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

pytestmark = pytest.mark.benchmark
Rehearse = Callable[..., Any]
SEED = 7
PROCEDURE = """packmime: procedure 1
name: {name}
purpose: Finds one thing, as shortly as it can be found.
steps:
  - insert: {{cell_voltage: 3.70 V}}
    expect: charges
  - remove: {{}}
  - {step}
judge: [charges, {judge}]
"""
# so narrow that the bracket is no wider than the uncertainty of its ends: that is what is put to the test
EDGE = "sweep_id: {cell_voltage: 3.70 V, resolution: 0.02 %, repeats: 1}"
STARTS = "sweep_temperature: {cell_voltage: 3.70 V, resolution: 1 K, beyond: 3 K}"
CELLS = "raise_cell: {cell_voltage: 3.70 V, from: 4.20 V, to: 4.30 V, by: 10 mV}"
ONLY_START = {"\n  run: [0 °C ± 2 °C, 45 °C ± 2 °C]\n  release: [2 °C ± 2 °C, 43 °C ± 2 °C]": ""}


def written(folder: Path, name: str, step: str, judge: str) -> str:
    path = folder / f"{name}.yaml"
    path.write_text(PROCEDURE.format(name=name, step=step, judge=judge), "utf-8")
    return str(path)


def holds(found: Any, limit: str, truth: float) -> bool:
    verdict = found.verdict(limit)
    assert verdict["interval"] is not None, verdict["why"]
    low, high = verdict["interval"]
    wide = verdict["k"] * verdict["u"]
    return bool(low - wide <= truth <= high + wide)


def test_true_edges_lie_in_the_stated_intervals(rehearse_full: Rehearse, tmp_path: Path) -> None:
    draw = np.random.default_rng(SEED)
    held: list[tuple[str, int, bool]] = []
    edge = written(tmp_path, "edge", EDGE, "id.band.lower_edge, id.band.upper_edge")
    for seed in range(1, 18):  # 34 edges
        low, high = draw.uniform(3.6e3, 4.1e3), draw.uniform(5.3e3, 6.0e3)
        bands = {"id_bands": f"[{{id: [{low:.2f} Ω, {high:.2f} Ω], current: 2.0 A}}]"}
        found = rehearse_full(edge, spec="lantern", charger=bands, seed=seed)
        held += [("lower edge", seed, holds(found, "id.band1.lower_edge", low))]
        held += [("upper edge", seed, holds(found, "id.band1.upper_edge", high))]
    window = written(tmp_path, "window", STARTS, "temperature.start_low, temperature.start_high")
    for seed in range(18, 35):  # 34 limits
        cold, hot = draw.uniform(21.5e3, 24.5e3), draw.uniform(5.5e3, 6.0e3)
        text = f"{{filter: 100 ms, start: [{cold:.1f} Ω, {hot:.1f} Ω], run: [40 kΩ, 3 kΩ], hysteresis: 8 %}}"
        found = rehearse_full(window, spec="lantern", charger={"temperature": text}, spec_text=ONLY_START, seed=seed)
        held += [("cold start", seed, holds(found, "temperature.start_low", cold))]
        held += [("hot start", seed, holds(found, "temperature.start_high", hot))]
    cells = written(tmp_path, "cells", CELLS, "tap_trip.voltage")
    for seed in range(35, 46):  # 33 trips
        threshold = draw.uniform(4.22, 4.28)
        text = f"{{threshold: {threshold:.5f} V, filter: 0.5 s, hysteresis: 50 mV}}"
        found = rehearse_full(cells, spec="lantern", charger={"tap_monitor": text}, seed=seed)
        held += [(f"cell {cell}", seed, holds(found, f"tap_trip.cell{cell}.voltage", threshold)) for cell in (1, 2, 3)]
    missed = [(what, seed) for what, seed, good in held if not good]
    print(f"seed {SEED}: {len(held) - len(missed)} of {len(held)} intervals hold the true edge; not: {missed}")
    assert len(held) >= 100
    assert len(missed) <= 0.05 * len(held)
