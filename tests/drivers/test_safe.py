"""The way to the safe state, on the virtual bench with a charger at 3 A, with everything that can go wrong on it.

"Never load or supply off before the current is gone" is held against the circuit itself.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from functools import cache
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers import safe
from drivers.bench_file import BenchFile, load_bench
from drivers.clock import VirtualClock
from drivers.exchange import Exchange, Job, Reply
from drivers.open_bench import Access, OpenBench, open_bench
from drivers.roles import Deed, LoadMode, SupplyMode
from drivers.safe import ALARM, ALARM_UNKNOWN, SafeState, to_safe_state
from drivers.text.faults import Faults
from drivers.trouble import LinkFault
from drivers.virtual.charger_file import ChargerFile, load_charger
from drivers.virtual.library import BenchLibrary
from drivers.virtual.terminals import OPEN
from drivers.virtual.trace import LOAD_CURRENT, NODE, SHUNT, SUPPLY_CURRENT
from drivers.virtual.world import World

BENCHES = Path(safe.__file__).parents[1] / "procedures" / "benches"
NAMES = ("node_supply", "node_load", "meter_node", "meter_charger", "meter_shunt", "mains")
SUPPLY, LOAD, NODE_METER, CHARGER_METER, SHUNT_METER, MAINS = NAMES
NAN = "9.91E37"  # SCPI-1999, volume 1, 7.2.1.5
QUIET_A = 0.050  # below it the charging current counts as gone
LONGEST_s = 30.0
COILS, OUTPUTS = ("relays", "ROUT:CLOS? (@1:5,11:14)"), ("cells", "OUTP? (@1:4)")


@dataclass
class Said:
    """One job that went out, when, and what the circuit really did then."""

    time_s: float
    job: Job
    charger_A: float

    @property
    def text(self) -> str:
        return f"{self.job.instrument} {' '.join(self.job.messages)}"

    @property
    def changes_outputs(self) -> bool:
        return self.job.instrument in (SUPPLY, LOAD) and not self.text.split()[1].startswith("MEAS")


@dataclass
class Wrapped:
    """An exchange with troubles: `trouble(job, number of the exchange, time_s)` may answer instead of the bench."""

    inner: Exchange
    world: World
    clock: VirtualClock
    trouble: Callable[[Job, int, float], Reply | None] = lambda job, number, time_s: None
    said: list[Said] = field(default_factory=list)
    count: int = 0

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]:
        self.count += 1
        now_s = self.clock.now()
        true_A = self.world.circuit.value(SHUNT, self.world.now) / self.world.circuit.constants.shunt_ohm
        replies = []
        for job in jobs:
            self.said.append(Said(now_s, job, true_A))
            other = self.trouble(job, self.count, now_s)
            replies.append(self.inner([job], wait_s)[0] if other is None else other)
        return replies

    def close(self) -> None:
        self.inner.close()


@dataclass
class Stage:
    """A bench at which something is on, and what happened on its way to safety."""

    bench: OpenBench
    world: World
    exchange: Wrapped
    alarms: list[str] = field(default_factory=list)

    def walk(self, trouble: Callable[[Job, int, float], Reply | None] | None = None) -> SafeState:
        if trouble is not None:
            self.exchange.trouble = trouble
        begun_s = self.bench.clock.now()
        state = to_safe_state(self.bench, self.alarms.append)
        assert self.bench.clock.now() - begun_s < LONGEST_s
        assert len(self.alarms) == int(state.alarm) <= 1
        assert not (state.verified and state.alarm)
        return state

    @property
    def really_safe(self) -> bool:
        circuit, now_s = self.world.circuit, self.world.now
        off = circuit.supply_mode == "off" and not (circuit.load.on and not circuit.load.tripped)
        return off and not circuit.mains_on and abs(circuit.value(NODE, now_s)) < 2.0

    def deeds(self) -> list[str]:
        """What was set, in order, readings left out."""
        readings = ("READ?", "MEAS:VOLT?", "ROUT:CLOS? (@1)")
        return [said.text for said in self.exchange.said if not said.job.messages[0].startswith(readings)]

    def assert_outputs_were_left_until_quiet(self) -> None:
        for said in self.exchange.said:
            assert not said.changes_outputs or said.charger_A < QUIET_A, (said.time_s, said.text, said.charger_A)


@cache
def files(bench: str = "virtual-mains-in-process", name: str = "sprayer-power") -> tuple[BenchFile, ChargerFile]:
    faults = Faults()
    file, charger = load_bench(BENCHES / f"{bench}.yaml", faults), load_charger(name, faults)
    faults.raise_if_any()
    assert file is not None
    assert charger is not None
    return file, charger.model


def dark(file: BenchFile | None = None) -> Stage:
    """A bench on which nothing is on and nothing was ever set."""
    return opened(file or files()[0], World.build(files()[0].bench, files()[1], 1))


def opened(file: BenchFile, world: World) -> Stage:
    library = BenchLibrary.around(world)
    clock = VirtualClock(world.advance)
    bench = open_bench(file, Access(library, library.addresses, clock, 1))
    exchange = Wrapped(bench.exchange, world, clock)
    bench.exchange = exchange
    return Stage(bench, world, exchange)


def charging(file: BenchFile | None = None) -> Stage:
    """A charger at 3 A into a pack of 18.5 V, as in the middle of a run."""
    stage = dark(file)
    bench = stage.bench
    bench.hands.do([Deed(bench.supply, "voltage", 18.5), Deed(bench.supply, "current_limit", 4.1)])
    bench.hands.do([Deed(bench.load, "constant_current"), Deed(bench.load, "current", 3.75)])
    bench.hands.do([Deed(bench.supply, "on"), Deed(bench.load, "on"), Deed(bench.mains, "on")])
    bench.clock.wait_until(5.0)
    true_A = stage.world.circuit.value(SHUNT, stage.world.now) / stage.world.circuit.constants.shunt_ohm
    assert true_A == pytest.approx(3.0, rel=0.02)
    return stage


def inserted() -> Stage:
    """The same charge through all of the pack's contacts, with its cell taps up."""
    file, charger = files("virtual-in-process", "sprayer")
    stage = opened(file, World.build(file.bench, charger, 1))
    bench, signals = stage.bench, stage.bench.signals
    assert signals.power is not None
    assert signals.id is not None
    assert signals.thermistor is not None
    bench.hands.do([signals.id.resistor.to(3e3), signals.thermistor.resistor.to(10e3)])
    bench.hands.do([deed for tap in signals.taps for deed in (tap.limit(0.1), tap.volts(3.7), tap.on)])
    bench.hands.do([Deed(bench.supply, "voltage", 18.5), Deed(bench.supply, "current_limit", 4.1)])
    bench.hands.do([Deed(bench.load, "constant_current"), Deed(bench.load, "current", 3.75)])
    bench.hands.do([Deed(bench.supply, "on"), Deed(bench.load, "on"), Deed(bench.mains, "on")])
    bench.hands.do([contact.close for contact in reversed(signals.contacts)])  # B- first, B+ last
    bench.clock.wait_until(8.0)
    assert stage.world.circuit.value(SHUNT, stage.world.now) == pytest.approx(3.0 * bench.shunt_ohm, rel=0.02)
    assert asked(stage, *COILS) == "1,1,1,1,1,1,1,1,1"
    assert asked(stage, *OUTPUTS) == "1,1,1,1"
    assert OPEN not in stage.world.circuit.terminals.contacts.values()
    return stage


