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


def leg(side: str, way: str, celsius: float, *, stop_s: float | None = None, goes_on: bool = True) -> dict:
    walked = {"finding": f"temperature.run_{side}", "way": way, "celsius": celsius}
    return walked | {"stop_s": stop_s, "goes_on": goes_on}


def latching(side: str, sign: int) -> list[dict]:
    """A walk from 25 °C: the smallest step, the quick way, the search, the stop 25 K away, the way back in vain."""
    return [
        leg(side, "probe", 25 + sign * 0.5),
        *(leg(side, "approach", 25 + sign * step) for step in (2.5, 12.5, 22.5)),
        *(leg(side, "out", 25 + sign * step) for step in (24.0, 24.5)),
        leg(side, "out", 25 + sign * 25.0, stop_s=100.0, goes_on=False),
        *(leg(side, "back", 25 + sign * step, stop_s=200.0, goes_on=False) for step in (24.0, 23.0, 22.0)),
    ]


def test_only_a_step_back_can_tell_that_the_charge_went_on_again() -> None:
    walks = [*latching("low", -1), *latching("high", 1)]
    made = temperature_map({"walks": walks}, [], None, None)
    assert made is not None
    assert [side.released_C for side in made.run] == [None, None]
    assert "at the cold end it stopped at 0.0 °C and did not go on by itself" in made.caption
    assert "at the hot end it stopped at 50.0 °C and did not go on by itself" in made.caption
    assert "went on again" not in made.caption
    # The quick way stands too briefly for a dot.
    assert [step.celsius for step in made.run[0].steps if step.out and step.charged] == [24.5, 1.0, 0.5]


def test_a_stop_on_the_quick_way_is_the_stop() -> None:
    walks = [
        leg("low", "probe", 24.5),
        leg("low", "approach", 22.5),
        leg("low", "approach", 20.0, stop_s=10.0, goes_on=False),
        leg("low", "back", 21.0, stop_s=20.0, goes_on=False),
        leg("low", "back", 22.0),
    ]
    made = temperature_map({"walks": walks}, [], None, None)
    assert made is not None
    assert "at the cold end it stopped at 20.0 °C and went on again at 22.0 °C" in made.caption


def test_a_stop_by_the_smallest_step_is_not_walked_back() -> None:
    made = temperature_map({"walks": [leg("low", "probe", 24.5, stop_s=1.0, goes_on=False)]}, [], None, None)
    assert made is not None
    assert "at the cold end it stopped at 24.5 °C and was not walked back" in made.caption


def test_a_way_that_is_not_known_tells_nothing() -> None:
    walks = [*latching("low", -1), leg("low", "over", 24.0), leg("low", "again", 23.0)]
    made = temperature_map({"walks": walks}, [], None, None)
    assert made is not None
    assert made.run[0].released_C is None


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
