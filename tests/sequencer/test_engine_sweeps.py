"""Sweeps as they stand in a record: how many settings a search took, what stands between two controls, what the
charger's pins saw."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise
from typing import Any

import numpy as np
import pytest

from sequencer.engine.record_reader import Record

Rehearse = Callable[..., Any]


@pytest.fixture(scope="module")
def made(request: Any, tmp_path_factory: Any) -> dict[str, Any]:
    return {}


@pytest.fixture
def ids(made: dict[str, Any], rehearse_full: Rehearse) -> Any:
    """A lantern's ID sweep, once for this module; its charger reads the pin all the time (22 kΩ to 5.0 V)."""
    if "ids" not in made:
        made["ids"] = Record.open(rehearse_full("id-bands", spec="lantern").record, check=False)
    return made["ids"]


@pytest.fixture
def temperatures(made: dict[str, Any], rehearse_full: Rehearse) -> Any:
    if "temperatures" not in made:
        made["temperatures"] = Record.open(rehearse_full("temperature-window", spec="lantern").record, check=False)
    return made["temperatures"]


def points(record: Any) -> list[dict[str, Any]]:
    return [event for event in record.events if event["event"] == "point"]


@pytest.mark.parametrize(("side", "ratio"), [("lower", 1.25), ("upper", 1.25)])
def test_a_search_takes_as_many_settings_as_bisection_needs(ids: Any, side: str, ratio: float) -> None:
    """ceil(log2(ln 1.25 / ln 1.01)) = ceil(log2(22.4)) = 5 settings (computed: a bracket of ratio 1.25, halved)."""
    made = [point for point in points(ids) if point["role"] == f"band1.{side}_edge"]
    assert len({point["ohm"] for point in made} - {4230.0, 5170.0}) == 5
    assert math.ceil(math.log2(math.log(ratio) / math.log(1.01))) == 5


@pytest.mark.parametrize("side", ["lower", "upper"])
def test_both_sides_of_an_edge_are_shown_again_from_outside_inward(ids: Any, side: str) -> None:
    made = [point for point in points(ids) if point["role"] == f"band1.{side}_edge"]
    outside, inside = made[-2:]
    assert (outside["label"], inside["label"]) == ("no charge", "charges, band 1")
    before = [point["ohm"] for point in points(ids) if point not in (outside, inside)]
    assert {outside["ohm"], inside["ohm"]} <= set(before)
    assert max(outside["ohm"], inside["ohm"]) / min(outside["ohm"], inside["ohm"]) <= 1.01


def test_the_first_setting_is_the_geometric_middle(ids: Any) -> None:
    first = next(point for point in points(ids) if point["role"] == "band1.upper_edge")
    assert first["ohm"] == pytest.approx(math.sqrt(5.17e3 * 5.17e3 * 1.25), rel=1e-9)


def test_every_refused_point_stands_between_two_good_controls(ids: Any) -> None:
    """Before it a charge is seen that began later than the last refusal ended; after it a control, before all else."""
    seen = [event for event in ids.events if event["event"] in ("point", "control")]
    seen.sort(key=lambda event: event["start_s"])
    charged = [event.get("good", False) or event.get("label", "").startswith("charges") for event in seen]
    refused = [number for number, event in enumerate(seen) if event["event"] == "point" and not charged[number]]
    assert len(refused) >= 8
    for number in refused:
        assert charged[number - 1], seen[number]
        assert seen[number + 1]["event"] == "control"
        assert seen[number + 1]["good"]
        assert seen[number]["end_s"] - seen[number]["start_s"] >= 15.0  # three start delays of 2 s, and at least 15 s


def test_points_are_insertions_of_their_own(ids: Any) -> None:
    closed = [event for event in ids.events if event["event"] == "contact" and event["closed"]]
    watched = [event for event in ids.events if event["event"] in ("point", "control")]
    assert len(closed) == len(watched) + 1  # and the first insertion of the procedure
    spans = sorted((event["start_s"], event["end_s"]) for event in watched)
    assert all(later[0] - earlier[1] >= 4.0 for earlier, later in pairwise(spans))  # two clear dwells of 2 s


