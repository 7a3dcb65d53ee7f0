"""Which ends of a charge are as declared, from a single scan and the specification: pure, without any bench."""

from __future__ import annotations

import math
from typing import Any

import pytest

from drivers.roles import LoadMode, LoadReading, SupplyMode, SupplyReading
from sequencer.engine.inputs import FOLDERS, rebind
from sequencer.engine.methods import ended_as_declared
from sequencer.engine.scan import Scan, Seen
from sequencer.model.specification import Specification


def specification(name: str, *without: str) -> Specification:
    lines = (FOLDERS["specification"] / f"{name}.yaml").read_text("utf-8").splitlines(keepends=True)
    text = "".join(line for line in lines if not line.strip().startswith(without or ("\0",)))
    return rebind(Specification, text.encode(), f"{name}.yaml", "specification").model


def last(current_A: float, charger_V: float) -> Scan:
    supply, load = SupplyReading(20.0, 1.0, SupplyMode.CONSTANT_VOLTAGE), LoadReading(20.0, 5.0, LoadMode.ON)
    seen = Seen(20.0, 0.0)
    return Scan(0.0, seen, Seen(charger_V, 0.0), Seen(current_A, 0.0), supply, seen, load, seen)


@pytest.mark.parametrize(
    ("current_A", "charger_V", "proper"),
    [(0.36, 21.0, True), (0.20, 21.0, True), (0.37, 21.0, False), (3.0, 20.3, False), (math.nan, 21.0, False)],
)
def test_a_declared_cut_off_is_what_ends_a_charge(current_A: float, charger_V: float, proper: bool) -> None:
    """0.30 A ± 20 %: from 0.36 A down it is the charger's own end, above it may be anything."""
    assert ended_as_declared(last(current_A, charger_V), specification("sprayer"), 5) is proper


@pytest.mark.parametrize(("charger_V", "proper"), [(12.53, True), (12.52, False), (11.0, False)])
def test_without_one_the_last_declared_voltage_is(charger_V: float, proper: bool) -> None:
    """4.20 V ± 25 mV per cell is the last event of the stepped charger: 3 x 4.175 V = 12.525 V (computed)."""
    assert ended_as_declared(last(1.0, charger_V), specification("lantern"), 3) is proper


def test_where_nothing_is_declared_no_end_is_as_declared() -> None:
    bare: Any = specification("sprayer", "cutoff:", "voltage_per_cell:")
    assert not ended_as_declared(last(0.1, 21.0), bare, 5)
    assert not ended_as_declared(None, specification("sprayer"), 5)
