"""The arithmetic of the pack against closed forms, and how far it lets time be compressed."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sequencer.engine.standin import LARGEST_MOVE_V, NEAR_V, TAPER_SHARE, Events, Follow, StandIn, Trail
from sequencer.model.pack import Pack, Relaxation

AT_ONCE = Follow(0.1, 0.05, 0, 1.0, 1.0)
EVENTS = Events(((4.075, 4.125), (4.175, 4.225)), 0.36, 1.0, 20.0)


def pack_of(relaxation: Relaxation | None = None, cells: int = 5) -> Pack:
    """3 Ah, straight from 3.0 V to 4.2 V."""
    return Pack(
        name="straight",
        cells=cells,
        capacity=3.0,
        ocv=((0.0, 3.0), (1.0, 4.2)),
        resistance=0.05 * cells,
        relaxation=relaxation,
        rated_current=4.0,
    )


def test_charge_is_counted() -> None:
    """3 A for half an hour is 1.5 Ah, half of 3 Ah (computed)."""
    stand_in = StandIn.inserted(pack_of(), 3.0)
    for _ in range(1800):
        stand_in.move(1.0, 3.0, AT_ONCE)
    assert stand_in.soc == pytest.approx(0.5)
    assert stand_in.ocv_V == pytest.approx(5 * 3.6)
    stand_in.compression = 10.0
    stand_in.move(180.0, 3.0, AT_ONCE)
    assert stand_in.soc == pytest.approx(1.0)


@given(st.floats(0.0, 4.0), st.floats(0.05, 1.0))
def test_the_node_comes_to_ocv_and_the_drop_over_what_is_played(current_A: float, gain: float) -> None:
    stand_in = StandIn.inserted(pack_of(), 3.6)
    follow = Follow(0.1, 0.15, 0, gain, 0.1)
    for _ in range(400):
        node_V = stand_in.move(0.0, current_A, follow)
    assert node_V == pytest.approx(5 * 3.6 + current_A * 0.15, abs=1e-6)


def test_relaxation_in_closed_form() -> None:
    """I R (1 - exp(-t/tau)) under a constant current, then exp(-t/tau) (computed)."""
    stand_in = StandIn.inserted(pack_of(Relaxation(resistance=0.02, time=40.0)), 3.6)
    for _ in range(60):
        stand_in.move(1.0, 2.0, AT_ONCE)
    assert stand_in.relaxation_V == pytest.approx(2.0 * 0.02 * (1 - math.exp(-60 / 40)))
    risen_V = stand_in.relaxation_V
    for _ in range(80):
        stand_in.move(0.5, 0.0, AT_ONCE)
    assert stand_in.relaxation_V == pytest.approx(risen_V * math.exp(-1))


@given(st.floats(0.0, 50.0))
def test_no_single_move_is_large(current_A: float) -> None:
    stand_in = StandIn.inserted(pack_of(), 3.6)
    before_V = stand_in.node_V
    assert abs(stand_in.move(0.1, current_A, Follow(0.1, 5.0, 0, 1.0, 0.1)) - before_V) <= 5 * LARGEST_MOVE_V + 1e-9


@settings(max_examples=12)
@given(current_A=st.floats(1.0, 6.0), asked=st.floats(1.0, 100.0), start_V=st.floats(3.8, 3.9))
def test_a_compressed_plateau_creeps_through_every_declared_band(
    current_A: float, asked: float, start_V: float
) -> None:
    """In and near a band the pack is real; between bands one scan moves a cell by 7 mV at most."""
    stand_in = StandIn.inserted(pack_of(), start_V)
    events = Events(EVENTS.bands_V, 0.36, 1.0, asked)
    cells_V: list[float] = []
    for second in range(20_000):
        cell_V = (stand_in.ocv_V + current_A * 0.25) / 5
        cells_V.append(cell_V)
        if cell_V > 4.24:
            break
        compression = stand_in.choose_compression(float(second), 5 * cell_V, current_A, events)
        assert 1.0 <= compression <= max(1.0, asked)
        stand_in.move(1.0, current_A, AT_ONCE)
    real_V = current_A * 1.2 / 3.0 / 3600.0  # what a real cell of 3 Ah and 1.2 V moves in a second
    for before_V, after_V in pairwise(cells_V):
        assert after_V - before_V <= max(0.007, real_V) + 1e-9
        if any(low - NEAR_V < before_V < high + NEAR_V for low, high in events.bands_V):
            assert after_V - before_V == pytest.approx(real_V)
        for low, _ in events.bands_V:
            assert not before_V < low - NEAR_V < low <= after_V  # no band is entered at speed


def test_a_compressed_taper_keeps_within_a_share_in_one_response_time() -> None:
    """The whole loop with an ideal constant voltage behind the pack's resistance."""
    stand_in = StandIn.inserted(pack_of(), 4.05)
    currents = []
    for second in range(4000):
        current_A = min(3.0, (21.0 - stand_in.ocv_V) / 0.25)
        if current_A < 0.2:
            break
        currents.append((current_A, stand_in.choose_compression(float(second), 21.0, current_A, EVENTS)))
        stand_in.move(1.0, current_A, AT_ONCE)
    falls = [(1 - after / before, before, times) for (before, times), (after, _) in pairwise(currents) if before < 2.9]
    assert max(fall for fall, _, _ in falls) <= TAPER_SHARE * 1.01
    assert max(times for _, _, times in falls) > 5
    assert all(times == 1.0 for _, before, times in falls if before < 1.5 * 0.36)  # the end is seen in real time


def test_nothing_flows_or_nothing_is_declared_to_end_it() -> None:
    stand_in = StandIn.inserted(pack_of(), 3.6)
    assert stand_in.choose_compression(0.0, 18.0, 0.0, EVENTS) == 1.0
    open_end = Events((), None, 1.0, 20.0)
    for second in range(30):
        compression = stand_in.choose_compression(float(second), 18.0, 3.0 - 0.05 * second, open_end)
    assert compression == 1.0  # a taper towards an end that nobody has declared


def test_a_trail_tells_falling_from_flat() -> None:
    flat, falling, short = Trail(), Trail(), Trail()
    for second in np.arange(0.0, 30.0, 0.5).tolist():
        flat.add(second, 3.0 + 0.002 * math.sin(second))
        falling.add(second, 3.0 * math.exp(-second / 450.0))
    short.add(0.0, 3.0)
    short.add(1.0, 1.0)
    assert (flat.falling, falling.falling, short.falling) == (False, True, False)
    assert falling.points[-1][0] - falling.points[0][0] <= 10.5 + 0.5


@pytest.mark.parametrize(("period_s", "scans"), [(0.1, 3), (1.0, 0)])
def test_how_the_current_is_followed(period_s: float, scans: int) -> None:
    follow = Follow.at(0.25, 0.11, 0.35, period_s)
    assert (follow.Rp_ohm, follow.Rv_ohm, follow.delay_scans) == (0.11, pytest.approx(0.14), scans)
    assert follow.lag_s == pytest.approx(period_s / follow.gain)
    assert Follow.at(0.25, 0.11, 0.35, period_s, forced=0).delay_scans == 0


def test_the_node_is_never_played_up_to_the_guards_bound() -> None:
    """What passes the bound is then nobody's doing but the charger's, or a meter's."""
    stand_in = StandIn.inserted(pack_of(), 4.15)
    for _ in range(3000):
        stand_in.move(1.0, 3.0, AT_ONCE)
    assert stand_in.soc > 1.2
    assert stand_in.node_V == pytest.approx(5 * (4.35 - 0.02))