def asked(stage: Stage, name: str, question: str) -> str:
    """What an instrument answers past the walk and its exchange, which must not be their own witnesses."""
    return stage.world.instruments[name].stream(f"{question}\n".encode()).decode().rstrip("\n")


def lost(*names: str, since: int = 0, until: int = 10**9) -> Callable[[Job, int, float], Reply | None]:
    def trouble(job: Job, number: int, time_s: float) -> Reply | None:
        gone = job.instrument in names and since <= number < until
        return Reply(job.instrument, (), time_s, LinkFault(job.instrument, "gone")) if gone else None

    return trouble


def welded(*, told: str) -> Callable[[Job, int, float], Reply | None]:
    """The relay does not open. `told`: "0" where its coil answers for it, "1" where its own contact does."""

    def trouble(job: Job, number: int, time_s: float) -> Reply | None:
        if job.instrument != MAINS:
            return None
        return Reply(MAINS, (told, '0,"No error"') if "OPEN" in job.messages[0] else (told,), time_s)

    return trouble


# -- the order --------------------------------------------------------------------------------------------------


def test_from_a_charge_to_de_energised_in_the_designs_order() -> None:
    stage = charging()
    state = stage.walk()
    assert state.verified
    assert stage.really_safe
    assert stage.deeds() == [
        "mains ROUT:OPEN (@1);:ROUT:CLOS? (@1);:SYST:ERR?",
        "node_load CURR 0.0800;:SYST:ERR?",
        "node_supply VOLT 0.0000;:SYST:ERR?",
        "node_load INP OFF;:INP?;:SYST:ERR?",
        "node_supply OUTP OFF;:OUTP?;:SYST:ERR?",
    ]
    stage.assert_outputs_were_left_until_quiet()
    assert state.troubles == []
    assert state.words[0] == "mains off"
    assert state.words[-1] == "safe: de-energised, not isolated"


