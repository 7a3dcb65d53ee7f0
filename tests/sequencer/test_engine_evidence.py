"""What the judging reads of a record: traces, windows, files; and what it refuses."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.faults import BadInput
from sequencer.engine.durable import RecordError
from sequencer.engine.evidence import SAME_MOMENT_s, Trace, open_evidence

QUICK = {"start": "4.00 V", "after": "10 s"}
TRACE = Trace(np.array([0.0, 1.0, 2.0, 4.0]), np.array([10.0, 11.0, 12.0, 14.0]))


def test_within_takes_both_ends() -> None:
    assert TRACE.within(1.0, 2.0).value.tolist() == [11.0, 12.0]
    assert TRACE.within(5.0, 9.0).value.size == 0


def test_at_is_what_was_known_at_that_moment() -> None:
    moments_s = np.array([-1.0, 0.5, 2.0, 3.9, 4.0 - SAME_MOMENT_s / 2, 9.0])
    assert TRACE.at(moments_s).tolist()[1:] == [10.0, 12.0, 12.0, 14.0, 14.0]  # of one scan: the same moment
    assert np.isnan(TRACE.at(moments_s)[0])
    assert np.isnan(Trace(np.array([]), np.array([])).at(moments_s)).all()


@given(st.lists(st.floats(0, 100), min_size=1, max_size=20, unique=True), st.floats(0, 100), st.floats(0, 100))
def test_within_keeps_order_and_loses_nothing(times_s: list[float], one_s: float, two_s: float) -> None:
    trace = Trace(np.array(sorted(times_s)), np.arange(len(times_s), dtype=float))
    low_s, high_s = sorted((one_s, two_s))
    inside = trace.within(low_s, high_s)
    assert inside.time_s.tolist() == [t for t in sorted(times_s) if low_s - 1e-9 <= t <= high_s + 1e-9]


def test_a_record_opens_as_what_was_run(rehearse: Callable[..., Any]) -> None:
    record = rehearse(changes=QUICK).record
    evidence = open_evidence(record)
    insert = evidence.procedure.steps[0].insert
    assert insert is not None
    assert insert.cell_voltage == 4.0  # the change of the command line, not the file's own value
    assert evidence.pack.cells == 5
    assert evidence.bench.dialect("node_supply").name == "scpi-supply"
    assert evidence.ended == "complete"
    assert evidence.trip is None
    window, begun_s = evidence.window("charge"), evidence.begun("charge")
    assert window is not None
    assert begun_s is not None
    assert 0 < begun_s <= window.start_s < window.end_s
    assert evidence.window("no such finding") is None
    assert evidence.begun("no such step") is None
    with pytest.raises(BadInput, match=r"other\.yaml"):
        open_evidence(record, ("other.yaml", b"packmime: specification 1\n"))
    # an event that outlives the samples, as a full disk leaves it, tells of what was not kept
    last_s = float(evidence.record.series("loop.period").time_s[-1])
    for end_s, counts in ((last_s, 1), (last_s + 1.0, 2), (last_s + 1.2, 2)):
        evidence.record.events.append({"event": "point", "start_s": last_s - 5.0, "end_s": end_s, "t": end_s})
        assert len(evidence.events("point")) == counts


def test_a_record_that_was_changed_is_not_judged(rehearse: Callable[..., Any]) -> None:
    record = rehearse(changes=QUICK).record
    pack = record / "data" / "inputs" / "pack.yaml"
    pack.chmod(0o644)
    pack.write_bytes(pack.read_bytes().replace(b"180", b"190"))
    with pytest.raises(RecordError, match="not as it was sealed"):
        open_evidence(record)
