"""Putting a pack in and taking it out: which contact moves when, and what the charger is shown meanwhile."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise
from typing import Any

import numpy as np
import pytest

from sequencer.engine.record_reader import Record

Rehearse = Callable[..., Any]


@pytest.fixture
def watched(rehearse_full: Rehearse, tmp_path: Any) -> tuple[Any, list[tuple[float, str]]]:
    """One insertion and one removal; (time, contact and what it did) in order."""
    procedure = tmp_path / "once.yaml"
    procedure.write_text(
        "packmime: procedure 1\nname: once\npurpose: Puts a pack in and out.\nsteps:\n"
        "  - insert: {cell_voltage: 3.70 V}\n    expect: charges\n  - remove: {}\njudge: [charges]\n"
    )
    moves: list[tuple[float, str]] = []

    def listen(bench: Any) -> None:
        usual = bench.hands.do

        def do(deeds: Any) -> None:
            moves.extend(
                (bench.clock.now(), f"{deed.what} {deed.channel}") for deed in deeds if deed.speaker.name == "relays"
            )
            usual(deeds)

        bench.hands.do = do

    found = rehearse_full(str(procedure), opened=listen)
    assert found.verdicts == {"charges": "pass"}
    return found, [move for move in moves if move[1] != "clear None"]


def test_signals_before_power_and_power_through_its_resistor(watched: Any) -> None:
    """Contacts of the bench: 1 B+, 2 B-, 3 pre-charge, 4 ID, 5 thermistor, 11 to 14 taps (field practice: signals
    first, then B+ through a resistor; reverse on the way out)."""
    _, moves = watched
    closed = [what for _, what in moves].index("close 2")
    order = [what for _, what in moves[closed:]]
    assert order[:10] == [*(f"close {name}" for name in (2, 5, 4, 11, 12, 13, 14, 3, 1)), "open 3"]
    assert order[10:] == [f"open {name}" for name in (1, 3, 4, 5, 11, 12, 13, 14, 2)]
    at_s = {what: time_s for time_s, what in moves[closed:]}
    assert at_s["close 3"] - at_s["close 14"] >= 0.2 - 1e-6
    assert at_s["close 1"] - at_s["close 3"] >= 0.3 - 1e-6
    assert all(later[0] >= earlier[0] for earlier, later in pairwise(moves))


def test_every_contact_is_opened_before_the_first_energy(watched: Any) -> None:
    _, moves = watched
    assert {what for _, what in moves[:9]} == {f"open {name}" for name in (1, 2, 3, 4, 5, 11, 12, 13, 14)}


def test_the_whole_dwell_passes_without_the_pack(watched: Any) -> None:
    """Two clear dwells of 2 s between B+ opening and the end; B- opens after the first, once all is proven."""
    found, moves = watched
    opened_s = [time_s for time_s, what in moves if what == "open 1"][-1]
    b_minus_s = [time_s for time_s, what in moves if what == "open 2"][-1]
    end_s = Record.open(found.record, check=False).events[-1]["t"]
    assert b_minus_s - opened_s >= 2.0
    assert end_s - b_minus_s >= 2.0


def test_cells_stand_as_the_pack_while_b_plus_is_open(watched: Any) -> None:
    """From the moment they are set until the run ends; the charger's open contacts say nothing of the pack."""
    found, _ = watched
    record = Record.open(found.record, check=False)
    for cell in (1, 2, 3, 4):
        set_s = record.series(f"set.tap{cell}").time_s[0]
        for channel in (f"set.tap{cell}", f"tap{cell}.voltage"):
            series = record.series(channel)
            late = np.asarray(series.time_s) > set_s + (0.1 if channel.endswith("voltage") else -1.0)
            values = np.asarray(series.value)[late]
            assert values.size
            assert np.all((values > 3.6) & (values < 3.95)), (channel, values)