def test_the_drain_ends_before_the_outputs_go_off() -> None:
    stage = charging()
    stage.walk()
    switched = next(said.time_s for said in stage.exchange.said if "INP OFF" in said.text)
    looks = [said for said in stage.exchange.said if said.job.instrument == NODE_METER and said.time_s < switched]
    assert looks[-1].time_s <= switched
    assert 0.05 <= safe.DRAIN_A <= 0.10  # the load keeps 50 to 100 mA until the node is down


def test_all_witnesses_are_asked_in_one_exchange() -> None:
    stage = charging()
    stage.walk()
    at = {said.time_s for said in stage.exchange.said if said.job.instrument == SHUNT_METER}
    for time_s in at:
        assert {said.job.instrument for said in stage.exchange.said if said.time_s == time_s} >= set(NAMES)


def test_nothing_on_at_all() -> None:
    stage = dark()
    state = stage.walk()
    assert state.verified
    assert stage.bench.clock.now() < 2.0
    assert not any(" ON" in text or "ROUT:CLOS (" in text for text in stage.deeds())


def test_outputs_that_somebody_else_left_on() -> None:
    """The load was never set up, the supply holds 12 V: as found after a crash."""
    stage = dark()
    stage.world.instruments[SUPPLY].stream(b"VOLT 12;:OUTP ON\n")
    stage.bench.clock.wait_until(1.0)
    assert stage.walk().verified
    assert stage.really_safe


def test_a_load_that_has_tripped_is_safe_once_its_input_is_proven_off() -> None:
    stage = charging()
    stage.world.instruments[LOAD].stream(b"CURR:PROT 1\n")
    stage.bench.clock.wait_until(6.0)
    reply = stage.bench.hands.ask(stage.bench.load.reading("state"))
    assert stage.bench.load.read(reply).mode == LoadMode.TRIPPED
    assert stage.walk().verified


def test_a_load_that_has_tripped_and_does_not_confirm_is_not_called_safe() -> None:
    """A trip is no proof that the input is off: some loads come back when its cause has gone."""
    stage = charging()
    stage.world.instruments[LOAD].stream(b"CURR:PROT 1\n")
    stage.bench.clock.wait_until(6.0)
    state = stage.walk(
        lambda job, n, t: Reply(LOAD, ("1", '0,"No error"'), t) if job.messages[0].startswith("INP OFF") else None
    )
    assert not state.verified
    assert "load not proven off" in state.words[-1]


# -- the pack's other contacts ------------------------------------------------------------------------------------


def test_cell_taps_go_down_before_the_drain_and_contacts_open_after_it() -> None:
    """By the instruments' own word, and by what the circuit then is."""
    stage = inserted()
    state = stage.walk()
    assert state.verified
    assert stage.really_safe
    assert asked(stage, *COILS) == "0,0,0,0,0,0,0,0,0"
    assert asked(stage, *OUTPUTS) == "0,0,0,0"
    terminals = stage.world.circuit.terminals
    assert set(terminals.contacts.values()) == {OPEN}
    assert not any(tap.cell.on for tap in terminals.taps)
    taps = [f"cells OUTP OFF,(@{tap});:OUTP? (@{tap});:SYST:ERR?" for tap in range(1, 5)]
    contacts = [
        f"relays ROUT:OPEN (@{channel});:ROUT:CLOS? (@{channel});:SYST:ERR?"
        for channel in (1, 3, 4, 5, 11, 12, 13, 14, 2)  # as a removal does: B+ first, B- last
    ]
    deeds = stage.deeds()
    assert [text.split()[0] for text in deeds[:1]] == ["mains"]
    assert deeds[1:5] == taps
    assert [" ".join(text.split()[:2]) for text in deeds[5:9]] == [
        "node_load CURR", "node_supply VOLT", "node_load INP", "node_supply OUTP",
    ]  # fmt: skip
    assert deeds[9:] == contacts
    stage.assert_outputs_were_left_until_quiet()


