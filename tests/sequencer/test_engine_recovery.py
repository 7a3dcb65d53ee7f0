"""A link lost in the middle of a run: energy off, the link afresh, the step once more; or an end with its name."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import pytest

from drivers.safe import SafeState
from drivers.trouble import InstrumentFault, LinkFault, ReplyFault
from sequencer.engine import recovery
from sequencer.engine.evidence import counted, open_evidence
from sequencer.engine.guard import LinkLost, Trip
from sequencer.engine.inputs import Asked, gather
from sequencer.engine.record_reader import Record
from sequencer.engine.recovery import again_from, lost_link
from sequencer.model.procedure import Step

Rehearse = Callable[..., Any]


def steps_of(procedure: str) -> tuple[Step, ...]:
    return gather(Asked(procedure, bench="virtual-in-process")).procedure.model.steps


def with_trouble(*troubles: str) -> dict[str, str]:
    return {"errors: 1\n": f"errors: 1\n  troubles: [{', '.join(troubles)}]\n"}


def mute(instrument: str, at_s: float, lasts_s: float | None = None) -> str:
    lasts = "" if lasts_s is None else f", lasts: {lasts_s} s"
    return f"{{at: {at_s} s, does: mute, instrument: {instrument}{lasts}}}"


@pytest.fixture(scope="module")
def acceptance() -> tuple[Step, ...]:
    return steps_of("acceptance")


def test_what_needs_a_pack_begins_with_putting_it_in(acceptance: tuple[Step, ...]) -> None:
    kinds = [step.kind for step in acceptance]
    charge = kinds.index("charge")
    assert kinds[charge - 1] == "insert"
    assert again_from(acceptance, charge) == charge - 1
    for alone in ("sweep_id", "sweep_temperature", "raise_cell"):
        assert again_from(acceptance, kinds.index(alone)) == kinds.index(alone)
    assert again_from(acceptance, 0) == 0


def test_a_pack_that_the_safe_state_took_out_is_not_taken_out_again(acceptance: tuple[Step, ...]) -> None:
    assert again_from(acceptance, len(acceptance) - 1) == len(acceptance)


def test_only_a_lost_link_is_recovered_from() -> None:
    silent = LinkFault("meter", "no answer")
    assert lost_link(LinkLost("node voltage", silent)) is silent
    assert lost_link(silent) is silent
    assert lost_link(ReplyFault("meter", "'x' was answered")) is not None
    assert lost_link(InstrumentFault("relays", "a welded contact?")) is None
    assert lost_link(Trip("bench", "load state", 0.0, "A", 1.0, "the load tripped")) is None


def test_events_of_a_broken_step_do_not_count_and_what_was_switched_does() -> None:
    """The step before may end at the very moment at which the broken one began."""
    names = [("step-start", 1), ("finding-window", 0), ("step-end", 1)]
    names += [("step-start", 2), ("mains", 0), ("point", 0), ("step-broken", 2), ("step-start", 2), ("point", 0)]
    events = [{"t": 5.0, "event": name, "step": step} for name, step in names]
    left = [event["event"] for event in counted(events)]
    assert left == [
        *("step-start", "finding-window", "step-end"),
        *("mains", "step-broken", "step-start", "point"),
    ]


# whole rehearsals: the charge is begun at 13 s


@pytest.mark.parametrize("instrument", ["meter_shunt", "node_supply", "mains"])
def test_a_link_lost_once_in_a_charge_is_opened_anew_and_the_charge_repeated(
    rehearse: Rehearse, instrument: str
) -> None:
    found = rehearse(bench=with_trouble(mute(instrument, 60.0, 2.0)))
    assert (found.ended.ended, found.judged.exit_status) == ("complete", 0)
    assert found.ended.safe.verified
    assert set(found.verdicts.values()) <= {"pass", "not applicable"}
    record = Record.open(found.record, check=False)
    names = [event["event"] for event in record.events]
    lost, off, broken = names.index("link-lost"), names.index("link-recovered"), names.index("step-broken")
    assert lost < off < broken
    assert "safe: de-energised, not isolated" in record.events[off]["words"]
    assert "mains off" in record.events[off]["words"][0]
    controls = [event for event in record.events[broken:] if event["event"] == "control"]
    again = [event["does"] for event in record.events[broken:] if event["event"] == "step-start"]
    assert controls[0]["good"]
    assert again[:2] == ["insert", "charge"]
    told = json.loads((found.judged.folder / "judgement.json").read_text("utf-8"))["deviations"]
    assert len(told) == 1
    assert "step 2 (charge) was broken off at 6" in told[0]
    assert instrument in told[0]


def test_nothing_of_the_broken_step_is_judged(rehearse: Rehearse) -> None:
    """The shunt's meter reads 0.3 mV too much until its link is lost: 30 mA, ten times what the judgement allows."""

    def wrong_until_lost(bench: Any) -> None:
        meter = bench.access.library.world.instruments["meter_shunt"]
        converted = meter._converted
        meter._converted = lambda true_V: converted(true_V + (0.3e-3 if bench.clock.now() < 60.0 else 0.0))

    found = rehearse(bench=with_trouble(mute("meter_shunt", 60.0, 2.0)), opened=wrong_until_lost)
    evidence = open_evidence(found.record)
    window = evidence.window("charge")
    assert window is not None
    assert window.start_s > 60.0
    assert evidence.begun("charge") == window.start_s
    assert found.verdict("charge.stage1.current")["evidence"][0] > 60.0


