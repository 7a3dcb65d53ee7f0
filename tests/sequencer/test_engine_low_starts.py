"""Deep-discharge starts on the virtual bench: what is done, what is found of it, and whose doing it was."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise
from typing import Any

import numpy as np
import pytest

from sequencer.engine.inputs import Asked, gather
from sequencer.engine.plan import plan_of
from sequencer.engine.record_reader import Record

Rehearse = Callable[..., Any]
IN_PROCESS = {"transport: sockets": "transport: in-process"}
FEW = {"voltages: [0.8 V, 1.2 V, 1.6 V, 2.0 V, 2.5 V, 2.9 V]": "voltages: [1.2 V, 2.9 V]"}
ONE = {"voltages: [0.8 V, 1.2 V, 1.6 V, 2.0 V, 2.5 V, 2.9 V]": "voltages: [2.9 V]"}
NO_WEAK = {"      weak_cell: $weak\n": "", "weak: 2.0 V, ": ""}


@pytest.fixture(scope="module")
def made() -> dict[str, Any]:
    return {}


@pytest.fixture
def shown(made: dict[str, Any], rehearse_full: Rehearse) -> Any:
    """The lantern's starts, once for this module: it probes and refuses, precharges, gives full current."""
    if not made:
        made["run"] = rehearse_full("start-low", spec="lantern")
    return made["run"]


def events(run: Any, *names: str) -> list[dict[str, Any]]:
    return [event for event in Record.open(run.record, check=False).events if event["event"] in names]


def short(tmp_path: Any, replaced: dict[str, str]) -> str:
    from sequencer.engine.inputs import FOLDERS

    text = (FOLDERS["procedure"] / "start-low.yaml").read_text("utf-8")
    for old, new in replaced.items():
        assert old in text, old
        text = text.replace(old, new)
    path = tmp_path / "short.yaml"
    path.write_text(text, "utf-8")
    return str(path)


def test_the_mildest_comes_first_and_each_is_held_where_it_was_set(shown: Any) -> None:
    starts = [event for event in events(shown, "low-start") if event["role"].startswith("start")]
    assert [event["cell_V"] for event in starts] == [2.9, 2.5, 2.0, 1.6, 1.2, 0.8]
    record = Record.open(shown.record, check=False)
    node, ocv = record.series("node.voltage"), record.series("pack.ocv")
    for event in starts:
        inside = (np.asarray(node.time_s) > event["start_s"]) & (np.asarray(node.time_s) < event["start_s"] + 1.0)
        assert np.asarray(node.value)[inside] == pytest.approx(3 * event["cell_V"], abs=5e-3)
        held = (np.asarray(ocv.time_s) > event["start_s"]) & (np.asarray(ocv.time_s) < event["end_s"])
        assert np.ptp(np.asarray(ocv.value)[held]) < 1e-9


def test_the_look_is_fast_throughout(shown: Any) -> None:
    """A probe pulse may be short: ten readings a second from the first to the last."""
    current = Record.open(shown.record, check=False).series("charger.current")
    times_s = np.asarray(current.time_s)
    for event in events(shown, "low-start"):
        inside = times_s[(times_s >= event["start_s"]) & (times_s <= event["end_s"])]
        assert np.max(np.diff(inside)) < 0.15


def test_what_is_refused_stands_between_two_controls(shown: Any) -> None:
    seen = sorted(events(shown, "low-start", "control"), key=lambda event: event["start_s"])
    refused = [n for n, event in enumerate(seen) if "refuses" in event.get("label", "")]
    assert len(refused) == 4 + 3
    for number in refused:
        assert seen[number + 1]["event"] == "control"
        assert seen[number + 1]["good"]
        assert seen[number - 1].get("good") or seen[number - 1].get("label") == "precharges"
        assert seen[number]["end_s"] - seen[number]["start_s"] >= 15.0  # three start delays, and at least 15 s


def test_the_pack_is_raised_in_small_logged_steps(shown: Any) -> None:
    steps = events(shown, "low-step")
    assert steps[-1]["came"]
    levels = [event["cell_V"] for event in steps]
    assert all(0 < b - a <= 0.1 + 1e-9 for a, b in pairwise(levels))
    near = [b - a for a, b in pairwise(levels) if a >= 2.80 - 1e-9]  # declared: 2.80 V to 2.95 V
    assert near == pytest.approx([0.02] * len(near))
    assert all(event["end_s"] - event["start_s"] >= 3.0 for event in steps[:-1])  # three response times
    setting = Record.open(shown.record, check=False).series("set.supply.voltage")
    times_s, volts = np.asarray(setting.time_s), np.asarray(setting.value)
    inside = (times_s > steps[0]["start_s"]) & (times_s <= steps[-1]["end_s"])
    assert (
        np.max(np.abs(np.diff(volts[inside]))) <= 3 * 0.010 + 0.0005 + 1e-6
    )  # 10 mV per cell, and what was too small to move


