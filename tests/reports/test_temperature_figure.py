"""The temperature window as it is drawn: two axes that agree, windows, limits as found."""

import pytest

from reports.canvas import TRIP
from reports.temperature_figure import draw_temperature_map
from reports.temperature_map import TemperatureMap, temperature_map
from sequencer.model.curves import Curve
from sequencer.model.specification import Specification


@pytest.fixture
def shown(breadth: dict, declared: Specification, sensor: Curve) -> TemperatureMap:
    made = temperature_map(breadth["findings"], breadth["verdicts"]["verdicts"], declared, sensor)
    assert made is not None
    return made


def test_both_axes_say_the_same(shown: TemperatureMap) -> None:
    figure = draw_temperature_map(shown)
    figure.draw_without_rendering()
    main = figure.axes[1]
    (above,) = main.child_axes
    labels = dict(zip(above.get_xticks(), (text.get_text() for text in above.get_xticklabels()), strict=True))
    assert labels[20.0] == "12.2 kΩ"  # the beta law at 20 °C, computed
    assert above.get_xlim() == pytest.approx(main.get_xlim())


def test_limits_as_found_and_release_are_written_beside_them(shown: TemperatureMap) -> None:
    main = draw_temperature_map(shown).axes[1]
    written = {text.get_text(): text.get_color() for text in main.texts}
    assert set(written) == {"2.2 to 2.7 °C", "46.7 to 47.2 °C", "0.0 to 0.5 °C", "fail: 53.0 to 53.5 °C",
                            "goes on at 4.0 °C"}  # fmt: skip
    assert written["fail: 53.0 to 53.5 °C"] == TRIP


def test_open_stands_where_the_sensor_reads_it(shown: TemperatureMap) -> None:
    cold, _, hot = draw_temperature_map(shown).axes[:3]
    # Taken to be an NTC: an open contact reads as endlessly cold.
    assert [axes.get_xticklabels()[0].get_text() for axes in (cold, hot)] == ["open", "short"]


@pytest.mark.parametrize("width_in", [4.3, 8.6])
@pytest.mark.parametrize("hot_C", [25.0, 42.5])
def test_two_releases_are_written_apart(breadth: dict, sensor: Curve, width_in: float, hot_C: float) -> None:
    walks = [walk for walk in breadth["findings"]["walks"] if walk["finding"].startswith("temperature.")]
    walks.append(walks[-1] | {"celsius": hot_C, "goes_on": True})
    made = temperature_map({"walks": walks}, [], None, sensor)
    assert made is not None
    figure = draw_temperature_map(made, width_in=width_in)
    figure.draw_without_rendering()
    cold, hot = (text.get_window_extent() for text in figure.axes[1].texts if text.get_text().startswith("goes on at"))
    assert not cold.overlaps(hot)


def test_walks_alone_are_drawn(breadth: dict) -> None:
    made = temperature_map({"walks": breadth["findings"]["walks"]}, [], None, None)
    assert made is not None
    assert draw_temperature_map(made, width_in=4.3).axes