@pytest.mark.parametrize(
    ("name", "told", "other", "off"),
    [
        ("relays", "contacts not proven open", OUTPUTS, "0,0,0,0"),
        ("cells", "cell taps not proven off", COILS, "0,0,0,0,0,0,0,0,0"),
    ],
)
def test_contacts_or_taps_that_do_not_answer_are_not_called_safe_and_hold_up_nothing_else(
    name: str, told: str, other: tuple[str, str], off: str
) -> None:
    stage = inserted()
    state = stage.walk(lost(name))
    assert not state.verified
    assert state.words[-1] == f"NOT SAFE: {told}"
    assert asked(stage, *other) == off
    assert stage.really_safe


# -- the charger does not stop ------------------------------------------------------------------------------------


@pytest.mark.parametrize("told", ["0", "1"])
def test_mains_that_weld_leave_load_and_supply_as_they_are(told: str) -> None:
    stage = charging()
    state = stage.walk(welded(told=told))
    assert not state.verified
    assert stage.alarms == [ALARM]
    assert state.words[-1] == f"NOT SAFE, load and supply left as they are: {ALARM}"
    assert not any(said.changes_outputs for said in stage.exchange.said)
    assert sum("ROUT:OPEN" in text for text in stage.deeds()) == 2
    circuit, now_s = stage.world.circuit, stage.world.now
    assert circuit.value(LOAD_CURRENT, now_s) == pytest.approx(3.75, abs=0.05)
    assert circuit.value(SUPPLY_CURRENT, now_s) == pytest.approx(0.75, abs=0.1)


def test_two_tries_of_two_seconds_and_then_the_alarm() -> None:
    stage = charging()
    begun_s = stage.bench.clock.now()
    stage.walk(welded(told="0"))
    tries = [said.time_s for said in stage.exchange.said if "ROUT:OPEN" in said.text]
    assert tries[0] == begun_s
    assert tries[1] - tries[0] == pytest.approx(2.0, abs=0.2)
    assert stage.bench.clock.now() - tries[1] == pytest.approx(2.0, abs=0.2)


def pulsing(on_s: float, off_s: float, confirmed: str) -> Callable[[Job, int, float], Reply | None]:
    """Witnesses that see 3 A for `on_s` and nothing for `off_s`, over and over, whatever the mains do."""

    def trouble(job: Job, number: int, time_s: float) -> Reply | None:
        flows = time_s % (on_s + off_s) < on_s
        if job.instrument == SHUNT_METER:
            return Reply(SHUNT_METER, ("0.03" if flows else "0.0",), time_s)
        if job.instrument == CHARGER_METER:
            return Reply(CHARGER_METER, ("18.8" if flows else "18.5",), time_s)
        if job.instrument == NODE_METER:
            return Reply(NODE_METER, ("18.5",), time_s)
        if job.instrument == SUPPLY and "MEAS" in job.messages[0]:
            return Reply(SUPPLY, ("18.5", "0.75" if flows else "3.75", "1", "256"), time_s)
        return welded(told=confirmed)(job, number, time_s)

    return trouble


@pytest.mark.parametrize(("on_s", "off_s", "confirmed"), [(0.2, 0.2, "0"), (0.5, 0.2, "0"), (0.5, 1.5, "1")])
def test_a_pause_between_two_pulses_is_not_the_end(on_s: float, off_s: float, confirmed: str) -> None:
    """Where the mains are not confirmed to be off, quiet must last for the whole of the two seconds."""
    stage = charging()
    stage.walk(pulsing(on_s, off_s, confirmed))
    assert len(stage.alarms) == 1
    assert not any(said.changes_outputs for said in stage.exchange.said)


# -- links and readings are lost ----------------------------------------------------------------------------------