def test_a_link_lost_twice_in_the_same_step_ends_the_run(rehearse: Rehearse) -> None:
    found = rehearse(bench=with_trouble(mute("meter_shunt", 60.0, 2.0), mute("meter_shunt", 140.0, 2.0)))
    assert found.ended.ended == "trip"
    assert found.judged.bench_trip
    assert "meter_shunt" in found.ended.why
    assert found.ended.safe.verified
    assert not found.failing
    assert found.verdicts["charge.algorithm"] == "inconclusive"


def test_a_link_lost_for_good_ends_the_run_after_three_tries(rehearse: Rehearse) -> None:
    found = rehearse(bench=with_trouble(mute("meter_charger", 60.0)))
    assert found.ended.ended == "trip"
    assert "meter_charger" in found.ended.why
    assert "not to be opened anew in 3 tries" in found.ended.why
    assert found.ended.safe.verified
    assert found.judged.bench_trip
    assert not found.failing
    assert found.verdicts["charges"] == "pass"


def test_a_link_lost_in_a_sweep_repeats_the_sweep(rehearse_full: Rehearse) -> None:
    one_band = {"  - {id: [0.90 kΩ, 1.10 kΩ], current: 1.5 A ± 5 %}\n": ""}
    found = rehearse_full(
        "id-bands", bench=with_trouble(mute("scanner", 60.0, 2.0)), spec_text=one_band, changes={"resolution": "5 %"}
    )
    assert (found.ended.ended, found.judged.exit_status) == ("complete", 0)
    evidence = open_evidence(found.record)
    roles = [event["role"] for event in evidence.events("point") if event["role"].endswith("middle")]
    assert len(roles) == 1
    all_of_them = [event for event in evidence.record.events if event["event"] == "point"]
    assert len(all_of_them) > len(evidence.events("point"))


def test_a_stranger_at_the_lost_address_ends_the_run(rehearse: Rehearse) -> None:
    def other_afterwards(bench: Any) -> None:
        meter = bench.access.library.world.instruments["meter_shunt"]
        mine = meter.identity
        meter.identity = lambda: mine() if bench.clock.now() < 60.0 else "packmime,virtual meter,X9999,1.0"

    found = rehearse(bench=with_trouble(mute("meter_shunt", 60.0, 2.0)), opened=other_afterwards)
    assert found.ended.ended == "trip"
    assert "X9999" in found.ended.why
    assert not found.failing


def test_without_a_proven_safe_state_nothing_is_repeated(rehearse: Rehearse, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(recovery, "to_safe_state", lambda bench, alarm: SafeState(verified=False))
    found = rehearse(bench=with_trouble(mute("meter_shunt", 60.0, 2.0)))
    assert found.ended.ended == "trip"
    assert "step-broken" not in {event["event"] for event in Record.open(found.record, check=False).events}


def test_a_charger_that_no_longer_charges_after_it_ends_the_run(rehearse: Rehearse) -> None:
    """Energy was off, so a charger may have latched, or its mains are gone: what follows could not be told apart."""
    found = rehearse(bench=with_trouble(mute("meter_shunt", 60.0, 2.0), "{at: 61 s, does: mains-lost}"))
    assert found.ended.ended == "bench fault"
    assert "no longer charged as it was before the link was lost" in found.ended.why
    assert not found.failing
