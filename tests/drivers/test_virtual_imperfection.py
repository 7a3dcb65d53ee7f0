"""Errors of instruments: sizes, bounds, and what they may not depend on."""

from __future__ import annotations

import itertools
import statistics

import numpy as np
import pytest

from drivers.virtual.imperfection import Drift, Imperfect, Span, generator

SPAN = Span(10.0, 35e-6, 5e-6)


def test_generators_of_two_kinds_are_apart_and_of_one_kind_the_same() -> None:
    same = [generator(3, "meter", "noise").standard_normal() for _ in range(2)]
    others = [generator(4, "meter", "noise"), generator(3, "meter_", "noise"), generator(3, "meter", "gain")]
    assert same[0] == same[1]
    assert len({same[0], *(other.standard_normal() for other in others)}) == 4


def test_gains_and_offsets_have_a_third_of_the_half_width_and_stay_inside() -> None:
    """Over many individuals; the standard deviation of a normal cut at 2.4 of it is 0.97 of the whole one's."""
    errors = [
        Imperfect((Span(10.0, 1e-3, 0.0),), seed, "m", "voltage", 1.0).programmed(10.0) / 10.0 - 1
        for seed in range(600)
    ]
    assert max(abs(error) for error in errors) <= 0.8e-3 * (1 + 1e-9)
    assert statistics.pstdev(errors) == pytest.approx(1e-3 / 3, rel=0.1)
    assert abs(statistics.fmean(errors)) < 4 * 1e-3 / 3 / np.sqrt(600)


def test_readings_stay_inside_the_accuracy_statement() -> None:
    """No sound individual may lie outside what its family promises, at any time of a day."""
    for seed in range(40):
        meter = Imperfect((SPAN,), seed, "m", "voltage", 1.0)
        worst = max(abs(meter.read(8.0, hour * 3600.0) - 8.0) for hour in range(24))
        assert worst <= 8.0 * SPAN.reading + 10.0 * SPAN.of_range * 1.3


def test_noise_is_a_twentieth_of_the_range_part_and_averages_out() -> None:
    meter = Imperfect((SPAN,), 1, "m", "voltage", 1.0)
    expected = 10.0 * SPAN.of_range / 20
    plain = [meter.read(5.0, 0.0) for _ in range(2000)]
    averaged = [meter.read(5.0, 0.0, averaged=100.0) for _ in range(2000)]
    assert statistics.pstdev(plain) == pytest.approx(expected, rel=0.1)
    assert statistics.pstdev(averaged) == pytest.approx(expected / 10, rel=0.1)


def test_ideal_instrument_is_ideal() -> None:
    ideal = Imperfect((Span(10.0, 0.01, 0.01, 0.1),), 1, "m", "voltage", 0.0)
    assert (ideal.read(1.2345678, 55.0), ideal.programmed(1.2345678)) == (1.2345678, 1.2345678)


def test_scale_scales() -> None:
    one, three = (Imperfect((SPAN,), 5, "m", "voltage", scale) for scale in (1.0, 3.0))
    assert three.read(8.0, 77.0) - 8.0 == pytest.approx(3 * (one.read(8.0, 77.0) - 8.0), rel=1e-9)


def test_resolution_rounds() -> None:
    coarse = Imperfect((Span(60.0, 3e-4, 1e-4, 1e-3),), 1, "s", "voltage", 1.0)
    value = coarse.read(18.0, 0.0)
    assert round(value, 3) == pytest.approx(value, abs=1e-12)


def test_drift_depends_on_time_alone() -> None:
    often, seldom = (Drift(generator(1, "m", "drift"), 1.0) for _ in range(2))
    dense = [often.at(second / 2) for second in range(20_000)]
    assert seldom.at(9_000.0) == dense[18_000]


def test_drift_is_slow_bounded_and_of_its_size() -> None:
    drift = Drift(generator(2, "m", "drift"), 2.0)
    values = [drift.at(10.0 * k) for k in range(40_000)]
    assert max(map(abs, values)) <= 6.0
    assert statistics.pstdev(values) == pytest.approx(2.0, rel=0.15)
    steps = [b - a for a, b in itertools.pairwise(values)]
    # An autoregressive step of a stationary process: rms sd sqrt(2 (1 - exp(-10 s / 900 s))), textbook, computed.
    assert statistics.pstdev(steps) == pytest.approx(2.0 * 0.1487, rel=0.05)