def test_every_quantity_is_found_where_the_charger_has_it(shown: Any) -> None:
    """The virtual charger's own values: 0.30 A below 2.87 V, three pulses of 0.20 A and 400 ms."""
    current = shown.verdict("low_start.precharge_current")
    assert abs(current["value"] - 0.300) <= current["k"] * current["u"]
    low_V, high_V = shown.verdict("low_start.threshold")["interval"]
    assert low_V <= 2.87 <= high_V + 1e-3
    assert high_V - low_V == pytest.approx(0.02, abs=2e-3)
    probe = shown.verdict("low_start.probe_current")
    assert abs(probe["value"] - 0.200) <= probe["k"] * probe["u"] + 0.002  # the largest of many noisy readings
    lasts = shown.verdict("low_start.probe_time")
    assert abs(lasts["value"] - 0.4) <= lasts["k"] * lasts["u"]
    assert 0.05 < lasts["u"] < 0.07  # 0.1 s of spacing before and after (rectangular), and the aperture
    assert "0.10 s between readings may go unseen" in shown.verdict("low_start.start1.response")["why"]
    assert shown.judged.exit_status == 0


def long(*values: Any) -> Any:
    return pytest.param(*values, marks=pytest.mark.benchmark)


@pytest.mark.parametrize(
    ("charger", "failing"),
    [
        # A charger-IC vendor's published defaults: precharge at 20 % of the fast current, up to 2.5 V per cell. The
        # specification holds a cell maker's precautions, 0.1 C below 3.0 V per cell (0.25 A for 2.5 Ah): both fail.
        (
            "{refuse_below: 1.4 V, precharge: {below: 2.5 V, current: 0.6 A}, cells: all}",
            {"low_start.start2.response", "low_start.precharge_current", "low_start.threshold"},
        ),
        long("{precharge: {below: 3.00 V, current: 0.25 A}, cells: all}", {"low_start.start1.response"}),
        long("{refuse_below: 1.4 V, precharge: {below: 3.00 V, current: 0.25 A}}", {"low_start.cell*.weak_cell"}),
        ("{refuse_below: 2.95 V, cells: all}", {"low_start.start2.response", "low_start.precharge_current",
                                                "low_start.threshold", "low_start.cell*.weak_cell"}),
    ],
    ids=["as an IC does", "refuses nothing", "looks at no cell", "refuses all"],
)  # fmt: skip
def test_what_is_wrong_fails_its_own_limits(
    rehearse_full: Rehearse, tmp_path: Any, charger: str, failing: set[str]
) -> None:
    replaced = {"voltages: [0.8 V, 1.2 V, 1.6 V, 2.0 V, 2.5 V, 2.9 V]": "voltages: [1.2 V, 2.4 V, 2.9 V]"}
    found = rehearse_full(short(tmp_path, replaced), charger={"low_start": charger})
    cells = {f"low_start.cell{cell}.weak_cell" for cell in range(1, 6)}
    expected = {one for one in failing if "*" not in one} | (cells if "low_start.cell*.weak_cell" in failing else set())
    if "0.6 A" in charger:
        expected -= cells
    assert found.failing == expected
    assert found.judged.exit_status == 1


def test_a_start_nobody_cares_for_any_more_is_full_current_at_once(rehearse_full: Rehearse, tmp_path: Any) -> None:
    found = rehearse_full(short(tmp_path, {**FEW, **NO_WEAK}), charger={"low_start": "{refuse_below: 0.6 V}"})
    assert found.verdict("low_start.start1.response")["value"] == "full current"
    assert found.verdict("low_start.start2.response")["value"] == "full current"
    assert "no start was precharged" in found.verdict("low_start.threshold")["why"]


def test_a_fault_latched_for_good_makes_no_fail(rehearse_full: Rehearse, tmp_path: Any) -> None:
    """After the first refusal nothing is charged any more: what comes after it is not known."""
    found = rehearse_full(short(tmp_path, FEW), charger={"fault_latch": "for good"})
    assert found.failing == set()
    assert found.verdicts["low_start.start1.response"] == "inconclusive"
    assert found.verdicts["low_start.start2.response"] == "pass"
    assert found.verdicts["low_start.cell1.weak_cell"] == "inconclusive"
    assert found.judged.exit_status == 4


