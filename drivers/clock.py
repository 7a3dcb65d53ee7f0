"""Time as a device: the wall clock on a real bench, the bench's own on a virtual one.

The only module that imports `time`.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from typing import Protocol

LONGEST_SLEEP_s = 0.25  # so that a signal's flag is seen soon on every platform


class Clock(Protocol):
    """Run time in seconds from 0, never going back."""

    virtual: bool

    def now(self) -> float:
        """Seconds since the clock was made."""

    def wait_until(self, moment_s: float) -> None:
        """Return when `now()` is at least `moment_s`; at once if it is already."""

    def catch_up(self) -> None:
        """Take in what has passed by itself: on a virtual bench the time-out of an instrument that does not answer."""

    def utc(self) -> str:
        """The moment as ISO 8601 in UTC, to the millisecond."""


def wall_seconds() -> float:
    """Seconds of a monotonic wall clock with an arbitrary zero, for measuring what work costs."""
    return time.perf_counter()


def utc_now() -> datetime:
    """The wall clock's date and time, UTC."""
    return datetime.now(UTC)


def iso(moment: datetime) -> str:
    return moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")


class WallClock:
    """The wall clock, monotonic, with one anchor to UTC."""

    virtual = False

    def __init__(self) -> None:
        self._zero = time.monotonic()
        self._start = utc_now()

    def now(self) -> float:
        return time.monotonic() - self._zero

    def wait_until(self, moment_s: float) -> None:
        while (left := moment_s - self.now()) > 0:
            time.sleep(min(left, LONGEST_SLEEP_s))

    def catch_up(self) -> None:
        """It never lags."""

    def utc(self) -> str:
        return iso(self._start + timedelta(seconds=self.now()))


class VirtualClock:
    """The clock of a virtual bench: waiting moves the bench's time and takes none of ours."""

    virtual = True

    def __init__(self, advance: Callable[[float], float]) -> None:
        self._advance = advance
        self._now = advance(0.0)
        self._start = utc_now()
        self._zero = self._now
        self.waited_wall_s = 0.0

    def now(self) -> float:
        return self._now - self._zero

    def wait_until(self, moment_s: float) -> None:
        left = moment_s - self.now()
        if left > 0:
            begun = time.perf_counter()
            self._now = self._advance(left)
            self.waited_wall_s += time.perf_counter() - begun

    def catch_up(self) -> None:
        self._now = self._advance(0.0)

    def utc(self) -> str:
        return iso(self._start + timedelta(seconds=self.now()))
