"""Samples in memory."""

import numpy as np
import pytest

from sequencer.engine.series import Rows, Series, joined, joined_rows


def series(*values):
    return Series(np.arange(len(values), dtype=float), np.array(values, dtype=float), np.zeros(len(values), np.uint8))


@pytest.mark.parametrize(
    ("one", "other", "same"),
    [
        (series(1.0, np.nan), series(1.0, np.nan), True),
        (series(0.0), series(-0.0), False),  # IEEE 754-2008, 5.10: the two zeros compare equal and are not the same
        (series(1.0), series(1.0, 2.0), False),
        (series(1.0), series(np.nextafter(1.0, 2.0)), False),
    ],
)
def test_same_bits_is_stricter_than_equal(one, other, same):
    assert one.same_bits(other) is same


def test_joining_keeps_order_and_kinds():
    whole = joined([series(1.0, 2.0), series(3.0)])
    assert (whole.value.tolist(), len(whole)) == ([1.0, 2.0, 3.0], 3)
    nothing = joined([])
    assert (len(nothing), nothing.time_s.dtype, nothing.flag.dtype) == (0, np.float64, np.uint8)


def test_rows_hand_out_one_channel():
    channel, time_s = np.array([0, 1, 0], np.int16), np.array([0.0, 0.0, 1.0])
    rows = Rows(channel, time_s, np.array([1.0, 2.0, 3.0]), np.zeros(3, np.uint8))
    both = joined_rows([rows, rows])
    assert both.of(both.channel == 0).value.tolist() == [1.0, 3.0, 1.0, 3.0]
    assert len(both) == 6
