"""What goes wrong on the bench while contacts, resistors and taps are at work: named, and never the charger's doing."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Any

import pytest

from drivers.virtual.charger import Charger
from drivers.virtual.resistor import Resistor
from drivers.virtual.tap_supply import TapSupply
from sequencer.engine import resistors
from sequencer.engine.loop import StopFlag
from sequencer.engine.run import Watching

Rehearse = Callable[..., Any]
ONE_BAND = {"  - {id: [0.90 kΩ, 1.10 kΩ], current: 1.5 A ± 5 %}\n": ""}
QUICK = {"resolution": "5 %"}


def with_virtual(line: str) -> dict[str, str]:
    return {"  errors: 1\n": f"  errors: 1\n  {line}\n"}


@pytest.mark.parametrize(
    ("channel", "procedure", "words"),
    [
        ("relays.1", "id-bands", "relays.1: B+ does not open"),
        ("relays.3", "id-bands", "pre-charge (relays.3)"),
        ("relays.4", "id-bands", "relays.4: the ID contact does not open"),
        ("relays.5", "temperature-window", "relays.5: the thermistor contact does not open"),
    ],
)
def test_a_welded_contact_is_named_at_the_first_removal(
    rehearse_full: Rehearse, channel: str, procedure: str, words: str
) -> None:
    found = rehearse_full(procedure, bench=with_virtual(f"welded: {channel}"))
    assert found.ended.ended == "bench fault"
    assert words in found.ended.why
    assert found.ended.safe.verified
    assert found.failing == set()
    assert found.ended.performance["run_s"] < 30


def test_a_charger_that_latches_until_its_mains_are_off_is_told_apart(rehearse_full: Rehearse) -> None:
    found = rehearse_full("id-bands", charger={"fault_latch": "mains"}, spec_text=ONE_BAND, changes=QUICK)
    assert set(found.verdicts.values()) == {"pass"}
    notes = [event for event in events(found) if event["event"] == "note"]
    assert sum("mains are cycled once" in event["text"] for event in notes) >= 3


@pytest.mark.parametrize("procedure", ["id-bands", "temperature-window", "tap-offset"])
def test_a_charger_that_latches_for_good_gets_no_verdict(
    rehearse_full: Rehearse, monkeypatch: pytest.MonkeyPatch, procedure: str
) -> None:
    """It refuses once, or stops once, and never charges again, mains or not: from there on nothing says anything."""
    usual = Charger.mains
    monkeypatch.setattr(Charger, "mains", lambda self, on: None if self.state == "fault" else usual(self, on))
    found = rehearse_full(procedure, charger={"fault_latch": "mains"}, changes={} if procedure != "id-bands" else QUICK)
    assert found.ended.ended == "complete"
    assert found.failing == set()
    assert found.verdicts["charges"] == "pass"
    given_up = next(event for event in events(found) if event["event"] == "given-up")
    assert "no longer charged, though the mains were cycled" in given_up["why"]
    inconclusive = {limit for limit, word in found.verdicts.items() if word == "inconclusive"}
    assert {limit for limit, word in found.verdicts.items() if word == "pass"} - {"charges"} <= {"id.band1.current"}
    assert any("though the mains were cycled" in found.verdict(limit)["why"] for limit in inconclusive)
    assert found.judged.exit_status == 4


def test_a_resistor_whose_switching_stops_the_charge_is_named(rehearse_full: Rehearse) -> None:
    found = rehearse_full("temperature-window", bench=with_virtual("resistor_glitch: 0.3 s"))
    assert found.failing == set()
    for side in ("run_low", "run_high"):
        assert found.verdicts[f"temperature.{side}"] == "inconclusive"
        assert "the resistor's own switching" in found.verdict(f"temperature.{side}")["why"]


def test_a_resistor_that_does_not_do_as_it_is_told_is_no_fail(
    rehearse_full: Rehearse, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Stuck at the nominal 3 kΩ from there on: it "charges outside its band" only by what was set."""
    usual = Resistor._switch

    def sticky(self: Any) -> None:
        if not (self.name == "decade_id" and self.mode == "RES" and self.resistance > 3.5e3):
            usual(self)  # else it reads back what was asked for, and its relays stay

    monkeypatch.setattr(Resistor, "_switch", sticky)
    measured = rehearse_full("id-bands", spec_text=ONE_BAND, changes=QUICK)
    assert measured.ended.ended == "bench fault"
    assert re.match(r"decade_id: was set to 4\.\d+ kΩ and measures 2\.\d+ kΩ", measured.ended.why)
    assert (measured.failing, measured.ended.safe.verified) == (set(), True)
    monkeypatch.setattr(resistors, "measure", lambda *_: None)  # as on a bench without ohmmeter
    found = rehearse_full("id-bands", spec_text=ONE_BAND, changes=QUICK)
    assert found.failing == set()
    assert found.verdicts["id.outside"] == "inconclusive"
    assert "the resistor did not do as it was told" in found.verdict("id.outside")["why"]


def test_a_dead_tap_channel_is_named_before_the_charger_sees_it(
    rehearse_full: Rehearse, monkeypatch: pytest.MonkeyPatch
) -> None:
    usual = TapSupply._switch

    def dead(self: Any, on: bool, channels: tuple[int, ...]) -> None:
        usual(self, on, tuple(channel for channel in channels if channel != 2))
        self._outputs[2].on = on  # it says that it is on

    monkeypatch.setattr(TapSupply, "_switch", dead)
    found = rehearse_full("tap-offset")
    assert found.ended.ended == "bench fault"
    assert "cells.2: plays cell 2 and reads" in found.ended.why
    assert found.failing == set()
    assert found.ended.safe.verified


