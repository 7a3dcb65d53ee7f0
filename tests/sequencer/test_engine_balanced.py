"""Balancing screened on virtual benches: the true current lies in its interval, none is none, doubt is doubt."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

Rehearse = Callable[..., Any]
SEED = 20261201
SHORT = {"longest_period": "2 s"}
IN_PROCESS = {"transport: sockets": "transport: in-process"}
DECLARED = {"balancing: {none_above: 1 mA}": "balancing: {current: 4 mA ± 20 %}"}


def screen(rehearse_full: Rehearse, charger: dict[str, str] | None = None, **more: Any) -> Any:
    asked = {"spec": "lantern", "changes": SHORT, **more}
    return rehearse_full("balancing-screening", charger=charger or {}, **asked)


def exchanges(found: Any) -> dict[tuple[int, str], dict[str, Any]]:
    """What each cell exchanges, by cell and way, out of the judgement's findings."""
    text = (found.record / "judged" / "001" / "findings.json").read_text("utf-8")
    return {(one["cell"], one["way"]): one for one in json.loads(text)["balancing"]["exchanges"]}


def test_a_sound_charger_shows_none_and_the_absence_is_not_run_on_purpose(rehearse_full: Rehearse) -> None:
    found = screen(rehearse_full, {"tap_current": "3 mA"})
    screening = found.verdict("balancing.screening")
    assert (screening["verdict"], screening["value"]) == ("pass", "none found")
    for words in ("none found above", "a screening", "±50 mV", "up to 2 s", "alpha = beta = 5 %", "3 mA flow"):
        assert words in screening["why"]
    absence = found.verdict("balancing.none_above")
    assert absence["verdict"] == "not run"
    assert absence["why"].startswith("on purpose")
    assert found.judged.document["overall"] == "pass"
    assert found.judged.exit_status == 0


@pytest.mark.parametrize("spec", ["lantern", pytest.param("sprayer", marks=pytest.mark.benchmark)])
@pytest.mark.parametrize("kind", ["bleed", "tap_charge"])
def test_the_true_current_of_every_cell_lies_in_its_interval(rehearse_full: Rehearse, spec: str, kind: str) -> None:
    """A size drawn by a printed seed, on every cell: out of the high ones, or into the low ones."""
    size_A = round(float(np.random.default_rng([SEED, *kind.encode()]).uniform(0.002, 0.012)), 6)
    print(f"seed {SEED}, {kind}: {size_A} A")
    found = screen(rehearse_full, {kind: f"{{current: {size_A:.6f} A, difference: 20 mV}}"}, spec=spec)
    true_A = {"high": size_A if kind == "bleed" else 0.0, "low": 0.0 if kind == "bleed" else -size_A}
    for (cell, way), one in exchanges(found).items():
        assert abs(one["out_A"] - true_A[way]) <= 1.2 * one["U_A"], (cell, way, one)
    words = "out of cells 1, 2, 3" if kind == "bleed" else "into cells 1, 2, 3"
    assert words in found.verdict("balancing.screening")["why"]
    assert found.failing == {"balancing.screening"}
    assert found.judged.exit_status == 1


def test_a_declared_balancing_is_judged_cell_by_cell(rehearse_full: Rehearse) -> None:
    """1 kΩ over 4.03 V is 4.03 mA (Ohm's law); the cell that is left out fails alone."""
    bleed = {"bleed": "{resistance: 1 kΩ, difference: 20 mV, cells: [1, 3]}"}
    found = screen(rehearse_full, bleed, spec_text=DECLARED)
    assert found.failing == {"balancing.cell2.current"}
    assert found.verdicts["balancing.screening"] == "pass"
    assert found.verdict("balancing.cell1.current")["value"] == pytest.approx(4.03e-3, rel=0.01)
    assert "not found; from" in found.verdict("balancing.cell2.current")["why"]
    assert found.verdicts["balancing.none_above"] == "not applicable"


@pytest.mark.benchmark
def test_a_declared_balancing_that_is_missing_fails(rehearse_full: Rehearse) -> None:
    found = screen(rehearse_full, spec_text=DECLARED)
    assert found.failing == {"balancing.screening", *(f"balancing.cell{cell}.current" for cell in (1, 2, 3))}
    assert "declared is that it is there" in found.verdict("balancing.screening")["why"]


@pytest.mark.benchmark
def test_a_bleed_below_what_is_declared_is_told_and_passes(rehearse_full: Rehearse) -> None:
    found = screen(rehearse_full, {"bleed": "{current: 200 µA, difference: 20 mV, cells: [2]}"})
    screening = found.verdict("balancing.screening")
    assert screening["verdict"] == "pass"
    assert screening["value"] == pytest.approx(2e-4, rel=0.02)
    assert "200 µA out of cell 2 standing high" in screening["why"]


