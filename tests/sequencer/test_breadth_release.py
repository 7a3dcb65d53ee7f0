"""Where a charge that the temperature stopped goes on again: a finding of its own, and a fail where it never does."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

Rehearse = Callable[..., Any]
WALKS = """packmime: procedure 1
name: walks
purpose: Walks the thermistor out and back while a charge runs, and nothing else.
steps:
  - insert: {cell_voltage: 3.70 V}
    expect: charges
  - remove: {}
  - sweep_temperature: {cell_voltage: 3.70 V, resolution: 0.5 K, beyond: 3 K}
judge: [charges, temperature.run_low, temperature.run_high, temperature.release_low, temperature.release_high]
"""


@pytest.fixture
def walks(tmp_path: Path) -> str:
    path = tmp_path / "walks.yaml"
    path.write_text(WALKS, "utf-8")
    return str(path)


def test_the_interval_of_a_release_holds_the_true_resistance(rehearse_full: Rehearse, walks: str) -> None:
    """The charger file: run up to 28.70 kΩ and 4.847 kΩ, and 8 % of it back inside before it goes on (by hand)."""
    only_walks = {"\n  start: [5 °C ± 2 °C, 40 °C ± 2 °C]": ""}
    found = rehearse_full(walks, spec="lantern", spec_text=only_walks)
    for limit, truth in (("temperature.release_low", 28.70e3 * 0.92), ("temperature.release_high", 4.847e3 * 1.08)):
        verdict = found.verdict(limit)
        low, high = verdict["interval"]
        assert low < truth < high
        assert verdict["verdict"] == "pass"
    assert "off at 1.50 °C, on at 2.50 °C" in found.verdict("temperature.release_low")["why"]


def test_a_declared_release_that_never_comes_is_a_fail(rehearse_full: Rehearse, walks: str) -> None:
    """The sprayer's charger latches: it stays off until the pack is taken out."""
    declared = {"start: [3 °C ± 2 °C, 45 °C ± 2 °C]": "release: [3 °C ± 3 °C, 45 °C ± 3 °C]"}
    found = rehearse_full(walks, spec="sprayer", spec_text=declared)
    assert found.failing == {"temperature.release_low", "temperature.release_high"}
    assert "did not go on by itself as far as" in found.verdict("temperature.release_low")["why"]
    assert found.verdicts["temperature.run_low"] == "pass"
