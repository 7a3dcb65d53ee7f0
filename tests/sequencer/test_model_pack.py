"""The pack's table against published points, and what no pack may be."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from sequencer.model.pack import Pack

# A published open-circuit voltage table of a 21700 cell, 16 points (a public code search, seen).
POINTS = (
    (0.0, 2.6929), (0.0236, 3.1683), (0.0473, 3.3177), (0.0709, 3.3668), (0.0945, 3.3923), (0.1238, 3.4225),
    (0.1530, 3.4561), (0.2417, 3.5478), (0.3303, 3.6094), (0.4644, 3.7059), (0.5985, 3.8368), (0.7391, 3.9740),
    (0.8798, 4.0759), (0.9199, 4.1018), (0.9599, 4.1315), (1.0, 4.1710),
)  # fmt: skip


def pack_of(cells: int = 1, **changes: object) -> Pack:
    content: dict[str, object] = {
        "name": "published",
        "cells": cells,
        "capacity": 3.0,
        "ocv": POINTS,
        "resistance": 0.05,
        "rated_current": 3.0,
        **changes,
    }
    return Pack.model_validate(content)


@pytest.mark.parametrize(("soc", "ocv_V"), [(0.10, 3.39797), (0.50, 3.74065), (0.80, 4.01811)])
def test_between_published_points(soc: float, ocv_V: float) -> None:
    """Linear between the points (computed)."""
    assert pack_of().ocv_V(soc) == pytest.approx(ocv_V, abs=1e-5)
    assert pack_of(5).ocv_V(soc) == pytest.approx(5 * ocv_V, abs=5e-5)


def test_state_of_charge_at_a_voltage() -> None:
    assert pack_of().soc_at(3.70) == pytest.approx(0.45620, abs=1e-5)  # computed
    assert pack_of(5).soc_at(3.70) == pack_of().soc_at(3.70)  # per cell
    assert pack_of().soc_at(5.0) == 1.0


def test_below_the_table_a_cell_falls_steeply() -> None:
    """50 V per 1 of charge. Two published tables (21700 cells, OCV at C/32 and C/20) end at their empty side with
    2.8981 V at 1.51 % to 2.5061 V, and 2.8080 V at 0.50 % to 2.5000 V: 26 and 62 V per 1 (computed)."""
    pack = pack_of()
    assert (2.8981 - 2.5061) / 0.0151 < pack.slope_V(-0.01) < (2.8080 - 2.5000) / 0.0050
    assert pack.soc_at(1.6929) == pytest.approx(-0.02)
    assert pack.ocv_V(0.0) == pytest.approx(2.6929)
    assert pack.ocv_V(-1e-9) == pytest.approx(2.6929)  # without a jump at 0 %


@given(st.floats(-0.04, 1.0), st.integers(1, 20))
def test_there_and_back(soc: float, cells: int) -> None:
    pack = pack_of(cells)
    assert pack.soc_at(pack.ocv_V(soc) / cells) == pytest.approx(soc, abs=1e-9)


@given(st.floats(-0.5, 1.5))
def test_the_slope_is_that_of_the_table(soc: float) -> None:
    pack, step = pack_of(3), 1e-7
    if all(abs(soc - knot) > 2 * step for knot, _ in POINTS):
        rise_V = pack.ocv_V(soc + step) - pack.ocv_V(soc - step)
        assert rise_V / (2 * step) == pytest.approx(pack.slope_V(soc), rel=1e-4)
    assert pack.slope_V(soc) > 0


def test_the_guard_bound() -> None:
    assert pack_of().cell_bound_V == pytest.approx(4.171 + 0.15)
    assert pack_of(cell_voltage_max=4.25).cell_bound_V == 4.25


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"ocv": [["0 %", "3.0 V"]]}, "two points at least"),
        ({"ocv": [["0 %", "3.0 V"], ["0 %", "4.0 V"], ["100 %", "4.2 V"]]}, "must rise"),
        ({"ocv": [["0 %", "3.0 V"], ["50 %", "2.9 V"], ["100 %", "4.2 V"]]}, "must rise"),
        ({"ocv": [["0 %", "3.0 V"], ["90 %", "4.2 V"]]}, "from 0 % to 100 %"),
        ({"cells": 21}, "less than or equal to 20"),
        ({"resistance": "0 Ω"}, "above 0"),
        ({"tap": 1}, "not permitted"),
    ],
)
def test_what_no_pack_may_be(changes: dict[str, object], said: str) -> None:
    with pytest.raises(ValidationError, match=said):
        pack_of(**changes)