def test_mains_link_lost() -> None:
    stage = charging()
    state = stage.walk(lost(MAINS))
    assert not state.verified
    assert stage.alarms == [ALARM]
    assert not any(said.changes_outputs for said in stage.exchange.said)
    assert any(MAINS in trouble for trouble in state.troubles)


def test_mains_link_lost_and_the_plug_pulled_by_hand() -> None:
    """The current is gone for two seconds, by witnesses: all goes off, but it is not called safe."""
    stage = charging()
    stage.world.circuit.set_mains(False)
    state = stage.walk(lost(MAINS))
    assert not state.verified
    assert "mains not proven off" in state.words[-1]
    assert stage.really_safe
    first = next(said.time_s for said in stage.exchange.said if said.changes_outputs)
    assert first - 5.0 >= safe.PATIENCE_s - 1e-6


def test_load_link_lost() -> None:
    stage = charging()
    state = stage.walk(lost(LOAD))
    assert not state.verified
    assert "load not proven off" in state.words[-1]
    assert stage.world.circuit.supply_mode == "off"
    assert not stage.world.circuit.mains_on
    stage.assert_outputs_were_left_until_quiet()


def test_supply_link_lost() -> None:
    """The supply still holds the node: a person must switch it off."""
    stage = charging()
    state = stage.walk(lost(SUPPLY))
    assert not state.verified
    assert "supply not proven off" in state.words[-1]
    assert stage.alarms
    assert stage.alarms[0].startswith("the node still carries 18.5 V")
    assert not stage.world.circuit.load.on
    stage.assert_outputs_were_left_until_quiet()


@pytest.mark.parametrize("name", [CHARGER_METER, SHUNT_METER])
def test_one_witness_fewer_is_no_obstacle(name: str) -> None:
    stage = charging()
    state = stage.walk(lost(name))
    assert state.verified
    assert stage.really_safe
    assert [trouble for trouble in state.troubles if name in trouble]


def test_a_node_that_nobody_measures_is_not_called_safe() -> None:
    stage = charging()
    state = stage.walk(lost(NODE_METER))
    assert not state.verified
    assert "node not proven below 2 V" in state.words[-1]
    assert stage.really_safe, "what can be done is done"


def test_a_node_meter_that_answers_overload_is_not_called_safe() -> None:
    stage = charging()
    state = stage.walk(lambda job, n, t: Reply(NODE_METER, (NAN,), t) if job.instrument == NODE_METER else None)
    assert not state.verified
    assert "node not proven below 2 V" in state.words[-1]


@pytest.mark.parametrize("pair", [(SHUNT_METER, CHARGER_METER), (SHUNT_METER, LOAD), (NODE_METER, SUPPLY)])
def test_one_witness_alone_is_not_believed(pair: tuple[str, str]) -> None:
    stage = charging()
    state = stage.walk(lost(*pair))
    assert not state.verified
    assert stage.alarms == [ALARM_UNKNOWN]
    assert not any(said.changes_outputs for said in stage.exchange.said)


def test_all_links_lost() -> None:
    stage = charging()
    state = stage.walk(lost(*NAMES))
    assert not state.verified
    assert stage.alarms == [ALARM_UNKNOWN]
    assert {name for name in NAMES if any(name in trouble for trouble in state.troubles)} == set(NAMES)
    assert len(state.troubles) == len(NAMES), "each trouble is told once, not at every look"


def steady(instrument: str, answer: str) -> Callable[[Job, int, float], Reply | None]:
    """An instrument that answers every reading with the same digits."""
    return lambda job, n, t: Reply(instrument, (answer,), t) if job.instrument == instrument else None


def test_a_charger_wired_past_shunt_and_ballast_is_not_outvoted() -> None:
    """Both lie in the path that it goes around: they see nothing, and what load and supply say is the only truth."""
    stage, keeps_on = charging(), welded(told="0")

    def past(job: Job, number: int, time_s: float) -> Reply | None:
        if job.instrument == SHUNT_METER:
            return Reply(SHUNT_METER, ("0.0",), time_s)
        if job.instrument == CHARGER_METER:
            return stage.exchange.inner([Job(NODE_METER, job.messages, job.fields)], 1.0)[0]
        return keeps_on(job, number, time_s)

    state = stage.walk(past)
    assert not state.verified
    assert stage.alarms == [ALARM]
    assert not any(said.changes_outputs for said in stage.exchange.said)


