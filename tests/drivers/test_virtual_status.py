"""Status reporting against IEEE 488.2 and SCPI-1999 (bits and error classes as published)."""

from __future__ import annotations

import pytest

from drivers.virtual.status import ERRORS, QUEUE_DEPTH, Register, ScpiError, Status, event_bit


@pytest.mark.parametrize(
    ("number", "bit"),
    [
        # SCPI-1999 volume 2, 21.8: -1xx command errors, -2xx execution, -3xx and positive device, -4xx query
        (-100, 32),
        (-113, 32),
        (-199, 32),
        (-200, 16),
        (-222, 16),
        (-299, 16),
        (-350, 8),
        (-399, 8),
        (42, 8),
        (-400, 4),
        (-410, 4),
        (-499, 4),
        (0, 0),
    ],
)
def test_error_class_sets_its_event_bit(number: int, bit: int) -> None:
    assert event_bit(number) == bit


def test_empty_queue_answers_no_error() -> None:
    assert Status().next_error() == '0,"No error"'  # SCPI-1999 volume 2, 21.8


def test_queue_is_first_in_first_out_and_reading_empties_it() -> None:
    status = Status()
    status.push(-222)
    status.push(-113)
    assert [status.next_error() for _ in range(3)] == [
        '-222,"Data out of range"',
        '-113,"Undefined header"',
        '0,"No error"',
    ]


def test_full_queue_replaces_its_last_entry_by_overflow() -> None:
    """SCPI-1999 volume 2, 21.8: the last entry becomes -350, what came later is lost, the oldest ones stay."""
    status = Status()
    for _ in range(QUEUE_DEPTH + 5):
        status.push(-113)
    entries = [status.next_error() for _ in range(QUEUE_DEPTH)]
    assert entries[:-1] == ['-113,"Undefined header"'] * (QUEUE_DEPTH - 1)
    assert entries[-1] == '-350,"Queue overflow"'
    assert status.next_error() == '0,"No error"'


def test_power_on_is_reported_once() -> None:
    status = Status()
    assert status.take_event() == 128  # IEEE 488.2: PON is bit 7
    assert status.take_event() == 0


def test_status_byte_weights() -> None:
    """Error queue 4, QUEStionable 8, MAV 16, ESB 32, MSS 64, OPERation 128; enable 4 + 8 + 128 = 140."""
    status = Status()
    status.take_event()
    assert status.byte(False) == 0
    assert status.byte(True) == 16
    status.push(-113)
    assert status.byte(False) == 4
    status.event_enable = 32
    assert status.byte(False) == 4 + 32
    status.questionable.enable = status.operation.enable = 32767
    status.questionable.update(1)
    status.operation.update(256)
    assert status.byte(False) == 4 + 8 + 32 + 128
    status.service_enable = 140
    assert status.byte(False) == 4 + 8 + 32 + 128 + 64
    status.service_enable = 16
    assert status.byte(False) & 64 == 0
    assert status.byte(True) & 64 == 64


def test_clear_keeps_enables() -> None:
    """IEEE 488.2, 10.3: *CLS clears events and queues, not the enable registers."""
    status = Status()
    status.push(-222)
    status.event_enable = status.service_enable = 16
    status.operation.enable = 256
    status.operation.update(256)
    status.clear()
    assert status.byte(False) == 0
    assert (status.event_enable, status.service_enable, status.operation.enable) == (16, 16, 256)
    assert status.operation.condition == 256


def test_event_register_latches_rising_bits_until_read() -> None:
    register = Register()
    register.update(1)
    register.update(0)
    assert (register.condition, register.take_event(), register.take_event()) == (0, 1, 0)
    register.update(2)
    register.take_event()
    register.update(2)
    assert register.event == 0


def test_errors_have_published_texts() -> None:
    """Numbers and texts as in a public SCPI-1999 error list (and SCPI-1999 volume 2, 21.8)."""
    published = {-109: "Missing parameter", -224: "Illegal parameter value", -420: "Query UNTERMINATED"}
    assert published.items() <= ERRORS.items()
    assert str(ScpiError(-131)) == '-131,"Invalid suffix"'
