"""Quantities: the spellings people use, the traps that guessing readers fall into, and a property of the table."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.quantity import EXAMPLES, UNIT_IN_CODE, UNITS, QuantityFault, parse, parse_tolerance

# SI prefixes: BIPM SI Brochure, 9th edition, table 7. Minute and hour: table 8.
PREFIX = {"µ": 1e-6, "u": 1e-6, "m": 1e-3, "k": 1e3, "M": 1e6, "n": 1e-9, "p": 1e-12}


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("4.2 V", "voltage", 4.2),
        ("4.2V", "voltage", 4.2),
        ("25 mV", "voltage", 0.025),
        ("10 kΩ", "resistance", 10e3),
        ("10 kohm", "resistance", 10e3),
        ("3 min", "time", 180.0),
        ("1 h", "time", 3600.0),
        ("5 ppm", "ratio", 5e-6),
        ("5 %", "ratio", 0.05),
        ("−3 °C", "temperature", -3.0),
        ("2.5 Ah", "charge", 2.5),
        ("1.5e3 mA", "current", 1.5),
        ("10 μV", "voltage", 1e-5),  # Greek mu, U+03BC, instead of the micro sign
        ("4 Ω", "resistance", 4.0),  # ohm sign, U+2126
    ],
)
def test_reads_what_people_write(text: str, dimension: str, value: float) -> None:
    assert parse(text, dimension) == pytest.approx(value, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "dimension", "said"),
    [
        ("4,2 V", "voltage", "comma"),  # two common libraries read 42 V here
        ("10 k", "resistance", "unknown unit"),
        ("4.2", "voltage", "no unit"),
        ("5 A", "voltage", "is a current"),
        ("nan V", "voltage", "not a quantity"),
        ("inf V", "voltage", "not a quantity"),
        ("1e999 V", "voltage", "not finite"),
        ("3 MV", "voltage", "unknown unit"),
        ("2 K", "temperature", "is a temperature difference"),
        ("4.2 V + 3 V", "voltage", "not a quantity"),
        ("0.05 C", "charge", "unknown unit"),
        ("", "voltage", "not a quantity"),
        ("1 PLC", "time", "unknown unit"),
    ],
)
def test_refuses_what_it_would_have_to_guess(text: str, dimension: str, said: str) -> None:
    with pytest.raises(QuantityFault, match=said):
        parse(text, dimension)


def test_every_dimension_has_an_example_that_it_reads() -> None:
    assert set(UNITS) == set(EXAMPLES) == set(UNIT_IN_CODE)
    for dimension, example in EXAMPLES.items():
        parse(example, dimension)


@pytest.mark.parametrize("dimension", ["voltage", "current", "resistance", "charge", "power", "capacitance"])
def test_prefixes_are_those_of_the_si(dimension: str) -> None:
    base = UNIT_IN_CODE[dimension]
    for unit, factor in UNITS[dimension].items():
        if unit.endswith(base) and unit != base:
            assert factor == PREFIX[unit.removesuffix(base)], unit


@given(st.floats(-1e6, 1e6, allow_nan=False), st.sampled_from(sorted(UNITS)), st.data())
def test_number_times_factor(number: float, dimension: str, data: st.DataObject) -> None:
    unit = data.draw(st.sampled_from(sorted(UNITS[dimension])))
    assert parse(f"{number!r} {unit}", dimension) == pytest.approx(
        number * UNITS[dimension][unit], rel=1e-12, abs=1e-300
    )


@given(st.text(max_size=20), st.sampled_from(sorted(UNITS)))
def test_any_text_is_a_number_or_a_fault(text: str, dimension: str) -> None:
    try:
        assert abs(parse(text, dimension)) < float("inf")
    except QuantityFault as fault:
        assert str(fault)


def test_tolerances() -> None:
    assert parse_tolerance("3.0 A ± 5 %", "current") == pytest.approx((3.0, 0.15))
    assert parse_tolerance("4.20 V +/- 25 mV", "voltage") == pytest.approx((4.2, 0.025))
    assert parse_tolerance("45 °C ± 2 K", "temperature") == (45.0, 2.0)
    for wrong in ("4.2 V", "4.2 V ± -1 mV", "4.2 V ± 3 A"):
        with pytest.raises(QuantityFault):
            parse_tolerance(wrong, "voltage")
