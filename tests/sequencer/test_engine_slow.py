"""The slow group: what it asks, what it gives, and when a cell's supply is the bench's trouble."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any

import pytest

from sequencer.engine.guard import Trip
from sequencer.engine.slow import ASTRAY_READINGS, SlowGroup, channels_of


def group(limit_V: float = 4.6) -> SlowGroup:
    signals = SimpleNamespace(id=None, thermistor=None, taps=(), thermometer=None)
    limits = SimpleNamespace(tap=limit_V)
    bench: Any = SimpleNamespace(signals=signals, file=SimpleNamespace(bench=SimpleNamespace(limits=limits)))
    return SlowGroup(bench, 4)


def test_a_bench_without_small_contacts_has_no_channels_of_them() -> None:
    assert channels_of(group().bench, 5) == ()


def test_a_cell_above_the_benchs_limit_trips_at_once() -> None:
    with pytest.raises(Trip) as trip:
        group()._check_taps([("tap2.voltage", 1.0, 4.61)])
    assert trip.value.cause == "bench"


def test_a_cell_away_from_its_setting_trips_when_it_stays_there() -> None:
    slow = group()
    slow.set_V[2] = 3.8
    for _ in range(ASTRAY_READINGS - 1):
        slow._check_taps([("tap2.voltage", 1.0, 3.0), ("tap2.current", 1.0, 2e-5)])
    slow._check_taps([("tap2.voltage", 1.0, 3.81)])  # it was on its way
    for _ in range(ASTRAY_READINGS - 1):
        slow._check_taps([("tap2.voltage", 1.0, 3.0)])
    with pytest.raises(Trip, match="dead or overloaded channel"):
        slow._check_taps([("tap2.voltage", 1.0, float("nan"))])


def test_a_cell_that_was_never_set_is_held_against_nothing() -> None:
    slow = group()
    for _ in range(5):
        slow._check_taps([("tap1.voltage", 1.0, 0.0)])
