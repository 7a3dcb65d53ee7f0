"""Troubles of mains, load, supply, shunt and meters, and chargers that begin by themselves: who is blamed for what."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest

from drivers.virtual.charger import Charger
from sequencer.engine.record_reader import Record
from sequencer.engine.run import Watching

Rehearse = Callable[..., Any]
ENDS = {"charge.algorithm", "charge.cutoff", "charge.ends", "charge.current_after_end"}
ONE_BAND = {"  - {id: [0.90 kΩ, 1.10 kΩ], current: 1.5 A ± 5 %}\n": ""}


def with_trouble(trouble: str) -> dict[str, str]:
    return {"errors: 1\n": f"errors: 1\n  troubles: [{trouble}]\n"}


# mains: the switch reads closed, and there may still be none


@pytest.mark.parametrize("at_s", [60, 360])  # at constant current, at constant voltage
@pytest.mark.parametrize("spec", ["sprayer"])
def test_mains_lost_in_mid_charge_are_no_early_end_of_the_charger(rehearse: Rehearse, spec: str, at_s: int) -> None:
    found = rehearse(spec=spec, bench=with_trouble(f"{{at: {at_s} s, does: mains-lost}}"))
    assert found.ended.ended == "complete"
    assert found.failing == set()
    assert {limit for limit, word in found.verdicts.items() if word == "inconclusive"} >= ENDS
    assert "did not charge again when its mains were cycled" in found.verdict("charge.ends")["why"]
    assert found.verdicts["charge.stage1.current"] == "pass"  # read before it
    assert found.judged.exit_status == 4


def test_mains_lost_in_mid_charge_of_a_stepped_charger(rehearse: Rehearse) -> None:
    found = rehearse(spec="lantern", bench=with_trouble("{at: 60 s, does: mains-lost}"))
    assert found.failing == set()
    for limit in ("charge.algorithm", "charge.stage1.threshold", "charge.stage2.current", "charge.ends"):
        assert found.verdicts[limit] == "inconclusive", limit


@pytest.mark.parametrize("lasts_s", [2, 20])
def test_mains_that_were_gone_for_a_while(rehearse: Rehearse, lasts_s: int) -> None:
    found = rehearse(bench=with_trouble(f"{{at: 60 s, does: mains-lost, lasts: {lasts_s} s}}"))
    assert found.failing == set()
    assert "began again by itself" in found.verdict("charge.ends")["why"]
    assert "mains that were gone for a while" in found.verdict("charge.cutoff")["why"]


def test_a_charger_that_ends_too_early_fails_with_its_mains_proven(rehearse: Rehearse) -> None:
    found = rehearse(charger={"cutoff": "500 mA"})
    assert found.failing == {"charge.cutoff"}
    assert found.judged.exit_status == 1
    assert "it charged again when its mains were cycled, so it had them" in found.verdict("charge.ends")["why"]


def test_a_charge_that_ends_as_declared_needs_no_witness(rehearse: Rehearse) -> None:
    found = rehearse()
    assert not [event for event in events(found) if event["event"] == "mains-witness"]


@pytest.mark.parametrize("bench", ["rehearse", "rehearse_full"])
def test_a_switch_that_falls_open_is_read_back(bench: str, request: pytest.FixtureRequest) -> None:
    found = request.getfixturevalue(bench)("charge-profile", bench=with_trouble("{at: 60 s, does: mains-open}"))
    assert found.ended.ended == "trip"
    assert "reads open though it was closed" in found.ended.why
    assert 60.0 < events(found, "trip")[0]["t"] < 62.5
    assert found.judged.bench_trip
    assert found.failing == set()
    assert found.ended.safe.verified


# a charger that delivers by itself


def test_a_charger_that_starts_again_after_its_end(rehearse: Rehearse) -> None:
    """It ended at 412 s; at 440 s it begins anew, with the pack still in."""
    found = rehearse(bench=with_trouble("{at: 440 s, does: charger-starts}"))
    assert found.failing == {"charge.current_after_end"}
    assert found.judged.exit_status == 1
    assert "it began to charge again at 440" in found.verdict("charge.ends")["why"]
    assert found.verdicts["charge.cutoff"] == "pass"  # that of the end itself, not of what came after


@pytest.fixture
def outside_s(rehearse_full: Rehearse) -> float:
    """When the charger is first shown an ID outside its band, in a run without trouble."""
    found = rehearse_full("id-bands", spec_text=ONE_BAND, changes={"resolution": "5 %"})
    assert found.verdicts["id.outside"] == "pass"
    return float(next(event["start_s"] for event in events(found, "point") if event["label"] == "no charge"))


def test_a_charger_that_starts_late_though_the_packs_id_says_no(rehearse_full: Rehearse, outside_s: float) -> None:
    trouble = with_trouble(f"{{at: {outside_s + 12.0} s, does: charger-starts}}")
    found = rehearse_full("id-bands", bench=trouble, spec_text=ONE_BAND, changes={"resolution": "5 %"})
    assert "id.outside" in found.failing
    assert found.judged.exit_status == 1
    assert found.verdicts["id.open"] == found.verdicts["id.short"] == "pass"


def test_a_charger_that_delivers_without_its_mains_is_not_safe(rehearse: Rehearse) -> None:
    """The charge is over at 477 s and the mains are off; half a second before that is proven it begins."""
    alarms: list[str] = []
    found = rehearse(bench=with_trouble("{at: 480 s, does: charger-starts}"), watching=Watching(alarm=alarms.append))
    assert found.ended.ended == "bench fault"
    assert "the mains are off, and the charger's current still flows" in found.ended.why
    assert not found.ended.safe.verified
    assert any("charger still sources" in words for words in alarms)
    assert found.failing == set()


def test_a_dead_charger_is_told_with_what_is_known_of_its_mains(rehearse: Rehearse) -> None:
    found = rehearse(charger={"works": "false"})
    assert found.failing == {"charges"}
    assert "the mains switch read closed" in found.verdict("charges")["why"]


def test_a_dead_charger_with_excited_contacts_had_its_mains(
    rehearse_full: Rehearse, monkeypatch: pytest.MonkeyPatch
) -> None:
    """It charges nothing, and still feeds its ID contact: whoever judges it need not look for the plug."""
    monkeypatch.setattr(Charger, "_accepts", lambda self: False)
    found = rehearse_full("id-bands")
    assert found.failing == {"charges"}
    assert "it feeds its ID contact" in found.verdict("charges")["why"]


# the bench: shunt, load, supply, meters


@pytest.mark.parametrize("factor", [0.0, 0.4, 0.5])
def test_a_shunt_that_reads_too_little_is_no_charger_that_does_not_charge(rehearse: Rehearse, factor: float) -> None:
    found = rehearse(bench={"errors: 1\n": f"errors: 1\n  shunt_factor: {factor}\n"})
    assert found.failing == set()
    if factor == 0.5:  # more than half of what is declared: the run goes on, and says what it does not believe
        assert found.verdicts["charge.stage1.current"] == "inconclusive"
        assert "load minus supply" in found.verdict("charge.stage1.current")["why"]
    else:
        assert found.ended.ended == "bench fault"
        assert "meter_shunt" in found.ended.why
        assert "load less supply is 2.99" in found.ended.why
    assert found.ended.safe.verified


def test_a_supply_pushed_out_by_a_charger_at_1_7_times_its_current_is_a_fail(rehearse: Rehearse) -> None:
    """5.1 A; the load draws 5 A, for the rating plate says 4 A: the charger takes the node from the supply."""
    found = rehearse(
        charger={"stages": "[{current: 5.1 A}]"}, spec_text={"rating_current: 4.5 A": "rating_current: 4.0 A"}
    )
    assert (found.ended.ended, found.judged.bench_trip) == ("trip", False)
    assert found.failing == {"charge.stage1.current"}
    assert "the charger delivers nearly all that the load draws" in found.verdict("charge.stage1.current")["why"]
    assert found.judged.exit_status == 1
    assert found.ended.safe.verified


@pytest.mark.parametrize("at_s", [5, 60])
def test_a_supply_that_limits_by_itself_is_the_benchs_doing(rehearse: Rehearse, at_s: int) -> None:
    found = rehearse(bench=with_trouble(f"{{at: {at_s} s, does: supply-limits}}"))
    assert (found.ended.ended, found.judged.bench_trip) == ("trip", True)  # exit status 3
    assert "current limit" in found.ended.why
    assert found.failing == set()
    assert found.ended.safe.verified
    if at_s == 60:
        assert found.verdicts["charge.stage1.current"] == "inconclusive"


def test_a_load_that_trips_in_mid_charge(rehearse: Rehearse) -> None:
    found = rehearse(bench=with_trouble("{at: 60 s, does: load-trips}"))
    assert (found.ended.ended, found.judged.bench_trip) == ("trip", True)
    assert "the load tripped" in found.ended.why
    assert found.ended.safe.verified
    assert found.failing == set()
    assert found.verdicts["charge.ends"] == "inconclusive"


@pytest.mark.parametrize("meter", ["meter_node", "meter_charger", "meter_shunt"])
@pytest.mark.parametrize("lasts", [", lasts: 1 s", ""])
def test_a_meter_that_answers_overload_once_or_for_good(rehearse: Rehearse, meter: str, lasts: str) -> None:
    """9.9E37 is infinity (SCPI-1999, volume 1, 7.2.1.4). Without the node's meter nobody has seen it go down."""
    found = rehearse(bench=with_trouble(f"{{at: 60 s, does: overload, instrument: {meter}{lasts}}}"))
    assert (found.ended.ended, found.judged.bench_trip) == ("trip", True)
    assert "overload" in found.ended.why
    assert found.ended.safe.verified is (meter != "meter_node" or bool(lasts))
    assert found.failing == set()
    assert found.verdicts["charges"] == "pass"
    assert found.verdicts["charge.algorithm"] == "inconclusive"
    channel = Record.open(found.record, check=False).series("charger.current")
    assert max(channel.value) < 10.0  # an overload is no number


def events(found: Any, name: str | None = None) -> list[dict[str, Any]]:
    every = list(Record.open(found.record, check=False).events)
    return every if name is None else [event for event in every if event["event"] == name]
