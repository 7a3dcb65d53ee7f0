"""What the charge figure will show."""

from types import SimpleNamespace

import numpy as np
import pytest

from reports.profile import POINTS, charge_profile


def series(time_s: np.ndarray, value: np.ndarray, flag: np.ndarray | None = None) -> SimpleNamespace:
    return SimpleNamespace(time_s=time_s, value=value, flag=np.zeros(time_s.size, np.uint8) if flag is None else flag)


def stepped() -> tuple[SimpleNamespace, SimpleNamespace, dict]:
    """Two constant currents, the first up to 20.5 V; 12,000 samples."""
    time_s = np.arange(12_000.0)
    current = np.select([time_s < 6000, time_s < 11_000], [3.0, 1.5], 0.0)
    voltage = np.select([time_s < 6000, time_s < 11_000], [16 + 4.5 * time_s / 5999, 20 + time_s / 11_000], 20.0)

    def stage(kind: str, start_s: float, end_s: float) -> dict:
        return {"kind": kind, "start_s": start_s, "end_s": end_s}

    stages = [stage("cc", 0.0, 5999.0), stage("cc", 6000.0, 10_999.0), stage("rest", 11_000.0, 11_999.0)]
    return series(time_s, voltage), series(time_s, current), {"stages": stages, "voltage_limit_V": None}


def test_a_step_is_marked_at_the_voltage_where_it_came() -> None:
    profile = charge_profile(*stepped())
    assert profile is not None
    (level,) = profile.voltage_levels
    assert level.value == pytest.approx(20.5)  # computed: the trace's own end of the first stage
    assert level.words == "step at 20.5 V"
    assert profile.voltage_V.time_s.size <= POINTS


def test_regulation_and_end_are_levels(content: dict) -> None:
    time_s = np.arange(0.0, 2600.0)
    profile = charge_profile(series(time_s, time_s), series(time_s, time_s), content["findings"]["classification"])
    assert profile is not None
    assert [level.words for level in profile.voltage_levels] == ["voltage limit 21 V"]
    assert [level.words for level in profile.current_levels] == ["ended near 150 mA"]


def test_stale_overloaded_and_nan_samples_are_left_out_and_counted() -> None:
    time_s = np.arange(10.0)
    flag = np.array([0, 1, 2, 4, 0, 0, 0, 0, 0, 0], np.uint8)  # good, stale, overload, suspect (drawn)
    value = np.where(time_s == 5, np.nan, 7.0)
    profile = charge_profile(series(time_s, value, flag), series(time_s, time_s), {})
    assert profile is not None
    assert profile.left_out == 3
    assert np.flatnonzero(np.isnan(profile.voltage_V.level)).tolist() == [1, 2, 5]


def test_the_window_follows_the_finding_and_trips_are_marked(content: dict) -> None:
    time_s = np.arange(0.0, 5000.0)
    trip = {"t": 1200.0, "event": "trip", "cause": "bench"}
    profile = charge_profile(series(time_s, time_s), series(time_s, time_s), {}, [*content["events"], trip])
    assert profile is not None
    assert profile.body == (15.0, 2667.0)
    assert 0 <= profile.window[0] < 15
    assert 2667 < profile.window[1] < 2800
    assert [(one.time_s, one.words) for one in profile.trips] == [(1200.0, "trip (bench)")]


def test_a_record_without_samples_has_no_figure() -> None:
    empty = series(np.empty(0), np.empty(0))
    assert charge_profile(empty, empty, {}) is None


@pytest.mark.parametrize(
    ("other", "shown"),
    [
        ({"event": "control", "start_s": 90.0, "end_s": 98.0}, (100.0, 916.0)),
        ({"event": "point", "start_s": 905.0, "end_s": 950.0}, (84.0, 900.0)),
        ({"event": "control", "start_s": 40.0, "end_s": 60.0}, (84.0, 916.0)),
    ],
)
def test_no_other_insertion_reaches_into_the_figure(other: dict, shown: tuple[float, float]) -> None:
    time_s = np.arange(1000.0)
    events = [other, window("charges", 110, 112, mains_s=100), window("charge", 112, 900)]
    profile = charge_profile(series(time_s, time_s), series(time_s, time_s), {}, events)
    assert profile is not None
    assert profile.window == pytest.approx(shown)  # computed: 2 % of 800 s at either side


def window(finding: str, start_s: float, end_s: float, **more: float) -> dict:
    return {"t": end_s, "event": "finding-window", "finding": finding, "start_s": start_s, "end_s": end_s, **more}


@pytest.mark.parametrize(
    ("events", "body"),
    [
        ([window("charges", 14, 16, mains_s=10), window("charge", 16, 900)], (10.0, 900.0)),
        # Insertions of later steps are not part of the charge.
        ([window("charges", 14, 16), window("charge", 16, 900), window("charges", 950, 990)], (14.0, 900.0)),
        # A trip during the charge leaves no window of it behind.
        ([window("charges", 14, 16, mains_s=10), {"t": 700.0, "event": "trip", "cause": "charger"}], (10.0, 700.0)),
        ([window("charges", 14, 16) | {"end_s": None}], (0.0, 999.0)),
    ],
)
def test_what_of_a_record_is_the_charge(events: list[dict], body: tuple[float, float]) -> None:
    time_s = np.arange(1000.0)
    profile = charge_profile(series(time_s, time_s), series(time_s, time_s), {}, events)
    assert profile is not None
    assert profile.body == body
