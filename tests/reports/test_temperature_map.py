"""What the figure of the temperature window will show."""

import pytest

from reports.inputs import curve
from reports.temperature_map import Limit, TemperatureMap, celsius_span, temperature_map
from sequencer.model.curves import Curve
from sequencer.model.specification import Specification

PLATINUM = """packmime: curve 1
name: pt100
source: IEC 60751
span: [-40 °C, 110 °C]
platinum: {resistance: 100 Ω}
"""


@pytest.fixture
def shown(breadth: dict, declared: Specification, sensor: Curve) -> TemperatureMap:
    made = temperature_map(breadth["findings"], breadth["verdicts"]["verdicts"], declared, sensor)
    assert made is not None
    return made


def test_limits_know_what_is_owed_and_what_is_forbidden(shown: TemperatureMap) -> None:
    cold, hot = shown.start
    assert cold.declared == Limit(owed_C=5, forbidden_C=1)  # computed: 3 °C ± 2 °C
    assert hot.declared == Limit(owed_C=43, forbidden_C=47)


def test_what_was_found_in_ohms_is_shown_in_degrees(shown: TemperatureMap) -> None:
    # The invented charger's own limits: starts from 2.3 °C to 46.9 °C, goes on from 0.4 °C to 53.4 °C.
    for side, true_C in zip((*shown.start, *shown.run), (2.3, 46.9, 0.4, 53.4), strict=True):
        assert side.found is not None
        assert side.found.low <= true_C <= side.found.high
    assert shown.run[1].found is not None
    assert shown.run[1].found.failed


def test_release_is_the_first_step_back_at_which_it_goes_on(shown: TemperatureMap) -> None:
    cold, hot = shown.run
    assert cold.released_C == pytest.approx(4.0)
    assert hot.released_C is None
    assert "did not go on by itself" in shown.caption


def test_the_scale_in_ohms_is_that_of_the_curve(shown: TemperatureMap) -> None:
    # R(20 °C) = 10 kΩ exp(3435 K (1/293.15 K - 1/298.15 K)) = 12.17 kΩ: the beta law, computed.
    assert dict(shown.scale)[20.0] == "12.2 kΩ"
    assert shown.open_is_cold


def test_a_sensor_that_rises_reads_open_as_hot(breadth: dict) -> None:
    made = temperature_map(breadth["findings"], [], None, curve(PLATINUM.encode()))
    assert made is not None
    assert not made.open_is_cold


def test_without_a_curve_no_ohms_and_no_brackets(breadth: dict, declared: Specification) -> None:
    made = temperature_map(breadth["findings"], breadth["verdicts"]["verdicts"], declared, None)
    assert made is not None
    assert made.scale == ()
    assert [side.found for side in (*made.start, *made.run)] == [None] * 4


def test_a_resistance_beyond_the_curve_has_no_temperature(sensor: Curve) -> None:
    assert celsius_span(sensor, 1.0, 1e9) is None
    assert celsius_span(None, 1e3, 1e4) is None
    assert celsius_span(sensor, 10e3, 10e3) == pytest.approx((25, 25))


def test_without_starts_and_walks_there_is_no_figure(declared: Specification, sensor: Curve) -> None:
    assert temperature_map({"points": [], "walks": None}, [], declared, sensor) is None
