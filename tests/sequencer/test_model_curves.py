"""Thermistor curves as files: what is refused, what comes back, and that the shipped ones load."""

import math
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.binding import KINDS, Bound, bind
from drivers.text.document import compose, plain
from drivers.text.faults import Faults, Place
from sequencer.model.curves import CURVES, Curve, load_curve

HEAD = "packmime: curve 1\nname: greenhouse sensor\n"
TABLE = "table:\n  - [0 °C, 27.28 kΩ]\n  - [25 °C, 10 kΩ]\n  - [60 °C, 3.02 kΩ]\n"
SHIPPED = sorted(path.stem for path in CURVES.glob("*.yaml"))


@pytest.fixture(autouse=True)
def _kind(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(KINDS, "curve", 1)


def bound(body: str) -> tuple[Bound[Curve] | None, list[str]]:
    faults = Faults()
    curve = bind(Curve, compose((HEAD + body).encode(), "sensor.yaml"), "curve", faults)
    return curve, [str(fault) for fault in faults.found]


def curve_of(body: str) -> Curve:
    curve, faults = bound(body)
    assert curve is not None, faults
    return curve.model


def test_every_shipped_curve_loads_by_its_bare_name() -> None:
    assert {"ntc-10k-3435", "ntc-10k-3950", "ntc-10k-table"} <= set(SHIPPED)
    for name in SHIPPED:
        faults = Faults()
        curve = load_curve(name, faults, Place("specification.yaml", 7, 22))
        assert not faults.found
        assert curve is not None
        assert curve.model.name == name
        assert curve.model.source
        assert curve.model.ohm_at(25.0) == pytest.approx(10e3, rel=1e-12)


def test_a_curve_is_found_beside_the_file_that_names_it(tmp_path: Path) -> None:
    (tmp_path / "own.yaml").write_text(HEAD + TABLE, "utf-8")
    faults = Faults()
    curve = load_curve("own.yaml", faults, Place("x"), tmp_path)
    assert curve is not None
    assert not faults.found
    assert curve.model.ohm_at(25.0) == pytest.approx(10e3)


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("ntc-10k-34", "unknown curve 'ntc-10k-34'; did you mean 'ntc-10k-3435'?"),
        ("gone.yaml", "there is no curve file 'gone.yaml'"),
    ],
)
def test_a_name_that_is_none_is_told_at_its_place(name: str, words: str) -> None:
    faults = Faults()
    assert load_curve(name, faults, Place("specification.yaml", 7, 22)) is None
    assert [str(fault) for fault in faults.found] == [f"specification.yaml:7:22: {words}"]


def test_a_file_that_is_no_curve_tells_all_its_faults(tmp_path: Path) -> None:
    (tmp_path / "bad.yaml").write_text("packmime: curve 1\nname: [\n", "utf-8")
    faults = Faults()
    assert load_curve("bad.yaml", faults, Place("x"), tmp_path) is None
    assert len(faults.found) == 1
    assert "is not YAML" in str(faults.found[0])


def test_each_row_that_breaks_the_table_is_named_with_its_place() -> None:
    _, faults = bound("table:\n  - [0 °C, 27 kΩ]\n  - [5 °C, 28 kΩ]\n  - [10 °C, 10 kΩ]\n  - [9 °C, 9 kΩ]\n")
    assert len(faults) == 2
    assert faults[0].startswith("sensor.yaml:5:5: ")
    assert "[5 °C, 28 kΩ] follows [0 °C, 27 kΩ]; temperatures must rise and resistances fall" in faults[0]
    assert faults[1].startswith("sensor.yaml:7:5: ")
    assert "[9 °C, 9 kΩ] follows [10 °C, 10 kΩ]" in faults[1]


@pytest.mark.parametrize(
    ("body", "place", "words"),
    [
        ("table: [[0 °C, 27 kΩ], [0 °C, 26 kΩ]]\n", "3:24", "temperatures must rise"),
        ("table: [[0 °C, 27 kΩ], [5 °C, 27 kΩ]]\n", "3:24", "must rise and resistances fall"),
        ("table: [[0 °C, 27 kΩ]]\n", "3:1", "two points at least"),
        ("table: [[0 °C, 27]]\n", "3:16", '"27" has no unit'),
        ("table: [[-280 °C, 27 kΩ], [0 °C, 1 kΩ]]\n", "3:10", "must be above -273.15 °C"),
        ("beta: {resistance: 10 kΩ, beta: 3435}\n", "3:27", 'such as "3435 K"'),
        ("beta: {resistance: 10 kΩ, beta: 3435 °C}\n", "3:27", "written in kelvin"),
        ("beta: {resistance: 10 kΩ, bet: 3435 K}\n", "3:27", "did you mean 'beta'?"),
        ("beta: {resistance: 0 Ω, beta: 3435 K}\n", "3:8", "must be above 0 Ω"),
        ('steinhart_hart: {a: "8,8", b: 2.5e-4, c: 2e-7}\n', "3:18", '"8,8" is not a plain number'),
        ("steinhart_hart: {a: 1_0, b: 2.5e-4, c: 2e-7}\n", "3:18", "is not a plain number"),
        ("steinhart_hart: {a: 1.1e-3, b: .nan, c: 2e-7}\n", "3:29", "is not a plain number"),
        ("steinhart_hart: {a: 1.1e-3, b: inf, c: 2e-7}\n", "3:29", "is not finite"),
        ("steinhart_hart: {a: 1.1e-3, b: -2.5e-4, c: 2e-7}\n", "3:1", "b is -0.00025; above zero"),
        ("steinhart_hart: {a: 8.875e-4, b: 2.515e-4, c: -2e-6}\n", "1:1", "no resistance somewhere in -40 °C"),
        ("extended: {resistance: 10 kΩ, forward: [-14.6, 4791.8, -115334]}\n", "3:31", "'3' is missing"),
        ("", "1:1", "exactly one of table, steinhart_hart, extended, beta, platinum; found none"),
        (TABLE + "beta: {resistance: 10 kΩ, beta: 3435 K}\n", "1:1", "found table and beta"),
        (TABLE + "span: [0 °C, 10 °C]\n", "1:1", "leave 'span' out"),
        ("beta: {resistance: 10 kΩ, beta: 3435 K}\nspan: [60 °C, 0 °C]\n", "1:1", "is no range"),
    ],
)
def test_what_cannot_be_used_is_refused_with_its_place(body: str, place: str, words: str) -> None:
    curve, faults = bound(body)
    assert curve is None
    assert any(fault.startswith(f"sensor.yaml:{place}: ") and words in fault for fault in faults), faults


