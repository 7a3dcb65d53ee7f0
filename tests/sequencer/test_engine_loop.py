"""The scan loop as its record shows it: time, pace, channels."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from drivers.exchange import Reply
from drivers.trouble import LinkFault
from drivers.virtual.world import World
from sequencer.engine.channels import CHANNELS
from sequencer.engine.evidence import Evidence, open_evidence


@pytest.fixture
def evidence(rehearse: Callable[..., Any]) -> Evidence:
    return open_evidence(Path(rehearse().record))


def test_time_rises_and_both_paces_are_seen(evidence: Evidence) -> None:
    current, period = evidence.trace("charger.current"), evidence.trace("loop.period")
    spacing_s = np.diff(current.time_s)
    assert np.all(spacing_s > 0)
    assert set(np.round(period.value, 9)) == {0.1, 1.0}
    assert np.max(spacing_s) <= 1.0 + 1e-6
    # fast after the first current and after the end: 5 s at least
    edges_s = current.time_s[1:][np.abs(np.diff(current.value)) > 0.2]
    for edge_s in (edges_s[0], edges_s[-1]):
        after = period.within(float(edge_s) + 0.11, float(edge_s) + 4.5)
        assert np.all(after.value == pytest.approx(0.1))


def test_every_channel_of_the_contract_is_written(evidence: Evidence) -> None:
    for channel in CHANNELS:
        assert evidence.trace(channel.name).value.size > 0, channel.name


def test_settings_move_in_small_logged_steps_while_the_charger_charges(evidence: Evidence) -> None:
    """5 to 10 mV per cell and scan at most (common practice, no source), from the second reading on."""
    window = evidence.window("charge")
    assert window is not None
    moves = evidence.trace("set.supply.voltage").within(window.start_s, window.end_s)
    assert moves.value.size > 50
    assert float(np.max(np.abs(np.diff(moves.value)))) <= 5 * 0.010 + 1e-9


def test_the_state_of_charge_follows_the_current(evidence: Evidence) -> None:
    """Ampere-seconds times compression over capacity (computed): the record alone gives the pack's own account."""
    current, soc = evidence.trace("charger.current"), evidence.trace("pack.soc")
    times = evidence.trace("pack.compression")
    common = np.intersect1d(current.time_s, soc.time_s)
    flow_A = np.maximum(current.at(common), 0.0)
    # a sample of compression is that of the stretch that ends with it; it was chosen one scan before
    gained = np.sum(flow_A[1:] * np.diff(common) * times.at(common)[1:]) / 3600.0 / 2.5
    assert soc.value[-1] - soc.value[0] == pytest.approx(gained, rel=0.01)


def test_the_node_condition_is_what_the_supply_said(evidence: Evidence) -> None:
    condition = evidence.trace("node.condition")
    mode, source_A = evidence.trace("supply.mode"), evidence.trace("supply.current")
    load_A, load_mode = evidence.trace("load.current"), evidence.trace("load.mode")
    held = (mode.at(condition.time_s) == 1) & (
        (load_mode.at(condition.time_s) != 1) | (source_A.at(condition.time_s) >= 0.05 * load_A.at(condition.time_s))
    )
    assert np.array_equal(condition.value == 1, held)


def test_a_supply_that_does_not_follow_ends_the_run_before_the_mains(
    rehearse: Callable[..., Any], monkeypatch: pytest.MonkeyPatch
) -> None:
    done = rehearse(bench={"settling: 10 ms": "settling: 1.5 s"})
    assert done.ended.ended == "bench fault"
    assert "node" in done.ended.why
    assert not open_evidence(done.record).events("standin")


def test_a_reading_is_never_older_than_its_scan(evidence: Evidence) -> None:
    for name in ("node.voltage", "charger.voltage", "charger.current", "supply.voltage", "load.voltage"):
        assert np.array_equal(evidence.trace(name).time_s, evidence.trace("loop.period").time_s), name


def test_virtual_time_is_all_that_passes(rehearse: Callable[..., Any], monkeypatch: pytest.MonkeyPatch) -> None:
    """No instrument's answer costs time on a virtual bench; only the loop's own waiting does."""
    steps: list[float] = []
    advance = World.advance
    monkeypatch.setattr(World, "advance", lambda world, dt_s: steps.append(dt_s) or advance(world, dt_s))
    done = rehearse(changes={"start": "4.00 V", "after": "10 s"})
    assert sum(steps) == pytest.approx(done.ended.performance["run_s"], abs=0.01)


@dataclass
class Later:
    """What was begun, ready only after a while; what is not ready has not come."""

    inner: Any
    clock: Any
    ready_s: float

    @property
    def ready(self) -> bool:
        return bool(self.clock.now() >= self.ready_s)

    def replies(self) -> list[Reply]:
        came: list[Reply] = self.inner.replies()
        late = [Reply(one.instrument, (), one.time_s, LinkFault(one.instrument, "no answer in time")) for one in came]
        return came if self.ready else late


def answering_after(delay_s: float) -> Callable[[Any], None]:
    """Every look at the slow group takes so long, as a scanner's channels do in wall time."""

    def opened(bench: Any) -> None:
        begin = bench.exchange.begin
        bench.exchange.begin = lambda jobs: Later(begin(jobs), bench.clock, bench.clock.now() + delay_s)

    return opened


def test_a_slow_scanner_holds_up_no_scan(rehearse_full: Callable[..., Any]) -> None:
    done = rehearse_full("charge-profile", opened=answering_after(0.8), changes={"start": "4.00 V", "after": "10 s"})
    assert done.judged.exit_status == 0
    evidence = open_evidence(done.record)
    fast = evidence.trace("loop.period")
    spacing_s, period_s = np.diff(fast.time_s), fast.value[1:]
    assert float(np.max(spacing_s[period_s < 0.2])) == pytest.approx(0.1)
    assert evidence.trace("tap1.voltage").value.size > 10
    assert evidence.trace("mains.state").value.size > 10


def test_a_scanner_that_never_comes_is_a_lost_link(rehearse_full: Callable[..., Any]) -> None:
    done = rehearse_full("charge-profile", opened=answering_after(60.0))
    assert "lost" in done.ended.why
    assert done.failing == set()
    assert done.ended.performance["run_s"] < 60.0
