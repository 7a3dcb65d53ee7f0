"""The slow group: what scanner, tap supplies, mains switch and thermometer say, once in a while beside the fast group.

Nobody waits for it: the guard goes on with the fast group while a scanner is at its channels.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from drivers.exchange import Job, Pending, Reply
from drivers.open_bench import OpenBench
from drivers.signal_roles import Lists
from drivers.text.si import si
from drivers.trouble import BenchFault
from sequencer.engine.channels import Channel
from sequencer.engine.guard import LOST_READINGS, LinkLost, Trip

PERIOD_s = 2.0
ASTRAY_V = 0.05  # of a cell against what its supply was set to
ASTRAY_READINGS = 2  # in a row: one may fall between command and output


@dataclass(frozen=True)
class _Question:
    """One question, and the record's channel and factor of each of its values."""

    job: Job
    speaker: Lists
    what: str
    channels: tuple[str, ...]
    names: tuple[tuple[str, float], ...]


@dataclass
class SlowGroup:
    """Questions of the slow group, asked in one exchange."""

    bench: OpenBench
    taps: int
    set_V: dict[int, float] = field(default_factory=dict)  # what each cell's supply was last told, by cell from 1
    mains_on: bool = False  # as they were last switched
    _astray: dict[str, int] = field(default_factory=dict)
    _lost: dict[str, int] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self._questions = [*self._senses(), *self._tap_volts()]
        self._asked_on = False

    def begin(self) -> Pending:
        """Ask everything, without waiting."""
        thermometer = self.bench.signals.thermometer
        jobs = [question.job for question in self._questions]
        jobs.append(self.bench.mains.reading("state"))
        jobs += [] if thermometer is None else [thermometer.reading("celsius")]
        self._asked_on = self.mains_on
        return self.bench.exchange.begin(jobs)

    def read(self, replies: list[Reply]) -> list[tuple[str, float, float]]:
        """(channel, run time, value) of everything that answered.

        Raises Trip for a link lost, a tap too high, mains that are off though they were switched on.
        """
        thermometer = self.bench.signals.thermometer
        found: list[tuple[str, float, float]] = []
        for question, reply in zip(self._questions, replies, strict=False):
            found += self._read(question, reply)
        found += self._mains(replies[len(self._questions)])
        if thermometer is not None and replies[-1].fault is None:
            found.append(("ambient", replies[-1].time_s, thermometer.read(replies[-1])))
        return found

    def _mains(self, reply: Reply) -> list[tuple[str, float, float]]:
        """What the mains switch reads back, which need not be what it was told: an emergency stop, a coil that fell."""
        try:
            on = self.bench.mains.read(reply)
        except BenchFault as fault:
            self._count_lost(fault)
            return []
        self._lost[self.bench.mains.name] = 0
        if self._asked_on and self.mains_on and not on:
            why = (
                f"{self.bench.mains.name} reads open though it was closed: an emergency stop, or it fell open by itself"
            )
            raise Trip("bench", "charger's mains", math.nan, "", math.nan, why)
        return [("mains.state", reply.time_s, float(on))]

    def _count_lost(self, fault: BenchFault) -> None:
        """One missing answer is forgiven; raises LinkLost after so many in a row."""
        count = self._lost.get(fault.instrument, 0) + 1
        self._lost[fault.instrument] = count
        if count >= LOST_READINGS:
            raise LinkLost(fault.instrument, fault) from fault

    def forget(self) -> None:
        """After the safe state: no supply plays a cell, and nothing is missing yet."""
        self.set_V.clear()
        self.mains_on = False
        self._astray.clear()
        self._lost.clear()

    def _read(self, question: _Question, reply: Reply) -> list[tuple[str, float, float]]:
        try:
            values = question.speaker.answers(reply, question.what, question.channels)
        except BenchFault as fault:
            self._count_lost(fault)
            return []
        self._lost[question.speaker.name] = 0
        named = [
            (name, reply.time_s, value * factor) for (name, factor), value in zip(question.names, values, strict=True)
        ]
        self._check_taps(named)
        return named

    def _check_taps(self, named: list[tuple[str, float, float]]) -> None:
        """A tap too high at once; twice away from where it was set: the charger sees another pack than it should."""
        limit_V = self.bench.file.bench.limits.tap
        for name, _, value in named:
            if not (name.startswith("tap") and name.endswith("voltage")):
                continue
            if value > limit_V:
                why = f"{name} reads {si(value, 'V')}, above the bench's limit for a tap"
                raise Trip("bench", name, value, "V", limit_V, why)
            set_V = self.set_V.get(int(name.removeprefix("tap").partition(".")[0]), value)
            self._astray[name] = 0 if abs(value - set_V) <= ASTRAY_V else self._astray.get(name, 0) + 1
            if self._astray[name] >= ASTRAY_READINGS:
                why = f"its supply was set to {si(set_V, 'V')}: a dead or overloaded channel"
                raise Trip("bench", name, value, "V", math.nan, why)

    def _senses(self) -> list[_Question]:
        """One question a scanner: voltages at the ID and thermistor contacts, tap currents by shunt."""
        signals = self.bench.signals
        wanted: list[tuple[Lists, str, str, float]] = []
        for name, line in (("id.sense", signals.id), ("thermistor.sense", signals.thermistor)):
            if line is not None:
                wanted.append((line.scanner, line.sense, name, 1.0))
        for number, tap in enumerate(signals.taps[: self.taps], 1):
            wanted.append((tap.scanner, tap.sense, f"tap{number}.current", 1.0 / tap.shunt_ohm))
        return _grouped(wanted)

    def _tap_volts(self) -> list[_Question]:
        taps = self.bench.signals.taps[: self.taps]
        return _grouped([(tap.supply, tap.channel, f"tap{number}.voltage", 1.0) for number, tap in enumerate(taps, 1)])


def _grouped(wanted: list[tuple[Lists, str, str, float]]) -> list[_Question]:
    """One question an instrument."""
    questions = []
    for name in dict.fromkeys(speaker.name for speaker, *_ in wanted):
        mine = [(speaker, channel, label, factor) for speaker, channel, label, factor in wanted if speaker.name == name]
        speaker, channels = mine[0][0], tuple(channel for _, channel, _, _ in mine)
        labels = tuple((label, factor) for _, _, label, factor in mine)
        questions.append(_Question(speaker.ask("volts", channels), speaker, "volts", channels, labels))
    return questions


def channels_of(bench: OpenBench, cells: int) -> tuple[Channel, ...]:
    """The record's channels for what this bench has beyond the node."""
    signals = bench.signals
    found = []
    for name, line in (("id", signals.id), ("thermistor", signals.thermistor)):
        if line is not None:
            found += [Channel(f"set.{name}", "Ω", "setting"), Channel(f"{name}.sense", "V", "measured")]
            if "ohms" in line.scanner.dialect.readings:  # while the charger is not connected
                found.append(Channel(f"{name}.ohm", "Ω", "measured"))
    for number in range(1, min(len(signals.taps), cells - 1) + 1):
        found += [
            Channel(f"set.tap{number}", "V", "setting"),
            Channel(f"tap{number}.voltage", "V", "measured"),
            Channel(f"tap{number}.current", "A", "measured"),
        ]
    return (*found, *([] if signals.thermometer is None else [Channel("ambient", "°C", "measured")]))