@pytest.mark.benchmark
def test_pulses_widen_the_limit_and_the_mean_is_found(rehearse_full: Rehearse) -> None:
    """8 mA for 0.9 s every 2.9 s, off the scan's pace: 2.48 mA in the mean, by readings of 20 ms."""
    pulsed = {"bleed": "{current: 8 mA, difference: 20 mV, every: 2.9 s, for: 0.9 s}"}
    found = screen(rehearse_full, pulsed, changes={"longest_period": "20 s"})
    calm = screen(rehearse_full)
    assert "fail" in found.verdict("balancing.screening")["verdict"]
    for cell in (1, 2, 3):
        one = exchanges(found)[cell, "high"]
        assert abs(one["out_A"] - 8e-3 * 0.9 / 2.9) <= one["U_A"]
        assert one["detectable_A"] > 20 * exchanges(calm)[cell, "high"]["detectable_A"]


def test_what_a_channel_would_have_to_absorb_beyond_its_means_is_inconclusive(rehearse_full: Rehearse) -> None:
    """A dialect that says nothing absorbs nothing: the cell may not have stood where it was set."""
    from sequencer.engine.accuracy import Accuracy
    from sequencer.engine.balanced import balance_findings
    from sequencer.engine.evidence import open_evidence

    found = screen(rehearse_full, {"tap_charge": "{current: 10 mA, difference: 20 mV}"})
    evidence = open_evidence(found.record)
    for name, dialect in list(evidence.bench.dialects.items()):
        if name == "cells":
            object.__setattr__(dialect.model, "sinks", None)
    told = balance_findings(evidence, Accuracy(evidence.bench, 12.9))["balancing.screening"].trouble
    assert told is not None
    assert "the supply of cell 1 (cells) would have to absorb 9.9" in told  # 10 mA less the divider's 20 µA, twice
    assert "says 0 A" in told


@pytest.mark.benchmark
def test_a_channel_that_gives_way_ends_the_run_as_the_benchs_doing(rehearse_full: Rehearse) -> None:
    found = screen(rehearse_full, {"tap_charge": "{current: 90 mA, difference: 20 mV}"})
    assert found.ended.ended == "trip"
    assert found.judged.bench_trip
    assert found.verdicts["balancing.screening"] == "inconclusive"


@pytest.mark.benchmark
def test_a_charge_that_stops_meanwhile_is_inconclusive(rehearse_full: Rehearse) -> None:
    """A monitor far below what is declared stops the charge with each high cell, and lets it go on without the drop."""
    low = "{threshold: 4.01 V, filter: 0.5 s, hysteresis: 20 mV, latch: false}"
    found = screen(rehearse_full, {"tap_monitor": low})
    screening = found.verdict("balancing.screening")
    assert screening["verdict"] == "inconclusive"
    assert "the charge did not go on while the cells stood apart" in screening["why"]
    latched = screen(rehearse_full, {"tap_monitor": low.replace("false", "true")})
    assert "the charge stopped while the cells stood apart" in latched.verdict("balancing.screening")["why"]


@pytest.mark.benchmark
@pytest.mark.parametrize("charger", [{}, {"bleed": "{current: 3 mA, difference: 20 mV}"}], ids=["sound", "bleeds"])
def test_both_families_give_the_same_verdicts(rehearse_full: Rehearse, charger: dict[str, str]) -> None:
    one = screen(rehearse_full, charger)
    other = screen(rehearse_full, charger, on="virtual-plain", bench=IN_PROCESS)
    assert one.verdicts == other.verdicts


def test_the_prediction_of_bench_time_holds(rehearse_full: Rehearse) -> None:
    from sequencer.engine.inputs import Asked, gather
    from sequencer.engine.plan import plan_of

    plan = plan_of(gather(Asked("balancing-screening", "lantern", bench="virtual-in-process", changes=SHORT)))
    assert plan.bench_s == pytest.approx(screen(rehearse_full).ended.performance["run_s"], rel=0.10)


@pytest.mark.benchmark
def test_true_currents_of_many_chargers_lie_in_their_intervals(rehearse_full: Rehearse) -> None:
    """Eight benches and chargers, sizes drawn from 30 µA to 30 mA: U is for 95 %; 48 intervals may miss 6 (1 %)."""
    draw, held = np.random.default_rng([SEED, 8]), 0
    for seed in range(1, 9):
        size_A, cell = float(f"{10 ** draw.uniform(-4.5, -1.5):.3g}"), int(draw.integers(1, 4))
        bleed = {"bleed": f"{{current: {size_A:.6g} A, difference: 20 mV, cells: [{cell}]}}"}
        found = exchanges(screen(rehearse_full, bleed, seed=seed))
        assert found[cell, "high"]["found"]
        for (number, way), one in found.items():
            held += abs(one["out_A"] - (size_A if (number, way) == (cell, "high") else 0.0)) <= one["U_A"]
    print(f"seed {SEED}: {held} of 48 true currents lie in their intervals")
    assert held >= 42