def test_a_live_meter_that_sees_a_current_is_not_outvoted() -> None:
    """It reads 30 mV across 10 mΩ, never twice the same: nobody may say that it is the one that is wrong."""
    stage = charging()

    def lively(job: Job, number: int, time_s: float) -> Reply | None:
        return Reply(SHUNT_METER, (f"{0.03 + 1e-7 * number:.9f}",), time_s) if job.instrument == SHUNT_METER else None

    state = stage.walk(lively)
    assert not state.verified
    assert stage.alarms == [ALARM]
    assert not any(said.changes_outputs for said in stage.exchange.said)


@pytest.mark.parametrize(("meter", "answer"), [(SHUNT_METER, "0.03"), (CHARGER_METER, "19.5")])
def test_a_meter_that_stands_still_is_no_witness(meter: str, answer: str) -> None:
    stage = charging()
    state = stage.walk(steady(meter, answer))
    assert state.verified
    assert stage.really_safe
    assert any("stands still to its last digit" in words for words in state.words)


def test_a_bench_without_a_ballast_needs_both_other_witnesses() -> None:
    file = files()[0]
    wiring = file.bench.wiring
    node = wiring.node.model_copy(update={"ballast": 0.0})
    bench = file.bench.model_copy(update={"wiring": wiring.model_copy(update={"node": node})})
    bare = replace(file, bound=replace(file.bound, model=bench))
    assert charging(bare).walk().verified
    assert charging(bare).walk(lost(SHUNT_METER)).alarm


@pytest.mark.parametrize("name", NAMES)
def test_a_link_that_comes_back_is_taken(name: str) -> None:
    stage = charging()
    state = stage.walk(lost(name, until=3))
    assert state.verified
    assert stage.really_safe
    stage.assert_outputs_were_left_until_quiet()


