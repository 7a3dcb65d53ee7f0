"""A foreign log made fit to read: finite rows in time order, and a count of what was left out."""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
Mask = npt.NDArray[np.bool_]


@dataclass(frozen=True)
class Log:
    """Voltage and current over time, (n,) each, finite, time never falling; equal times are kept (a logged step)."""

    time_s: Array
    voltage_V: Array
    current_A: Array
    not_finite: int
    out_of_order: int

    @property
    def rows(self) -> int:
        """Rows that are left."""
        return self.time_s.size


def sanitise(time_s: npt.ArrayLike, voltage_V: npt.ArrayLike, current_A: npt.ArrayLike) -> Log:
    """Drops rows that hold no number, then the fewest rows whose removal leaves time in order.

    time_s, voltage_V, current_A : (n,), s, V, A, current positive into the pack.
    A clock that jumps back is not repaired: where a row belongs would be a guess.
    Raises ValueError naming the column that is not a row of numbers or has another length.
    """
    columns = [_column("time_s", time_s), _column("voltage_V", voltage_V), _column("current_A", current_A)]
    for name, column in zip(("voltage_V", "current_A"), columns[1:], strict=True):
        if column.size != columns[0].size:
            raise ValueError(f"{name}: expected {columns[0].size} values as in time_s, got {column.size}")
    finite = np.isfinite(columns[0]) & np.isfinite(columns[1]) & np.isfinite(columns[2])
    time, voltage, current = (column[finite] for column in columns)
    ordered = in_time_order(time)
    return Log(time[ordered], voltage[ordered], current[ordered], int(np.sum(~finite)), int(np.sum(~ordered)))


def in_time_order(time_s: Array) -> Mask:
    """The largest choice of rows whose time never falls, (n,) of bool: a wrong row does not cost those after it."""
    if time_s.size < 2 or bool(np.all(np.diff(time_s) >= 0.0)):
        return np.ones(time_s.size, dtype=np.bool_)
    return _longest_rising(time_s.tolist())


def _longest_rising(times: list[float]) -> Mask:
    """Patience sorting: ends[k] is the earliest last time of any choice of k + 1 rows."""
    ends: list[float] = []
    rows: list[int] = []
    before = [-1] * len(times)
    for row, time in enumerate(times):
        k = bisect_right(ends, time)
        before[row] = rows[k - 1] if k else -1
        ends[k : k + 1] = [time]
        rows[k : k + 1] = [row]
    keep = np.zeros(len(times), dtype=np.bool_)
    row = rows[-1]
    while row >= 0:
        keep[row] = True
        row = before[row]
    return keep


def _column(name: str, values: npt.ArrayLike) -> Array:
    try:
        column = np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError) as fault:
        raise ValueError(f"{name}: expected numbers, {fault}") from fault
    if column.ndim != 1:
        raise ValueError(f"{name}: expected one row of numbers, got shape {column.shape}")
    return column
