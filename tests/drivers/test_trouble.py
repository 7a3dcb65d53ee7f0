"""What can go wrong between us and an instrument."""

from __future__ import annotations

import pickle

import pytest

from drivers.trouble import BenchFault, InstrumentFault, LinkFault, ReplyFault

KINDS = (BenchFault, LinkFault, ReplyFault, InstrumentFault)


@pytest.mark.parametrize("kind", KINDS)
def test_names_the_instrument_first(kind: type[BenchFault]) -> None:
    fault = kind("meter_node", "no answer in time")
    assert str(fault) == "meter_node: no answer in time"
    assert (fault.instrument, fault.what) == ("meter_node", "no answer in time")


@pytest.mark.parametrize("kind", KINDS)
def test_survives_the_way_to_another_process(kind: type[BenchFault]) -> None:
    back = pickle.loads(pickle.dumps(kind("mains", "lost")))
    assert type(back) is kind
    assert (back.instrument, back.what) == ("mains", "lost")


def test_one_except_catches_all_and_none_is_another() -> None:
    for kind in KINDS[1:]:
        assert issubclass(kind, BenchFault)
        assert not any(issubclass(kind, other) for other in KINDS[1:] if other is not kind)
