"""Numbers as people read them. Rounding: JCGM 100:2008, 7.2.6 (uncertainty to at most two significant digits)."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.si import clock_time, decimals_of, interval, pm, si


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (0.0031, "V", "3.1 mV"),
        (0.001, "V", "1 mV"),
        (1234.0, "Ω", "1.234 kΩ"),
        (0.0, "A", "0 A"),
        (-0.00012, "A", "-120 µA"),
        (45.0, "°C", "45 °C"),
        (90.0, "s", "90 s"),
        (math.nan, "V", "nan V"),
    ],
)
def test_prefixes(value: float, unit: str, text: str) -> None:
    assert si(value, unit) == text


def test_value_takes_the_digits_of_its_uncertainty() -> None:
    assert pm(4.20312, 0.0019, "V") == "4.2031 V ± 1.9 mV"
    assert pm(3.00012, 0.0082, "A") == "3.0001 A ± 8.2 mA"
    assert pm(-0.00012, 3e-6, "A") == "-120.0 µA ± 3.0 µA"
    assert pm(0.0002, 0.0021, "A") == "0.2 mA ± 2.1 mA"  # nothing is known below its uncertainty
    # GUM H.1.7: l = (50.000838 ± 0.000093) mm; in mm that is six decimals.
    assert decimals_of(0.000093) == 6


def test_intervals_and_times() -> None:
    assert interval(4.175, 4.225, "V") == "4.175 V to 4.225 V"
    assert interval(None, 0.01, "A") == "below 10 mA"
    assert interval(2.0, None, "V") == "above 2 V"
    assert interval(None, None, "V") == "no limit"
    assert [clock_time(s) for s in (12.5, 200, 3840)] == ["12.5 s", "3 min 20 s", "1 h 04 min"]


@given(st.floats(1e-9, 1e8), st.sampled_from(["V", "A", "Ω"]))
def test_what_is_shown_is_the_value(value: float, unit: str) -> None:
    number, shown = si(value, unit, 6).split(" ")
    factor = {"p": 1e-12, "n": 1e-9, "µ": 1e-6, "m": 1e-3, "": 1.0, "k": 1e3, "M": 1e6, "G": 1e9}[
        shown.removesuffix(unit)
    ]
    assert float(number) * factor == pytest.approx(value, rel=1e-5)
    assert 0.999 < abs(float(number)) < 1000.1


def test_nobody_writes_minus_nothing() -> None:
    assert si(-0.0, "A") == "0 A"
    assert pm(-1e-6, 1e-3, "V") == "0.0 mV ± 1.0 mV"
