"""Time as a device."""

from __future__ import annotations

import ast
import signal
import time
from datetime import datetime, timedelta
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers import clock as clock_module
from drivers.clock import LONGEST_SLEEP_s, VirtualClock, WallClock, iso, utc_now, wall_seconds

ROOT = Path(clock_module.__file__).resolve().parents[1]


def imported(path: Path) -> set[str]:
    nodes = list(ast.walk(ast.parse(path.read_text("utf-8"))))
    plain = {alias.name.split(".")[0] for node in nodes if isinstance(node, ast.Import) for alias in node.names}
    return plain | {
        (node.module or "").split(".")[0] for node in nodes if isinstance(node, ast.ImportFrom) and not node.level
    }


def test_only_the_clock_imports_time() -> None:
    rooms = [path for room in ("sequencer", "drivers", "reports", "procedures") for path in (ROOT / room).rglob("*.py")]
    assert len(rooms) > 50
    assert {path.relative_to(ROOT).as_posix() for path in rooms if "time" in imported(path)} == {"drivers/clock.py"}


def test_nobody_sleeps_or_draws_lots_elsewhere() -> None:
    rooms = [path for room in ("sequencer", "drivers", "reports") for path in (ROOT / room).rglob("*.py")]
    banned = ("asyncio", "sched", "random")
    assert not [path for path in rooms if imported(path) & set(banned)]


def test_wall_clock_starts_at_zero_and_goes_on() -> None:
    clock = WallClock()
    seen = [clock.now() for _ in range(100)]
    assert 0 <= seen[0] < 1
    assert seen == sorted(seen)
    assert not clock.virtual


def test_wall_clock_waits_as_long_as_asked() -> None:
    clock = WallClock()
    begun = wall_seconds()
    clock.wait_until(0.05)
    assert clock.now() >= 0.05
    assert wall_seconds() - begun < 2.0
    clock.wait_until(clock.now() - 10)
    clock.wait_until(float("nan"))


def test_wall_clock_wakes_often_so_that_a_flag_is_seen(monkeypatch: pytest.MonkeyPatch) -> None:
    """Python runs a signal's handler between two sleeps on every platform (Python's signal documentation)."""
    slept: list[float] = []
    passed = [0.0]

    def sleep(seconds: float) -> None:
        slept.append(seconds)
        passed[0] += seconds

    clock = WallClock()
    monkeypatch.setattr(time, "monotonic", lambda: clock._zero + passed[0])
    monkeypatch.setattr(time, "sleep", sleep)
    clock.wait_until(3.1)
    assert max(slept) <= LONGEST_SLEEP_s <= 0.25
    assert sum(slept) == pytest.approx(3.1)


@pytest.mark.skipif(not hasattr(signal, "setitimer"), reason="POSIX timers only")
def test_a_signal_during_a_wait_runs_its_handler_and_the_wait_goes_on() -> None:
    rung: list[float] = []
    clock = WallClock()
    before = signal.signal(signal.SIGALRM, lambda number, frame: rung.append(clock.now()))
    signal.setitimer(signal.ITIMER_REAL, 0.03)
    try:
        clock.wait_until(0.1)
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)
    assert len(rung) == 1
    assert clock.now() >= 0.1


def test_iso_is_utc_to_the_millisecond() -> None:
    """ISO 8601: 'Z' stands for UTC."""
    text = iso(utc_now())
    assert text.endswith("Z")
    assert len(text) == len("2026-01-01T00:00:00.000Z")
    assert abs(datetime.fromisoformat(text) - utc_now()) < timedelta(seconds=5)


@given(st.lists(st.floats(0, 1e5), max_size=20))
def test_virtual_clock_reaches_every_moment_and_takes_no_time_of_ours(moments: list[float]) -> None:
    ticks = [0]

    def advance(dt_s: float) -> float:
        ticks[0] += round(dt_s * 1e9)
        return ticks[0] / 1e9

    clock = VirtualClock(advance)
    for moment in moments:
        before = clock.now()
        clock.wait_until(moment)
        assert clock.now() >= max(before, moment) - 1e-9
    assert clock.virtual


def test_virtual_clock_counts_from_its_making_and_so_does_its_utc() -> None:
    now = [100.0]

    def advance(dt_s: float) -> float:
        now[0] += dt_s
        return now[0]

    clock = VirtualClock(advance)
    first = datetime.fromisoformat(clock.utc())
    assert clock.now() == 0.0
    clock.wait_until(3600.0)
    assert clock.now() == 3600.0
    assert datetime.fromisoformat(clock.utc()) - first == timedelta(hours=1)
    assert clock.waited_wall_s < 1.0