def test_a_formula_that_turns_round_within_its_span_is_refused() -> None:
    turning = "extended: {resistance: 10 kΩ, forward: [0, 0, 1e5, -2e7]}\n"  # peak at 1/T = 1/300
    assert any("is not monotone at" in fault for fault in bound(turning)[1])


def test_a_slip_in_one_direction_s_coefficients_is_found() -> None:
    forward = "forward: [-14.6337, 4791.842, -115334, -3.730535e6]"
    inverse = "inverse: [3.354016e-3, 2.659850e-4, 2.620131e-6, 6.383091e-8]"  # digits of 2.569850 changed over
    _, faults = bound(f"extended: {{resistance: 10 kΩ, {forward}, {inverse}}}\n")
    assert any("comes back as" in fault and "check the coefficients" in fault for fault in faults)


def test_outside_the_span_is_an_error_that_names_value_and_range() -> None:
    curve = curve_of(TABLE)
    assert curve.span_C == (0.0, 60.0)
    with pytest.raises(ValueError, match=r"celsius: -10 °C lies outside .*greenhouse sensor.* 0 °C to 60 °C"):
        curve.ohm_at(-10.0)
    with pytest.raises(ValueError, match=r"ohm: 30 kΩ lies outside .* 3.02 kΩ to 27.28 kΩ \(0 °C to 60 °C\)"):
        curve.celsius_at(30e3)
    with pytest.raises(ValueError, match="lies outside"):
        curve.slope_ohm_per_K(61.0)
    with pytest.raises(ValueError, match="lies outside"):
        curve.celsius_at(math.nan)


def test_limits_change_their_sides_and_keep_what_is_open() -> None:
    curve = curve_of(TABLE)
    low, high = curve.ohm_limits(0.0, 60.0)
    assert (low, high) == (pytest.approx(3020.0), pytest.approx(27280.0))
    assert curve.ohm_limits(0.0, None) == (None, pytest.approx(27280.0))
    assert curve.ohm_limits(None, 60.0) == (pytest.approx(3020.0), None)
    rising = curve_of("platinum: {resistance: 100 Ω}\n")
    assert rising.ohm_limits(0.0, None) == (pytest.approx(100.0), None)


def test_a_table_that_rises_is_a_sensor_too() -> None:
    curve = curve_of("table: [[0 °C, 815 Ω], [25 °C, 1000 Ω], [50 °C, 1209 Ω]]\n")
    assert curve.ohm_at(25.0) == pytest.approx(1000.0)
    assert curve.celsius_at(1100.0) == pytest.approx(37.4, abs=0.5)
    assert curve.slope_ohm_per_K(10.0) > 0.0


LAWS = {
    "table": TABLE,
    "beta": "beta: {resistance: 10 kΩ, at: 25 °C, beta: 3435 K}\n",
    "steinhart_hart": "steinhart_hart: {a: 8.87462844e-4, b: 2.51519885e-4, c: 1.91945042e-7}\n",
    "steinhart_hart, c below zero": "steinhart_hart: {a: 1.39e-4, b: 4e-4, c: -6e-7}\nspan: [-20 °C, 125 °C]\n",
    "extended": "extended: {resistance: 10 kΩ, forward: [-14.6337, 4791.842, -115334, -3.730535e6]}\n",
    "platinum": "platinum: {resistance: 1 kΩ}\n",
}


CURVE = {
    law: Curve.model_validate(plain(compose(f"name: {law}\n{body}".encode(), law).root)) for law, body in LAWS.items()
}


@pytest.mark.parametrize("law", LAWS)
@given(share=st.floats(0.0, 1.0), further=st.floats(1e-6, 1.0))
def test_monotone_and_back_again(law: str, share: float, further: float) -> None:
    curve = CURVE[law]
    low, high = curve.span_C
    here = low + (high - low) * share
    there = min(high, here + (high - low) * further)
    rising = law == "platinum"
    if there > here:
        assert (curve.ohm_at(there) > curve.ohm_at(here)) == rising
    assert (curve.slope_ohm_per_K(here) > 0.0) == rising
    assert curve.celsius_at(curve.ohm_at(here)) == pytest.approx(here, abs=1e-7)


@pytest.mark.parametrize("law", LAWS)
@given(share=st.floats(0.001, 0.999))
def test_the_slope_is_the_derivative(law: str, share: float) -> None:
    curve = CURVE[law]
    low, high = curve.span_C
    here, step = low + (high - low) * share, 1e-3
    if law == "table" and min(abs(here - knot) for knot in (0.0, 25.0, 60.0)) < 2 * step:
        return  # two slopes meet at a point
    numeric = (curve.ohm_at(here + step) - curve.ohm_at(here - step)) / (2 * step)
    assert curve.slope_ohm_per_K(here) == pytest.approx(numeric, rel=1e-5)