def test_a_precharge_that_is_given_up_while_watched_is_not_told(rehearse_full: Rehearse, tmp_path: Any) -> None:
    low = "{refuse_below: 1.4 V, precharge: {below: 3.00 V, current: 0.25 A, timeout: 6 s}, cells: all}"
    found = rehearse_full(short(tmp_path, {**FEW, **NO_WEAK}), charger={"low_start": low})
    assert found.failing == set()
    assert found.verdicts["low_start.start2.response"] == "inconclusive"


def test_the_precharge_timer(rehearse_full: Rehearse) -> None:
    """A published charger-IC timer: 30 min, 28.5 to 31.5 min. The virtual charger's is 30 min exactly."""
    found = rehearse_full("precharge-timer", spec_text={"time: {below: 35 min}": "time: [28.5 min, 31.5 min]"}).verdict(
        "low_start.precharge_time"
    )
    assert found["verdict"] == "pass"
    assert abs(found["value"] - 1800.0) <= found["k"] * found["u"]


def test_both_families_give_the_same_verdicts(shown: Any, rehearse_full: Rehearse) -> None:
    other = rehearse_full("start-low", spec="lantern", on="virtual-plain", bench=IN_PROCESS)
    assert other.verdicts == shown.verdicts
    assert set(other.verdicts.values()) == {"pass"}


@pytest.mark.parametrize("spec", [pytest.param("sprayer", marks=pytest.mark.benchmark), "lantern"])
def test_the_prediction_of_bench_time_holds(shown: Any, rehearse_full: Rehearse, spec: str) -> None:
    plan = plan_of(gather(Asked("start-low", spec, bench="virtual-in-process")))
    run = shown if spec == "lantern" else rehearse_full("start-low")
    assert plan.bench_s == pytest.approx(run.ended.performance["run_s"], rel=0.10)


def test_a_sound_charger_may_refuse_and_declare_it(rehearse_full: Rehearse, tmp_path: Any) -> None:
    found = rehearse_full(short(tmp_path, FEW), spec="dibber")
    assert found.failing == set()
    assert found.verdict("low_start.start1.response")["value"] == "refuses"
    assert found.verdict("low_start.start2.response")["value"] == "full current"
    assert found.verdicts["low_start.threshold"] == "not applicable"
    assert found.judged.exit_status == 0


def test_a_start_is_passed_over_where_nothing_is_declared(rehearse_full: Rehearse) -> None:
    found = rehearse_full("start-low", spec="bellows")
    assert events(found, "low-start") == []
    assert [event["why"] for event in events(found, "step-passed-over")] == ["the specification declares no low_start"]
    assert {word for limit, word in found.verdicts.items() if limit != "charges"} == {"not applicable"}
    assert plan_of(gather(Asked("start-low", "bellows"))).bench_s == pytest.approx(
        found.ended.performance["run_s"], rel=0.10
    )


def test_a_declared_range_that_nothing_shows_is_told_before_and_after(rehearse_full: Rehearse, tmp_path: Any) -> None:
    procedure = short(tmp_path, {**ONE, **NO_WEAK})
    plan = plan_of(gather(Asked(procedure, "sprayer", bench="virtual-in-process")))
    assert "not run, no start voltage lies within 0.7 V to 1.3 V" in plan.notes
    found = rehearse_full(procedure)
    assert found.verdicts["low_start.start1.response"] == "not run"
    assert found.verdicts["low_start.start2.response"] == "pass"
    assert found.judged.exit_status == 4


def test_a_wrong_shunt_is_not_the_charger_s_doing(rehearse_full: Rehearse, tmp_path: Any) -> None:
    """22 % of gain would make 305 mA of 250 mA, above the limit of 300 mA; at full current the two ways differ."""
    bench = {"  errors: 1": "  errors: 1\n  shunt_factor: 1.22"}
    found = rehearse_full(short(tmp_path, {**ONE, **NO_WEAK}), bench=bench)
    assert found.failing == set()
    assert found.verdicts["low_start.precharge_current"] == "inconclusive"


def test_a_precharge_is_not_missed_where_none_is_declared(rehearse_full: Rehearse, tmp_path: Any) -> None:
    """The lantern precharges from 2.4 V to 2.82 V; a procedure that starts at 1.2 V and 2.9 V only does not show it."""
    found = rehearse_full(short(tmp_path, {**FEW, **NO_WEAK}), spec="lantern")
    assert found.failing == set()
    for limit in ("precharge_current", "threshold"):
        assert found.verdicts[f"low_start.{limit}"] == "not run"
        assert "2.4 V to 2.82 V, where no start voltage" in found.verdict(f"low_start.{limit}")["why"]


