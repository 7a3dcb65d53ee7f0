"""Every way out of a run goes through the safe state, and leaves a record that can be judged."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest

from drivers.virtual.circuit import Circuit
from sequencer.engine.channels import CHANNELS
from sequencer.engine.evidence import open_evidence
from sequencer.engine.loop import StopFlag
from sequencer.engine.run import Watching
from sequencer.engine.scan import Scan


def at_60_s(act: Callable[[], None]) -> Watching:
    def scans(scan: Scan) -> None:
        if scan.time_s >= 60.0:
            act()

    return Watching(scans=scans)


def test_an_interruption_in_the_middle_of_a_charge(rehearse: Callable[..., Any]) -> None:
    stop = StopFlag()
    done = rehearse(stop=stop, watching=at_60_s(lambda: setattr(stop, "why", "interrupted by a person")))
    assert (done.ended.ended, done.ended.why) == ("stopped", "interrupted by a person")
    assert done.ended.safe.verified
    assert done.ended.sealed
    assert done.verdicts["charges"] == "pass"
    assert {word for limit, word in done.verdicts.items() if limit != "charges"} == {"not run", "not applicable"}
    assert done.judged.exit_status == 4  # its verdicts alone; the run itself makes it 3


def test_a_bug_of_ours(rehearse: Callable[..., Any]) -> None:
    done = rehearse(watching=at_60_s(lambda: 1 / 0))
    assert done.ended.ended == "internal fault"
    assert isinstance(done.ended.fault, ZeroDivisionError)
    assert done.ended.safe.verified
    (event,) = open_evidence(done.record).events("internal-fault")
    assert "ZeroDivisionError" in event["traceback"]


def test_a_charger_whose_mains_relay_is_welded(rehearse: Callable[..., Any], monkeypatch: pytest.MonkeyPatch) -> None:
    """The source cannot be taken away: load and supply stay as they are, and a person is called."""
    set_mains, said = Circuit.set_mains, list[str]()
    monkeypatch.setattr(Circuit, "set_mains", lambda circuit, on: set_mains(circuit, on) if on else None)
    stop = StopFlag()
    watching = at_60_s(lambda: setattr(stop, "why", "interrupted by a person"))
    watching.alarm = said.append
    done = rehearse(stop=stop, watching=watching)
    assert done.ended.safe.verified is False
    assert done.ended.safe.alarm
    assert said
    assert "emergency stop" in said[0]
    assert open_evidence(done.record).manifest["safe"] is False


def test_steps_left_out_on_purpose(rehearse: Callable[..., Any]) -> None:
    done = rehearse(only=("insert",))
    assert done.ended.ended == "complete"
    assert done.verdicts["charges"] == "pass"
    assert done.verdicts["charge.voltage"] == "not run"
    assert done.judged.exit_status == 0


def test_the_same_seed_gives_the_same_samples_and_another_one_others(rehearse: Callable[..., Any]) -> None:
    def samples(seed: int) -> list[bytes]:
        record = open_evidence(rehearse(seed=seed, changes={"start": "4.00 V", "after": "10 s"}).record)
        traces = [record.trace(channel.name) for channel in CHANNELS]
        return [trace.time_s.tobytes() + trace.value.tobytes() for trace in traces]

    first = samples(1)
    assert samples(1) == first
    assert samples(2) != first


def test_every_event_of_a_run_stands_in_its_order(rehearse: Callable[..., Any]) -> None:
    done = rehearse(changes={"start": "4.00 V", "after": "10 s"})
    lines = (done.record / "data" / "events.jsonl").read_text("utf-8").splitlines()
    events = [json.loads(line, parse_constant=lambda word: pytest.fail(f"{word} is no JSON")) for line in lines]
    times_s = [event["t"] for event in events]
    assert times_s == sorted(times_s)
    names = [event["event"] for event in events]
    assert names[0] == "run-start"
    assert names[-2:] == ["safe-state", "run-end"]
    assert names.index("standin") < names.index("finding-window", names.index("standin"))
    steps = [(event["step"], event["does"]) for event in events if event["event"] == "step-start"]
    assert steps == [(1, "insert"), (2, "charge"), (3, "remove")]
