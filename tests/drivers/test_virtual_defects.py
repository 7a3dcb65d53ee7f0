"""Defects: those that ship, what each operator does to a charger file, every way in which their files are wrong."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.binding import Bound, bind
from drivers.text.document import compose
from drivers.text.faults import BadInput, Faults
from drivers.text.quantity import UNIT_IN_CODE, UNITS
from drivers.virtual.charger_file import CHARGERS, ChargerFile, load_charger
from drivers.virtual.defects import (
    DEFECTS,
    Defect,
    Size,
    change_of,
    load_defect,
    quantity_of,
    shipped_defects,
    spoiled,
)

GOOD = """packmime: defect 1
name: too-warm
harm: The pump of a greenhouse takes harm in an invented way.
limits: [charge.voltage]
size: {from: 30 mV, to: 80 mV}
change: {voltage_per_cell: +size}
"""


def test_a_defect_that_adds_something_fits_no_charger_that_has_it() -> None:
    """A bleed in its drawn size, on a charger without one; none on one that balances as it is declared to."""
    faults = Faults()
    defect = load_defect("bleeds-through-tap", faults)
    assert defect is not None
    sound = charger("sprayer")
    assert [defect.model.fits_on(one) for one in (sound, charger("aerator"))] == [True, False]
    spoilt = spoiled(defect, Size(0.0042, "current"), sound, faults)
    faults.raise_if_any()
    assert spoilt is not None
    assert spoilt.model.plan().balancer is not None
    assert spoilt.model.plan().balancer.current_A == pytest.approx(0.0042)


def charger(name: str) -> Bound[ChargerFile]:
    faults = Faults()
    found = load_charger(name, faults)
    faults.raise_if_any()
    assert found is not None
    return found


def defect_of(text: str) -> Bound[Defect]:
    faults = Faults()
    found = bind(Defect, compose(text.encode(), "d.yaml"), "defect", faults)
    faults.raise_if_any()
    assert found is not None
    return found


def changed(change: str, name: str = "sprayer", size: Size | None = None) -> ChargerFile:
    """The charger after `change: {...}`, without a size of its own unless one is given."""
    text = GOOD.replace("{voltage_per_cell: +size}", change)
    text = text if size else text.replace("size: {from: 30 mV, to: 80 mV}\n", "")
    faults = Faults()
    found = spoiled(defect_of(text), size, charger(name), faults)
    faults.raise_if_any()
    assert found is not None
    return found.model


def faults_of(text: str) -> list[str]:
    faults = Faults()
    found = bind(Defect, compose(text.encode(), "d.yaml"), "defect", faults)
    assert (found is None) == bool(faults.found)
    return [str(fault) for fault in faults.found]


# those that ship


@pytest.mark.parametrize("name", shipped_defects())
def test_shipped_defects_make_chargers_at_both_ends_of_their_range(name: str) -> None:
    faults = Faults()
    defect = load_defect(name, faults)
    faults.raise_if_any()
    assert defect is not None
    assert defect.model.name == name
    sound = [charger(path.stem) for path in sorted(CHARGERS.glob("*.yaml"))]
    fitting = [one for one in sound if defect.model.fits_on(one)]
    assert fitting
    span = defect.model.size
    for one in fitting:
        for size in (span.least, span.most) if span else (None,):
            made = spoiled(defect, size, one, faults)
            faults.raise_if_any()
            assert made is not None
            assert made.model != one.model
            again = bind(ChargerFile, compose(made.document.content, "again"), "charger", faults)
            assert again is not None
            assert again.model == made.model  # what a record keeps is what was rehearsed


def test_at_least_twelve_ship() -> None:
    assert len(shipped_defects()) >= 12
    assert {path.stem for path in DEFECTS.glob("*.yaml")} == set(shipped_defects())


# paths


def test_the_last_of_a_list_is_another_stage_on_another_charger() -> None:
    for name, count in (("bellows", 1), ("lantern", 2), ("barrow", 3)):
        stages = changed("{stages.last.until: +40 mV}", name).stages
        sound = charger(name).model.stages
        assert len(stages) == count
        assert stages[:-1] == sound[:-1]
        assert stages[-1].until == pytest.approx((sound[-1].until or 0.0) + 0.040)
    assert not charger("sprayer").model.stages[-1].until
    with pytest.raises(BadInput, match=r"there is no 'last'"):
        changed("{name.last: x}")


# sizes


@given(seed=st.integers(0, 2**31))
def test_sizes_stay_inside_their_range_and_are_the_same_for_the_same_seed(seed: int) -> None:
    model = defect_of(GOOD).model
    size = model.drawn(seed)
    assert size is not None
    assert 0.030 <= size.value <= 0.080
    assert size == model.drawn(seed)
    assert quantity_of(str(size)) == (pytest.approx(size.value, rel=1e-9), "voltage")


def test_two_defects_of_one_range_draw_apart() -> None:
    other = defect_of(GOOD.replace("too-warm", "too-hot")).model
    assert [other.drawn(seed) for seed in range(3)] != [defect_of(GOOD).model.drawn(seed) for seed in range(3)]


# operators

PLAIN = sorted(dimension for dimension in UNITS if dimension not in ("ratio", "temperature", "temperature difference"))
NUMBERS = st.floats(1e-3, 1e3).map(lambda number: float(f"{number:.6g}"))


@given(st.sampled_from(PLAIN), NUMBERS, NUMBERS, st.sampled_from("+-"))
def test_adding_a_quantity_of_the_same_kind(dimension: str, value: float, step: float, sign: str) -> None:
    unit = UNIT_IN_CODE[dimension]
    text = change_of(f"{sign}{step:.6f} {unit}").applied(f"{value:.6f} {unit}", None)
    expected = round(value, 6) + (1 if sign == "+" else -1) * round(step, 6)
    assert quantity_of(text) == (pytest.approx(expected, rel=1e-8, abs=1e-7), dimension)


@given(st.sampled_from(PLAIN), NUMBERS, st.floats(0.001, 0.9), st.sampled_from("+-*"))
def test_shares_are_of_the_value(dimension: str, value: float, share: float, sign: str) -> None:
    unit = UNIT_IN_CODE[dimension]
    size = Size(share, "ratio")
    text = change_of(f"{sign}size").applied(f"{value:.9f} {unit}", size)
    factor = {"+": 1.0 + share, "-": 1.0 - share, "*": share}[sign]
    assert quantity_of(text) == (pytest.approx(value * factor, rel=1e-5, abs=1e-8), dimension)


@given(NUMBERS, NUMBERS)
def test_operators_act_in_their_order(value: float, step: float) -> None:
    text = change_of(f"+{step:.6f} V *50 % -size").applied(f"{value:.6f} V", Size(0.001, "voltage"))
    expected = (round(value, 6) + round(step, 6)) / 2 - 0.001
    assert quantity_of(text)[0] == pytest.approx(expected, rel=1e-8, abs=1e-7)


@given(st.text(max_size=12))
def test_any_text_is_a_change_or_a_fault(text: str) -> None:
    try:
        change = change_of(text)
    except ValueError as fault:
        assert str(fault)
        return
    assert (change.terms is None) == (not text.lstrip().startswith(("+", "-", "*")))


def test_changes_reach_into_lists_and_make_new_keys() -> None:
    sound = charger("sprayer").model
    moved = changed("{id_bands.1.id.0: -5 %, works: false, tap_monitor.cells: [1, 2]}")
    assert moved.id_bands[1].id == (pytest.approx(0.95 * 2450), 3700)
    assert moved.id_bands[0] == sound.id_bands[0]
    assert (sound.works, moved.works) == (True, False)
    assert moved.tap_monitor is not None
    assert moved.tap_monitor.cells == (1, 2)


def test_a_key_set_to_nothing_is_out() -> None:
    blind = changed("{id: , id_bands: []}")
    assert blind.id is None
    assert blind.id_bands == ()


def test_size_moves_the_value() -> None:
    assert changed("{voltage_per_cell: +size}", size=Size(0.05, "voltage")).voltage_per_cell == pytest.approx(4.25)


# faults, each with its place


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("packmime: defect 1", "packmime: defect 2", "d.yaml:1:11: is defect version 2"),
        ("harm: The", "harms: The", "d.yaml:3:1: unknown key 'harms'; did you mean 'harm'?"),
        ("to: 80 mV", "to: 20 mV", "d.yaml:5:1: size: from 30 mV to 20 mV"),
        ("to: 80 mV", "to: 2 s", "from a voltage to a time"),
        ("to: 80 mV", "to: 80", '"80" has no unit'),
        ("+size", "size", 'd.yaml:6:10: voltage_per_cell: "size" alone says nothing'),
        ("+size", "+size +", 'd.yaml:6:10: voltage_per_cell: "+size +": expected operators'),
        ("+size", "+3 volts", 'unknown unit "volts"'),
        ("+size", '"*30 mV"', "a scale is a share"),
        ("+size", "+30 mV", "a 'size' is given, and no change uses it"),
        ("size: {from: 30 mV, to: 80 mV}\n", "", "the change uses a size"),
        ("name: too-warm", "name: Too warm", "d.yaml:2:1: name"),
        ("limits: [charge.voltage]", "limits: []", "d.yaml:4:1: limits"),
        ("limits:", "for: {algorithms: [magic]}\nlimits:", '"magic" is none of'),
    ],
)
def test_bad_defect_files(old: str, new: str, words: str) -> None:
    assert old in GOOD
    found = faults_of(GOOD.replace(old, new, 1))
    assert any(words in fault for fault in found), found


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ("{voltage_per_cell: +2 s}", "d.yaml:5:10: voltage_per_cell: 2 s is a time; it cannot be added to a voltage"),
        ("{id_bands.7.current: +5 %}", "id_bands.7.current: there is no '7'"),
        ("{ceiling: +5 %}", "ceiling: there is no quantity to change"),
        ("{name: +5 %}", "name:"),
        ("{voltage_per_cell: fast}", "voltage_per_cell"),
        ("{voltage_per_cel: 4.3 V}", "d.yaml:5:10: unknown key 'voltage_per_cel'; did you mean 'voltage_per_cell'?"),
        ("{temperature.run.1: +200 %}", "the 'run' window must hold the 'start' window"),
    ],
)
def test_changes_that_make_no_charger(change: str, words: str) -> None:
    faults = Faults()
    text = GOOD.replace("{voltage_per_cell: +size}", change).replace("size: {from: 30 mV, to: 80 mV}\n", "")
    assert spoiled(defect_of(text), None, charger("sprayer"), faults) is None
    assert any(words in str(fault) for fault in faults.found), [str(fault) for fault in faults.found]


def test_unknown_names_and_missing_files() -> None:
    faults = Faults()
    assert load_defect("regulation-hihg", faults) is None
    assert load_defect("nowhere/d.yaml", faults) is None
    assert "did you mean 'regulation-high'?" in faults.found[0].message
    assert "no defect file" in faults.found[1].message


def test_a_defect_of_ones_own_by_path(tmp_path: Path) -> None:
    path = tmp_path / "d.yaml"
    path.write_text(GOOD, "utf-8")
    found = load_defect(str(path), Faults())
    assert found is not None
    assert found.model.claimed_as == "too-warm"