@pytest.mark.parametrize(
    ("trouble", "words", "limit"),
    [
        ("{at: 150 s, does: mains-lost}", "no good control followed", "{below: 35 min}"),
        ("{at: 150 s, does: mains-lost, lasts: 8 s}", "began again by itself", "[28.5 min, 31.5 min]"),
    ],
)
def test_a_precharge_that_the_mains_ended_says_nothing_of_its_timer(
    rehearse_full: Rehearse, trouble: str, words: str, limit: str
) -> None:
    """Ended after 70 s it would pass the one limit and fail the other, and neither is the charger's doing."""
    found = rehearse_full(
        "precharge-timer",
        spec_text={"time: {below: 35 min}": f"time: {limit}"},
        bench={"  errors: 1\n": f"  errors: 1\n  troubles: [{trouble}]\n"},
    )
    assert found.failing == set()
    assert found.verdicts["low_start.precharge_time"] == "inconclusive"
    assert words in found.verdict("low_start.precharge_time")["why"]


def test_mains_gone_while_the_pack_is_raised_leave_the_threshold_open(rehearse_full: Rehearse, tmp_path: Any) -> None:
    low = "{refuse_below: 1.4 V, precharge: {below: 3.20 V, current: 0.25 A}, cells: all}"
    found = rehearse_full(
        short(tmp_path, {**ONE, **NO_WEAK}),
        charger={"low_start": low},
        bench={"  errors: 1\n": "  errors: 1\n  troubles: [{at: 50 s, does: mains-lost}]\n"},
    )
    assert "low_start.threshold" not in found.failing
    assert found.verdicts["low_start.threshold"] == "inconclusive"


@pytest.mark.parametrize("instrument", ["meter_shunt", "mains"])
def test_a_link_lost_at_a_discharged_pack_is_followed_by_a_control_with_a_nominal_one(
    rehearse_full: Rehearse, tmp_path: Any, instrument: str
) -> None:
    trouble = f"{{at: 32 s, does: mute, instrument: {instrument}, lasts: 1 s}}"
    found = rehearse_full(
        short(tmp_path, {**ONE, **NO_WEAK}), bench={"  errors: 1\n": f"  errors: 1\n  troubles: [{trouble}]\n"}
    )
    (broken,) = events(found, "step-broken")
    assert next(event for event in events(found, "control") if event["start_s"] > broken["at_s"])["good"]
    assert (found.ended.ended, found.failing) == ("complete", set())
    assert found.verdicts["low_start.threshold"] == "pass"


def test_mains_gone_for_good_make_no_probe_of_a_precharge(rehearse_full: Rehearse, tmp_path: Any) -> None:
    found = rehearse_full(
        short(tmp_path, {"voltages: [0.8 V, 1.2 V, 1.6 V, 2.0 V, 2.5 V, 2.9 V]": "voltages: [2.5 V]", **NO_WEAK}),
        spec="lantern",
        bench={"  errors: 1\n": "  errors: 1\n  troubles: [{at: 38 s, does: mains-lost}]\n"},
    )
    assert found.failing == set()


@pytest.mark.parametrize(("at_s", "lasts_s"), [(27, 17), (38, 17)])  # before the precharge begins; while it flows
def test_mains_gone_for_one_start_fail_nothing(rehearse_full: Rehearse, tmp_path: Any, at_s: int, lasts_s: int) -> None:
    """Back at the control after it: shown again, the start is precharged, and so the first time tells nothing."""
    trouble = f"{{at: {at_s} s, does: mains-lost, lasts: {lasts_s} s}}"
    found = rehearse_full(
        short(tmp_path, {"voltages: [0.8 V, 1.2 V, 1.6 V, 2.0 V, 2.5 V, 2.9 V]": "voltages: [2.5 V]", **NO_WEAK}),
        spec="lantern",
        bench={"  errors: 1\n": f"  errors: 1\n  troubles: [{trouble}]\n"},
    )
    assert found.failing == set()
    assert len([one for one in events(found, "low-start") if one["cell_V"] == 2.5]) == 2
    assert found.verdicts["low_start.precharge_current"] == "pass"


def test_a_start_that_is_refused_twice_is_refused(rehearse_full: Rehearse, tmp_path: Any) -> None:
    """Declared is a precharge; the charger refuses what lies below 2.6 V."""
    low = "{refuse_below: 2.6 V, precharge: {below: 2.87 V, current: 0.30 A}}"
    found = rehearse_full(
        short(tmp_path, {"voltages: [0.8 V, 1.2 V, 1.6 V, 2.0 V, 2.5 V, 2.9 V]": "voltages: [2.5 V]", **NO_WEAK}),
        spec="lantern",
        charger={"low_start": low},
    )
    assert "low_start.start2.response" in found.failing
    assert len([one for one in events(found, "low-start") if one["cell_V"] == 2.5]) == 2
