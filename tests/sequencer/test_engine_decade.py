"""What a resistor stood at: as measured where that was done, with what measuring leaves uncertain; else as set."""

from __future__ import annotations

import math
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from sequencer.engine.decade import Decade

SET = SimpleNamespace(range=1e6, set=0.001, residual=0.3)
OHMMETER = SimpleNamespace(range=10e3, reading=0.0001, of_range=0.00001, resolution=0.01)


def accuracy(certificate: Any = None) -> Any:
    scanner = SimpleNamespace(name="scans", accuracy=SimpleNamespace(ohmmeter=(OHMMETER,)))
    decade = SimpleNamespace(name="decades", accuracy=SimpleNamespace(resistance=(SET,)))
    entry = SimpleNamespace(certificate=certificate)
    parts = {"id.resistor": ("decade", entry, decade), "id.sense": ("scanner", entry, scanner)}
    return SimpleNamespace(file=SimpleNamespace(at=parts.__getitem__))


def evidence(told: list[tuple[float, float]], met: list[tuple[float, float]]) -> Any:
    def trace(rows: list[tuple[float, float]]) -> Any:
        made = np.array(rows, dtype=float).reshape(-1, 2)
        return SimpleNamespace(time_s=made[:, 0], value=made[:, 1])

    traces = {"set.id": trace(told), "id.ohm": trace(met)}
    return SimpleNamespace(trace=traces.__getitem__)


def test_a_measurement_belongs_to_the_setting_before_it() -> None:
    """Also where the next setting is made at the very moment of the measurement."""
    told = [(0.0, 1000.0), (10.2, 1010.0), (10.4, 1000.0)]
    made = Decade.of(evidence(told, [(0.2, 1000.5), (10.4, 1010.6), (20.0, 1000.7)]), accuracy(), "id.resistor")
    assert made.ohm(1000.0) == pytest.approx(1000.6)
    assert made.ohm(1010.0) == pytest.approx(1010.6)
    assert made.ohm(1020.0) == 1020.0  # never measured: as set
    assert made.words(1000.0, 1010.0) == ""
    assert made.words(1000.0, 1020.0) == "; the resistor as set, not measured"


def test_lines_of_a_measured_resistor() -> None:
    """By hand: 0.01 % of 1 kΩ and 0.001 % of 10 kΩ are 0.2 Ω; a step of 0.01 Ω; leads and contact 0.1 Ω each; all
    rectangular (JCGM 100:2008, 4.3.7). Scatter of 999.5, 1000, 1000.5 Ω: s = 0.5 Ω, 2 degrees of freedom (4.2.2).
    """
    made = Decade(accuracy(), "id.resistor", {1000.0: (999.5, 1000.0, 1000.5)})
    lines = {line.name: line for line in made.lines(1000.0)}
    half = {name: line.u * math.sqrt(3) for name, line in lines.items() if line.distribution == "rectangular"}
    assert half == pytest.approx(
        {"scanner, ohmmeter": 0.2, "scanner, resolution": 0.005, "scanner, leads": 0.1, "contact": 0.1}
    )
    assert (lines["repeatability"].u, lines["repeatability"].dof) == (pytest.approx(0.5), 2.0)


def test_repeatability_is_pooled_over_settings_as_a_share() -> None:
    """Two groups of two: relative differences 2e-3 and 4e-3 have variances 2e-6 and 8e-6, pooled 5e-6 (by hand)."""
    made = Decade(accuracy(), "id.resistor", {1000.0: (999.0, 1001.0), 2000.0: (1996.0, 2004.0), 3000.0: (3000.0,)})
    (line,) = [line for line in made.lines(2000.0, 3000.0) if line.name == "repeatability"]
    assert line.u == pytest.approx(math.sqrt(5e-6) * 2500.0)
    assert line.dof == 2.0


def test_settings_measured_once_leave_no_scatter() -> None:
    made = Decade(accuracy(), "id.resistor", {1000.0: (1000.2,), 1010.0: (1010.2,)})
    assert "repeatability" not in [line.name for line in made.lines(1000.0, 1010.0)]


def test_one_end_that_was_not_measured_leaves_both_as_set() -> None:
    lines = Decade(accuracy(), "id.resistor", {1000.0: (1000.2,)}).lines(1000.0, 1010.0)
    assert [line.name for line in lines] == ["decade", "contact"]


def test_a_resistance_that_the_ohmmeter_has_no_accuracy_for() -> None:
    with pytest.raises(ValueError, match="scanner: its dialect states no accuracy for measuring 20 kΩ"):
        Decade(accuracy(), "id.resistor", {20e3: (20e3,)}).lines(20e3)


@pytest.mark.parametrize("measured", [True, False])
def test_a_certificate_overrides_the_familys_accuracy(measured: bool) -> None:
    """U = 40 mΩ at k = 2 is u = 20 mΩ (JCGM 100:2008, 4.3.3); beyond its range the family's statement holds."""
    certificate = SimpleNamespace(number="C-7", resistance=SimpleNamespace(range=2e3, U=0.04))
    made = Decade(accuracy(certificate), "id.resistor", {1e3: (1e3,), 3e3: (3e3,)} if measured else {})
    (line,) = [line for line in made.lines(1e3) if line.source == "certificate C-7"]
    assert line.u == pytest.approx(0.02)
    assert all(line.source != "certificate C-7" for line in made.lines(3e3))
