"""Whole runs on the virtual bench, in process: sound chargers pass, wrong ones fail by the right limits.

The sizes of what is wrong are drawn by a printed seed within stated ranges; no test tunes a limit to a size.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

SEEDS = (3, 11, 27)


@pytest.mark.parametrize("spec", ["sprayer", "lantern"])
@pytest.mark.parametrize("seed", [1, 10])  # 10: one of those that look fast throughout
def test_sound_chargers_pass(rehearse: Callable, spec: str, seed: int) -> None:
    done = rehearse(spec=spec, seed=seed)
    assert set(done.verdicts.values()) <= {"pass", "not applicable"}
    assert done.judged.exit_status == 0
    assert done.ended.safe.verified


@pytest.mark.parametrize("seed", SEEDS)
def test_regulation_too_high(rehearse: Callable, seed: int) -> None:
    high_V = float(np.random.default_rng(seed).uniform(4.255, 4.30))
    print(f"seed {seed}: regulates at {high_V:.4f} V per cell instead of 4.20 V")
    done = rehearse(charger={"voltage_per_cell": f"{high_V:.4f} V"}, seed=seed)
    assert done.failing == {"charge.voltage", "charge.end_voltage"}
    assert done.judged.exit_status == 1
    assert done.verdict("charge.voltage")["value"] == pytest.approx(high_V, abs=1e-3)


@pytest.mark.parametrize("seed", SEEDS)
def test_wrong_current(rehearse: Callable, seed: int) -> None:
    rng = np.random.default_rng(seed)
    current_A = float(3.0 * (1 + rng.choice([-1, 1]) * rng.uniform(0.07, 0.25)))
    print(f"seed {seed}: charges with {current_A:.3f} A instead of 3.0 A")
    done = rehearse(charger={"stages": f"[{{current: {current_A:.4f} A}}]"}, seed=seed)
    assert done.failing == {"charge.stage1.current"}
    assert done.judged.exit_status == 1
    assert done.verdict("charge.stage1.current")["value"] == pytest.approx(current_A, rel=5e-3)


@pytest.mark.parametrize("seed", SEEDS)
def test_no_termination(rehearse: Callable, seed: int) -> None:
    print(f"seed {seed}: never ends")
    done = rehearse(charger={"ends": "false"}, seed=seed)
    assert done.failing == {"charge.ends", "charge.cutoff"}
    assert done.judged.exit_status == 1


@pytest.mark.parametrize("seed", SEEDS)
def test_wrong_threshold_of_a_stepped_charger(rehearse: Callable, seed: int) -> None:
    rng = np.random.default_rng(seed)
    first_V = float(4.10 + rng.choice([-1, 1]) * rng.uniform(0.03, 0.06))
    print(f"seed {seed}: steps down at {first_V:.4f} V per cell instead of 4.10 V")
    stages = f"[{{current: 2.0 A, until: {first_V:.4f} V}}, {{current: 1.0 A, until: 4.20 V}}]"
    done = rehearse(spec="lantern", charger={"stages": stages}, seed=seed)
    assert done.failing == {"charge.stage1.threshold"}


def test_a_dead_charger_fails_at_the_first_step(rehearse: Callable) -> None:
    done = rehearse(charger={"works": "false"})
    assert done.failing == {"charges"}
    assert set(done.verdicts.values()) == {"fail", "not run", "not applicable"}
    assert done.judged.exit_status == 1
    assert done.ended.safe.verified
    assert done.ended.performance["run_s"] < 60


def test_a_charger_at_1_7_times_its_current_fails(rehearse: Callable) -> None:
    """It pushes the supply nearly out of constant voltage; the current is still read, and judged."""
    done = rehearse(charger={"stages": "[{current: 5.1 A}]"})
    assert done.ended.ended == "complete", done.ended.why
    assert done.failing == {"charge.stage1.current"}


def test_a_charger_beyond_what_the_load_draws_fails_with_the_trip_as_evidence(rehearse: Callable) -> None:
    done = rehearse(charger={"stages": "[{current: 6.0 A}]"})
    assert done.ended.ended == "trip"
    assert done.failing == {"charge.stage1.current"}
    assert "the guard ended the run" in done.verdict("charge.stage1.current")["why"]
    assert not done.judged.bench_trip
    assert done.judged.exit_status == 1
    assert done.ended.safe.verified


def test_a_shunt_that_is_wrong_is_never_held_against_the_charger(rehearse: Callable) -> None:
    done = rehearse(bench={"errors: 1": "errors: 1\n  shunt_factor: 1.3"})
    assert done.verdicts["charge.stage1.current"] == "inconclusive"
    assert "charge.stage1.current" not in done.failing
    assert "load minus supply" in done.verdict("charge.stage1.current")["why"]


def test_a_supply_in_current_limit_is_the_benchs_doing(rehearse: Callable) -> None:
    done = rehearse(bench={"errors: 1": "errors: 1\n  supply_limit: 2 A"})
    assert done.ended.ended in ("trip", "bench fault")
    assert not done.failing
    assert done.ended.safe.verified


@pytest.mark.parametrize("seed", SEEDS)
def test_fast_throughout_gives_the_same_verdicts(rehearse: Callable, seed: int) -> None:
    assert rehearse(seed=seed).verdicts == rehearse(seed=seed, always_fast=True).verdicts
