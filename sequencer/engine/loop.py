"""The scan loop: the only place where time passes during a run.

Each scan: read the fast group, write it down, let the guard look, move the stand-in, decide when to look next.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from drivers.clock import wall_seconds
from drivers.exchange import Pending
from drivers.open_bench import OpenBench
from drivers.roles import Deed
from drivers.trouble import LinkFault
from sequencer.engine.channels import SampleFlag
from sequencer.engine.guard import Guard
from sequencer.engine.pace import FAST_s, Pace, QUIET_s
from sequencer.engine.scan import Scan, Scanner, Seen
from sequencer.engine.slow import PERIOD_s as SLOW_PERIOD_s
from sequencer.engine.slow import SlowGroup
from sequencer.engine.standin import Events, Follow, StandIn, tap_volts

if TYPE_CHECKING:
    from sequencer.engine.journal import Journal
    from sequencer.engine.record import RecordFolder

SLOW_PATIENCE_s = 1.0
CLOSE_s = 0.2  # how often the slow group is asked while the taps are watched
GOLDEN = 0.6180339887498949  # its multiples fill any period evenly
SMALLEST_TAP_MOVE_V = 0.001
SMALLEST_MOVE_V = 0.0005  # half of the resolution of common supplies: smaller moves would not be made


class Interrupted(Exception):
    """A person or the system asked the run to end."""


class RecordLost(Exception):
    """The disk does not take the record any more."""


@dataclass
class StopFlag:
    """Set by a signal handler, read by the loop."""

    why: str | None = None


@dataclass
class Shares:
    """Wall seconds by what they were spent on."""

    exchange_s: float = 0.0
    waiting_s: float = 0.0
    record_s: float = 0.0
    scans: int = 0


@dataclass
class Loop:
    """Holds what a run needs from scan to scan."""

    bench: OpenBench
    record: RecordFolder
    journal: Journal
    guard: Guard
    pace: Pace
    stop: StopFlag
    events: Events
    on_scan: Callable[[Scan], None] = field(default=lambda scan: None)
    stand_in: StandIn | None = None
    follow: dict[float, Follow] = field(default_factory=dict)
    shares: Shares = field(default_factory=Shares)
    last: Scan | None = None
    stand_in_words: dict[str, object] | None = None
    slow: SlowGroup | None = None
    tap_offsets_V: tuple[float, ...] = ()  # of each cell against the mean; empty: no taps are played
    closely: bool = False  # the taps are watched: fast, and never in step with what the charger does
    _set_V: float | None = None
    _load_A: float = 0.0
    _mains: int = 0

    def __post_init__(self) -> None:
        self._scanner = Scanner(self.bench)
        self._next_s = self.bench.clock.now()
        self._slow_s = 0.0
        self._tap_V: dict[int, float] = {} if self.slow is None else self.slow.set_V
        self.guard.connected = self.bench.signals.power is None
        self._asked: Pending | None = None  # the slow group, under way
        self._asked_s = 0.0
        self._held_s = 0.0  # since the scan before, by instruments that were waited for

    @property
    def now_s(self) -> float:
        return self.bench.clock.now()

    def observe(self, duration_s: float, until: Callable[[Scan], bool] | None = None) -> bool:
        """Scan for `duration_s`, or until `until(scan)` is true; returns whether it came true.

        Raises Trip (guard), Interrupted, RecordLost, BenchFault (a setting was refused).
        """
        end_s = self.now_s + duration_s
        while True:
            scan = self._one()
            if until is not None and until(scan):
                return True
            if scan.time_s >= end_s - 1e-9:
                return False

    def set(self, *deeds: Deed) -> None:
        """Carry out settings between scans, prove them, write them down."""
        begun_s = self.now_s
        self.bench.hands.do(deeds)
        self._held_s += self.now_s - begun_s
        for deed in deeds:
            self._note(deed)
        self.look_closely()

    def look_closely(self) -> None:
        """Fast pace for a while: something is about to be measured."""
        self.pace = self.pace.moved(self.now_s)
        self._next_s = min(self._next_s, self.now_s + FAST_s)

    def event(self, name: str, /, **fields: object) -> None:
        self.record.event(round(self.now_s, 3), name, **fields)

    def start_afresh(self) -> None:
        """After the safe state in the middle of a run: nothing is energised, and no scan before counts any more."""
        self.stand_in, self.follow, self.last, self.tap_offsets_V = None, {}, None, ()
        self._set_V, self._load_A, self._mains = None, 0.0, 0
        self.guard.forget(connected=self.bench.signals.power is None)
        if self.slow is not None:
            self.slow.forget()
        self.journal.append("set.mains", self.now_s, 0.0)
        self.event("mains", on=False)
        if self.bench.signals.power is not None:
            self.event("contact", name="b_plus", closed=False)
        self._slow_s, self._next_s, self._asked, self.closely = 0.0, self.now_s, None, False
        self.look_closely()

    def _note(self, deed: Deed) -> None:
        bench, time_s = self.bench, self.now_s
        if deed.speaker is bench.supply and deed.what == "voltage":
            self._set_V = deed.value
            self.journal.append("set.supply.voltage", time_s, deed.value or 0.0)
        elif deed.speaker is bench.load and deed.what == "current":
            self._load_A = deed.value or 0.0
            self.journal.append("set.load.current", time_s, self._load_A)
        elif deed.what == "voltage" and (number := self._tap_of(deed)) is not None:
            self._tap_V[number] = deed.value or 0.0
            self.journal.append(f"set.tap{number}", time_s, self._tap_V[number])
        elif deed.what in ("close", "open") and deed in _power(bench):
            self.guard.connected = deed.what == "close"
            self.event("contact", name="b_plus", closed=self.guard.connected)
        elif deed.speaker is bench.mains and deed.what in ("on", "off"):
            self._mains = int(deed.what == "on")
            if self.slow is not None:
                self.slow.mains_on = bool(self._mains)
            self.journal.append("set.mains", time_s, self._mains)
            self.event("mains", on=bool(self._mains))

    def _tap_of(self, deed: Deed) -> int | None:
        """Which cell a setting of a tap supply plays, from 1."""
        taps = enumerate(self.bench.signals.taps, 1)
        return next((n for n, tap in taps if tap.supply is deed.speaker and tap.channel == deed.channel), None)

    def _one(self) -> Scan:
        begun = wall_seconds()
        self.bench.clock.wait_until(self._next_s)
        waited = wall_seconds()
        if self.stop.why is not None:
            raise Interrupted(self.stop.why)
        period_s = self._period_s(self.now_s)
        begun_s = self.now_s
        scan = self._scanner.scan(wait_s=period_s)
        self._held_s += self.now_s - begun_s
        asked = wall_seconds()
        self._write(scan, period_s)
        written = wall_seconds()
        self.shares.waiting_s += waited - begun
        self.shares.exchange_s += asked - waited
        self.shares.record_s += written - asked
        self.shares.scans += 1
        self.guard.held_s, self._held_s = self._held_s, 0.0
        self.guard.check(scan, period_s, self._set_V)
        self._look_around(scan)
        self._follow(scan)
        self.last = scan
        self._next_s = scan.time_s + self._period_s(scan.time_s) + self._out_of_step_s()
        self.on_scan(scan)
        return scan

    def _period_s(self, time_s: float) -> float:
        return FAST_s if self.closely else self.pace.period_s(time_s)

    def _out_of_step_s(self) -> float:
        """Readings at a fixed pace would show one moment of a balancing that goes on and off at that pace."""
        return FAST_s * (self.shares.scans * GOLDEN % 1.0) if self.closely else 0.0

    def _write(self, scan: Scan, period_s: float) -> None:
        failure = self.record.failure
        if failure is not None:
            raise RecordLost(str(failure)) from failure
        self._sample("node.voltage", scan.node_V)
        self._sample("charger.voltage", scan.charger_V)
        self._sample("charger.current", scan.current_A)
        append, time_s = self.journal.append, scan.supply_seen.time_s
        if scan.supply_seen.fault is None:
            append("supply.voltage", time_s, scan.supply.voltage_V)
            append("supply.current", time_s, scan.supply.current_A)
            append("supply.mode", time_s, scan.supply.mode)
        time_s = scan.load_seen.time_s
        if scan.load_seen.fault is None:
            append("load.voltage", time_s, scan.load.voltage_V)
            append("load.current", time_s, scan.load.current_A)
            append("load.mode", time_s, scan.load.mode)
        append("node.condition", scan.time_s, float(scan.voltage_condition))
        append("loop.period", scan.time_s, period_s)
        if self.stand_in is not None:
            append("pack.ocv", scan.time_s, self.stand_in.ocv_V)
            append("pack.soc", scan.time_s, self.stand_in.soc)
            append("pack.compression", scan.time_s, self.stand_in.compression)

    def _sample(self, channel: str, seen: Seen) -> None:
        if seen.fault is None:
            flag = SampleFlag.GOOD if seen.good else SampleFlag.OVERLOAD
            self.journal.append(channel, seen.time_s, seen.value, flag)

    def look_around_next(self) -> None:
        """The slow group is due at the next scan, whatever its period."""
        self._slow_s = 0.0

    def _look_around(self, scan: Scan) -> None:
        """The slow group: asked when it is due, read at the first scan that finds it answered, never waited for."""
        if self.slow is None:
            return
        begun, begun_s = wall_seconds(), self.now_s
        if self._asked is None and scan.time_s >= self._slow_s:
            self._asked, self._asked_s = self.slow.begin(), begun_s
            self._slow_s = scan.time_s + (CLOSE_s if self.closely else SLOW_PERIOD_s)
            self._held_s += self.now_s - begun_s
        if self._asked is not None and (self._asked.ready or self.now_s - self._asked_s >= SLOW_PATIENCE_s):
            replies, self._asked = self._asked.replies(), None
            for channel, time_s, value in self.slow.read(replies):
                self.journal.append(channel, time_s, value, SampleFlag.GOOD if value == value else SampleFlag.OVERLOAD)
        self.shares.exchange_s += wall_seconds() - begun

    def _follow(self, scan: Scan) -> None:
        """Pace, compression, and the next node voltage."""
        if not scan.current_A.good:
            return
        current_A = scan.current_A.value
        self.pace = self.pace.seen(scan.time_s, current_A)
        if self.stand_in is None or not self.follow:
            return
        dt_s = 0.0 if self.last is None else scan.time_s - self.last.time_s
        follow = self.follow[self._period_s(scan.time_s)]
        node_V = self.stand_in.move(dt_s, max(current_A, 0.0), follow)
        if scan.charger_V.good:
            self.stand_in.choose_compression(scan.time_s, scan.charger_V.value, current_A, self.events)
        if self._set_V is None or abs(node_V - self._set_V) >= SMALLEST_MOVE_V:
            self._move_node(node_V)
        # With B+ open the charger's contacts show anything; the cells are still those of the pack at the node.
        pack_V = scan.charger_V if self.guard.connected else scan.node_V
        if self.tap_offsets_V and pack_V.good:
            self.move_taps(pack_V.value)

    def move_taps(self, pack_V: float) -> None:
        """Set the cells that supplies play to their share of the pack's voltage and their offsets, in one exchange."""
        taps = self.bench.signals.taps
        volts = tap_volts(pack_V, len(self.tap_offsets_V), self.tap_offsets_V)
        moved = [
            Deed(taps[number - 1].supply, "voltage", value_V, channel=taps[number - 1].channel)
            for number, value_V in enumerate(volts, 1)
            if abs(value_V - self._tap_V.get(number, 0.0)) >= SMALLEST_TAP_MOVE_V
        ]
        if not moved:
            return
        begun, begun_s = wall_seconds(), self.now_s
        replies = self.bench.exchange([deed.job for deed in moved], FAST_s)
        self._held_s += self.now_s - begun_s
        self.shares.exchange_s += wall_seconds() - begun
        for deed, reply in zip(moved, replies, strict=True):
            if not isinstance(reply.fault, LinkFault):
                deed.speaker.verify(reply, deed.what, deed.value)
                self._note(deed)

    def _move_node(self, node_V: float) -> None:
        begun, begun_s = wall_seconds(), self.now_s
        deed = Deed(self.bench.supply, "voltage", node_V)
        reply = self.bench.exchange([deed.job], FAST_s)[0]
        self._held_s += self.now_s - begun_s
        self.shares.exchange_s += wall_seconds() - begun
        if isinstance(reply.fault, LinkFault):
            return  # late: the next scan of the supply shows it, and the guard counts
        self.bench.supply.verify(reply, deed.what, deed.value)
        self._set_V = node_V
        self.journal.append("set.supply.voltage", self.now_s, node_V)

    def follow_at(self, settling_s: float, fixture_ohm: float, pack_ohm: float, forced: int | None = None) -> None:
        """Work out how to follow the current at both paces."""
        self.follow = {
            period_s: Follow.at(pack_ohm, fixture_ohm, settling_s, period_s, forced) for period_s in (FAST_s, QUIET_s)
        }


def _power(bench: OpenBench) -> tuple[Deed, ...]:
    """The deeds that close and open B+ itself."""
    power = bench.signals.power
    return () if power is None else (power.b_plus.close, power.b_plus.open)