def test_the_id_pin_stands_at_its_divider(ids: Any) -> None:
    """V = 5.0 V R/(R + 22 kΩ) (Ohm's law, computed); the resistor within 0.1 % + 0.3 Ω, the scanner within 0.6 mV."""
    series = ids.series("id.sense")
    times_s, volts = np.asarray(series.time_s), np.asarray(series.value)
    checked = 0
    for point in points(ids):
        if not isinstance(point["ohm"], float):
            continue
        inside = volts[(times_s > point["start_s"] + 0.3) & (times_s < point["end_s"])]
        expected_V = 5.0 * point["ohm"] / (point["ohm"] + 22e3)
        if inside.size:
            assert float(np.mean(inside)) == pytest.approx(expected_V, rel=1.5e-3, abs=1e-3)
            checked += 1
    assert checked >= 10


# Points of the Beta law B(25/85) = 3435 K, R25 = 10 kΩ, that common 10 kΩ NTC tables print rounded (check: the field's
# table for 0 °C 28.70 kΩ, 10 °C 18.41 kΩ, 25 °C 10.00 kΩ, 40 °C 5.76 kΩ, 45 °C 4.85 kΩ, 50 °C 4.10 kΩ; computed).
TABLE = {-10: 46_290, 0: 28_704, 10: 18_410, 25: 10_000, 40: 5_759, 45: 4_847, 50: 4_101, 60: 2_981}


def test_a_point_in_celsius_comes_out_at_the_resistance_of_the_table(temperatures: Any) -> None:
    """Between two points of the table ln R runs over 1/T in a straight line (the Beta law itself)."""
    known = sorted(TABLE.items())
    made = [event for event in temperatures.events if event["event"] in ("point", "walk") and "celsius" in event]
    assert len(made) > 20
    for event in made:
        (a_C, a_ohm), (b_C, b_ohm) = next(
            pair for pair in pairwise(known) if pair[0][0] <= event["celsius"] <= pair[1][0] + 1e-9
        )
        a, b, x = (1.0 / (celsius + 273.15) for celsius in (a_C, b_C, event["celsius"]))
        expected = math.exp(math.log(a_ohm) + (math.log(b_ohm) - math.log(a_ohm)) * (x - a) / (b - a))
        assert event["ohm"] == pytest.approx(expected, rel=2e-4)


def test_the_thermistor_was_really_set_there(temperatures: Any) -> None:
    """3.3 V over 10 kΩ and the thermistor, as the scanner sees it while the resistor stands."""
    series, setting = temperatures.series("thermistor.sense"), temperatures.series("set.thermistor")
    times_s, volts = np.asarray(series.time_s), np.asarray(series.value)
    for point in points(temperatures):
        if isinstance(point["ohm"], float):
            inside = volts[(times_s > point["start_s"] + 0.3) & (times_s < point["end_s"])]
            assert np.all(np.abs(inside - 3.3 * point["ohm"] / (point["ohm"] + 10e3)) < 3e-3)
    assert {1e9, 0.0} <= set(np.asarray(setting.value).tolist())  # open and short are written down too


def test_walks_begin_with_their_smallest_step_and_go_outward_only(temperatures: Any) -> None:
    for side, sign in (("run_low", -1), ("run_high", 1)):
        walk = [e for e in temperatures.events if e["event"] == "walk" and e["finding"] == f"temperature.{side}"]
        assert walk[0]["way"] == "probe"
        assert walk[0]["celsius"] == pytest.approx(25.0 + sign * 0.5)
        outward = [e["celsius"] for e in walk if e["way"] in ("probe", "approach", "out")]
        assert all(0 < sign * (b - a) <= 2.51 for a, b in pairwise(outward))
        back = [e["celsius"] for e in walk if e["way"] == "back"]
        assert back
        assert all(sign * (b - a) < 0 for a, b in pairwise(back))