@pytest.mark.parametrize("name", NAMES)
def test_a_link_closed_by_a_time_out_is_opened_anew(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """In a run a time-out closes the link; without a new one the output behind it could never be switched off."""
    stage = charging()
    instrument, bench = stage.world.instruments[name], stage.bench
    with monkeypatch.context() as patch:
        patch.setattr(instrument, "stream", lambda data: b"")
        speaker = next(speaker for speaker in bench.speakers if speaker.name == name)
        reply = bench.hands.ask(Job(name, (speaker.dialect.identity,), 1))
    assert "time-out" in str(reply.fault)
    assert "link is closed" in str(bench.hands.ask(Job(name, (speaker.dialect.identity,), 1)).fault)
    state = stage.walk()
    assert state.verified
    assert state.words[0] == "mains off", "the first try must do it: the charger still sources"
    assert stage.really_safe


def test_silent_instruments_in_turn_still_end_in_bounded_time(monkeypatch: pytest.MonkeyPatch) -> None:
    """In one thread each silence costs its 3 s, twice a try; side by side they cost one wait (test_wall_time)."""
    stage = charging()
    for instrument in stage.world.instruments.values():
        monkeypatch.setattr(instrument, "stream", lambda data: b"")
    begun_s = stage.bench.clock.now()
    state = to_safe_state(stage.bench, stage.alarms.append)
    assert stage.bench.clock.now() - begun_s < 60.0
    assert not state.verified
    assert stage.alarms == [ALARM_UNKNOWN]


def test_one_late_answer_does_not_spoil_the_proof() -> None:
    stage = charging()
    switched: list[int] = []

    def trouble(job: Job, number: int, time_s: float) -> Reply | None:
        if "OUTP OFF" in job.messages[0]:
            switched.append(number)
        late = switched and number == switched[0] + 1
        return Reply(job.instrument, (), time_s, LinkFault(job.instrument, "no answer in time")) if late else None

    assert stage.walk(trouble).verified


# -- the node does not fall ---------------------------------------------------------------------------------------


def test_a_node_that_something_else_holds_is_drained_for_ten_seconds_and_told() -> None:
    stage = charging()
    state = stage.walk(
        lambda job, n, t: Reply(NODE_METER, ("18.5",), t) if job.instrument == NODE_METER and n > 8 else None
    )
    assert not state.verified
    assert stage.alarms[0].startswith("the node still carries 18.5 V")
    lowered, off = (
        next(said.time_s for said in stage.exchange.said if word in said.text) for word in ("CURR 0.0800", "INP OFF")
    )
    assert off - lowered == pytest.approx(safe.DRAIN_PATIENCE_s, abs=0.3)


def test_a_load_that_is_off_is_switched_on_to_drain_what_does_not_fall_by_itself() -> None:
    stage = dark()
    stage.world.instruments[SUPPLY].stream(b"VOLT 18;:OUTP ON\n")
    stage.bench.clock.wait_until(1.0)
    drawn: list[float] = []

    def trouble(job: Job, number: int, time_s: float) -> Reply | None:
        if job.messages[0].startswith("INP ON"):
            drawn.append(time_s)
        held = job.instrument in (NODE_METER, CHARGER_METER) and not (drawn and time_s > drawn[0] + 0.5)
        return Reply(job.instrument, ("18.0",), time_s) if held else None

    assert stage.walk(trouble).verified
    deeds = [text for text in stage.deeds() if text.startswith(LOAD)]
    assert [text.split()[1] for text in deeds] == ["CURR", "FUNC", "CURR", "INP", "INP"]
    assert "CURR 0.0800" in deeds[2]


# -- any of it at once --------------------------------------------------------------------------------------------


@st.composite
def troubles(draw: st.DrawFn) -> dict[str, tuple[str, int, int]]:
    """For some instruments: what is wrong (link lost; not a number; garbage; a relay that welds), from when to when."""
    found = {}
    for name in draw(st.sets(st.sampled_from(NAMES))):
        kind = draw(st.sampled_from(["lost", "nan", "garbage", *(["welded"] if name == MAINS else [])]))
        since = draw(st.sampled_from([0, 0, 2, 10, 40]))
        found[name] = (kind, since, since + draw(st.sampled_from([1, 3, 20, 10**9])))
    return found


def playing(plan: dict[str, tuple[str, int, int]]) -> Callable[[Job, int, float], Reply | None]:
    def trouble(job: Job, number: int, time_s: float) -> Reply | None:
        kind, since, until = plan.get(job.instrument, ("", 0, 0))
        if not since <= number < until:
            return None
        if kind == "lost":
            return lost(job.instrument)(job, number, time_s)
        if kind == "welded":
            return welded(told="0")(job, number, time_s)
        return Reply(job.instrument, (NAN if kind == "nan" else "?!",) * job.fields, time_s)

    return trouble


@given(troubles())
def test_whatever_goes_wrong_nothing_is_let_go_of_too_early_or_called_safe_wrongly(
    plan: dict[str, tuple[str, int, int]],
) -> None:
    stage = charging()
    state = stage.walk(playing(plan))
    stage.assert_outputs_were_left_until_quiet()
    assert stage.really_safe or not state.verified
    if not plan:
        assert state.verified


@given(
    st.sampled_from([SupplyMode.OFF, SupplyMode.CONSTANT_VOLTAGE]),
    st.floats(-0.9, 4),
    st.floats(-0.9, 4),
    st.floats(-0.9, 4),
)
def test_two_of_three_witnesses(mode: SupplyMode, shunt_A: float, ballast_A: float, difference_A: float) -> None:
    look = safe.Look(
        shunt_A,
        ballast_A,
        0.0,
        False,
        safe.SupplyReading(0.0, 0.0, mode),
        safe.LoadReading(0.0, difference_A, LoadMode.ON),
    )
    quiet = [value < QUIET_A for value in (shunt_A, ballast_A, difference_A)]
    # 10 mV of each meter over 0.1 Ω; 60 mA and 2 % of what the load draws: beyond these it is seen to deliver
    readback_A = 0.06 + 0.02 * abs(difference_A)
    clear = [shunt_A >= QUIET_A, ballast_A >= 0.2, difference_A >= readback_A]
    assert look.quiet is (sum(quiet) >= 2 and not any(clear))
    assert look.sourcing is (not all(quiet))
    blind = replace(look, shunt_A=math.nan, supply=None)
    assert not blind.quiet
    # A meter behind an open contact reads 0 V against the node's 18 V: no current, and no witness either.
    behind = replace(look, ballast_A=-180.0)
    assert behind.quiet is (quiet[0] and quiet[2])  # both below 50 mA: neither sees it deliver
    assert not replace(behind, supply=None).quiet
