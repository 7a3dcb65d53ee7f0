"""The node's law against Kirchhoff and Ohm by hand."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.virtual.node import Drive, LOAD_MINIMUM_ohm, NodeLaw, Path

PATH = Path(source_ohm=0.0, outer_ohm=0.12, drain_S=1e-5)
BURIED = Path(source_ohm=0.08, outer_ohm=0.12, drain_S=1e-5)
CHARGER = Drive(current_A=3.0, limit_V=21.0)


def amperes(law: NodeLaw, v: float) -> float:
    a, b = law.charger_line(v)
    return a + b * v


def test_constant_current_up_to_the_knee_then_ohms_law_to_the_limit() -> None:
    law = NodeLaw(CHARGER, PATH, 4.0)
    assert amperes(law, 20.0) == 3.0
    assert amperes(law, 21.0 - 3.0 * 0.12) == 3.0  # the knee: limit less the drop at full current
    assert amperes(law, 20.88) == pytest.approx((21.0 - 20.88) / 0.12)
    assert amperes(law, 21.5) == 0.0  # nothing flows back through the rectifier


def test_need_is_load_less_charger() -> None:
    law = NodeLaw(CHARGER, PATH, 4.0)
    assert law.need(18.0) == pytest.approx(4.0 - 3.0)
    assert law.need(20.88) == pytest.approx(4.0 - 1.0)
    assert NodeLaw(None, PATH, 4.0).need(18.0) == pytest.approx(4.0 + 18.0e-5)


def test_charger_pushes_the_node_where_the_load_takes_less_than_it_gives() -> None:
    # Constant voltage behind 0.12 Ω into a 2 A sink: 21 V - 2 A x 0.12 Ω (Thevenin).
    assert NodeLaw(CHARGER, PATH, 2.0).pushed_V() == pytest.approx(21.0 - 0.24)
    assert NodeLaw(CHARGER, PATH, 0.0).pushed_V() == 21.0  # nobody takes anything: open-circuit voltage
    # A 4 A sink takes all of 3 A only near zero, where its transistors are fully on: 3 A x 50 mΩ.
    assert NodeLaw(CHARGER, PATH, 4.0).pushed_V() == pytest.approx(3.0 * LOAD_MINIMUM_ohm)
    assert NodeLaw(None, PATH, 0.0).pushed_V() == 0.0


def test_supply_at_its_limit_lets_the_node_fall_to_what_the_load_leaves() -> None:
    law = NodeLaw(None, PATH, 4.0)
    assert law.limited_V(3.0) == pytest.approx(3.0 * LOAD_MINIMUM_ohm, rel=1e-4)
    assert law.limited_V(5.0) > 1e4  # only the charger's divider would take the rest
    assert NodeLaw(CHARGER, PATH, 4.0).limited_V(4.0) == math.inf  # even a charger at its limit leaves no more
    # 0.5 A of supply and a charger that gives 3.5 A less what the knee allows: on the regulated slope.
    assert NodeLaw(CHARGER, PATH, 3.2).limited_V(0.5) == pytest.approx(21.0 - 2.7 * 0.12)


@pytest.mark.parametrize("path", [PATH, BURIED])
@pytest.mark.parametrize("level_V", [2.5, 15.0, 20.9, 21.0])
def test_regulation_point_stands_at_the_level_where_the_law_says(path: Path, level_V: float) -> None:
    law = NodeLaw(CHARGER, path, 4.0)
    v = law.node_at_regulation(level_V)
    assert v + amperes(law, v) * path.total_ohm == pytest.approx(level_V, abs=1e-9)


@pytest.mark.parametrize("level_V", [2.5, 15.0, 20.7, 20.8, 20.95])
def test_contacts_stand_at_the_level_where_the_law_says(level_V: float) -> None:
    law = NodeLaw(CHARGER, BURIED, 4.0)
    v = law.node_at_contacts(level_V)
    assert v + amperes(law, v) * BURIED.outer_ohm == pytest.approx(level_V, abs=1e-9)


def test_current_falls_below_a_level_where_ohms_law_says() -> None:
    law = NodeLaw(CHARGER, PATH, 4.0)
    assert law.node_at_current_below(0.3) == pytest.approx(21.0 - 0.3 * 0.12)
    assert law.node_at_current_below(3.5) == -math.inf  # always below


drives = st.one_of(st.none(), st.builds(Drive, st.floats(0.01, 15), st.floats(1, 60)))
paths = st.builds(Path, st.floats(0, 1), st.floats(1e-3, 1), st.floats(1e-7, 1e-4))


@given(drives, paths, st.floats(0, 30), st.floats(0, 60), st.floats(0, 60))
def test_need_never_falls_when_the_node_rises(
    drive: Drive | None, path: Path, load_A: float, a: float, b: float
) -> None:
    law = NodeLaw(drive, path, load_A)
    assert law.need(min(a, b)) <= law.need(max(a, b)) + 1e-9


@given(drives, paths, st.floats(0, 30), st.floats(0, 60), st.floats(0.01, 15))
def test_currents_sum_to_zero_wherever_the_node_settles(
    drive: Drive | None, path: Path, load_A: float, set_V: float, limit_A: float
) -> None:
    """Kirchhoff: the supply gives what is needed, between nothing and its limit, and misses its voltage only there."""
    law = NodeLaw(drive, path, load_A)
    v = min(max(set_V, law.pushed_V()), law.limited_V(limit_A))
    need_A = law.need(v)
    slack_A = 1e-9 * (1 + load_A) / path.total_ohm + 1e-9
    assert -slack_A <= need_A <= limit_A + slack_A
    if v > set_V:
        assert need_A == pytest.approx(0.0, abs=slack_A)
    if v < set_V:
        assert need_A == pytest.approx(limit_A, abs=slack_A)