def test_a_tap_channel_that_dies_later_trips_the_guard(
    rehearse_full: Rehearse, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Its set voltage has no effect any more once a cell is raised."""
    usual = TapSupply._set_voltage
    monkeypatch.setattr(TapSupply, "_set_voltage", lambda self, value, channels: usual(self, min(value, 3.9), channels))
    found = rehearse_full("tap-offset")
    assert found.ended.ended == "trip"
    trip = next(event for event in events(found) if event["event"] == "trip")
    assert trip["cause"] == "bench"
    assert "dead or overloaded channel" in trip["why"]
    assert found.failing == set()


def severed(instrument: str, after_s: float) -> Callable[[Any], None]:
    """Let a link fail for good once the bench's clock has passed a moment."""
    from drivers.exchange import Reply
    from drivers.trouble import LinkFault

    def act(bench: Any) -> None:
        usual = type(bench.exchange).__call__

        class Cut(type(bench.exchange)):  # type: ignore[misc]
            def __call__(self, jobs: Any, wait_s: float) -> list[Any]:
                now_s = bench.clock.now()
                replies = usual(self, [job for job in jobs if job.instrument != instrument or now_s < after_s], wait_s)
                answers = iter(replies)
                lost = LinkFault(instrument, "no answer in time")
                return [
                    Reply(instrument, (), now_s, lost)
                    if job.instrument == instrument and now_s >= after_s
                    else next(answers)
                    for job in jobs
                ]

        bench.exchange.__class__ = Cut

    return act


@pytest.mark.parametrize("instrument", ["scanner", "cells", "decade_id", "relays"])
def test_a_link_that_is_lost_ends_the_run_with_its_name(rehearse_full: Rehearse, instrument: str) -> None:
    found = rehearse_full("id-bands", opened=severed(instrument, 40.0), spec_text=ONE_BAND, changes=QUICK)
    assert found.ended.ended in ("bench fault", "trip")
    assert instrument in found.ended.why
    assert found.failing == set()
    # Energy is gone; with the relays mute, or the taps not proven down, nobody may call it safe.
    assert found.ended.safe.verified is (instrument not in ("relays", "cells"))
    assert "mains off" in found.ended.safe.words[0]


def test_a_run_stopped_in_the_middle_is_judged_as_far_as_it_is_complete(rehearse_full: Rehearse) -> None:
    stop = StopFlag()

    def at(scan: Any) -> None:
        if scan.time_s > 250:
            stop.why = "stopped by Ctrl-C"

    found = rehearse_full("acceptance", stop=stop, watching=Watching(scans=at))
    assert found.ended.ended == "stopped"
    assert found.ended.safe.verified
    words = found.verdicts
    assert words["charges"] == words["id.band1.current"] == words["id.band1.lower_edge"] == "pass"
    for limit in ("id.outside", "id.open", "temperature.start_low", "tap_trip.cell1.voltage", "charge.algorithm"):
        assert words[limit] == "not run", limit
    assert "the run ended early: stopped by Ctrl-C" in found.verdict("id.outside")["why"]


def test_a_raise_stopped_on_its_way_is_no_cell_that_never_stops(rehearse_full: Rehearse) -> None:
    stop = StopFlag()

    def at(scan: Any) -> None:
        if scan.time_s > 45:
            stop.why = "stopped by Ctrl-C"

    found = rehearse_full("tap-offset", stop=stop, watching=Watching(scans=at))
    assert any(event["event"] == "walk" for event in events(found))
    assert found.failing == set()
    assert found.verdicts["tap_trip.cell1.voltage"] == "not run"


def test_only_a_charge_still_puts_the_pack_in(rehearse_full: Rehearse) -> None:
    found = rehearse_full("acceptance", only=("charge",))
    assert found.verdicts["charge.algorithm"] == "pass"
    assert found.verdicts["id.open"] == "not run"
    assert found.judged.exit_status == 0


def test_only_a_sweep_leaves_the_charge_out(rehearse_full: Rehearse) -> None:
    found = rehearse_full("acceptance", only=("raise_cell",), spec="lantern")
    assert {word for limit, word in found.verdicts.items() if limit.startswith("tap_trip")} == {"pass"}
    assert found.verdicts["charge.algorithm"] == "not run"
    assert found.judged.exit_status == 0


def events(found: Any) -> list[dict[str, Any]]:
    from sequencer.engine.record_reader import Record

    return list(Record.open(found.record, check=False).events)


@pytest.mark.parametrize(
    "trouble", ["{at: 33 s, does: mains-lost, lasts: 8 s}", "{at: 40 s, does: mains-lost, lasts: 25 s}"]
)
def test_mains_that_are_gone_for_a_while_fail_no_band(rehearse_full: Rehearse, trouble: str) -> None:
    """The charge of a band's point breaks off, or does not begin; shown once more, it is charged."""
    found = rehearse_full("id-bands", spec_text=ONE_BAND, changes=QUICK, bench=with_virtual(f"troubles: [{trouble}]"))
    assert found.failing == set()
    assert found.verdicts["id.band1.current"] == "inconclusive"
    assert "shown again, it charged" in found.verdict("id.band1.current")["why"]
