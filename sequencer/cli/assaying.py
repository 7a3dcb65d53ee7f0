"""`packmime assay`: which defects, from which size on, a procedure finds on virtual chargers, and what it cries for."""

from __future__ import annotations

import json as json_text
import sys
from collections.abc import Callable
from pathlib import Path

import typer
from rich.console import Console

from drivers.clock import wall_seconds
from sequencer.cli.answers import BENCH_FAULT, OUR_FAULT
from sequencer.cli.assay_outcome import Outcome, document, exit_status
from sequencer.cli.assay_plan import AssayPlan, plan_assay
from sequencer.cli.assay_table import sentence, show, summary
from sequencer.cli.assay_work import cores, side_by_side
from sequencer.cli.stopping import noted_signals
from sequencer.cli.terminal import Terminal
from sequencer.engine.loop import StopFlag
from sequencer.engine.record import refuse_unless_free


def assay_command(
    procedure: str, specs: list[str], defects: str, seeds: int, seed: int, keep: Path | None, as_json: bool
) -> None:
    """See `packmime assay --help`. Raises BadInput, RecordError, and typer.Exit with 0, 1, 3, 4 or 70."""
    begun_s = wall_seconds()
    if keep is not None:
        refuse_unless_free(keep)
    plan = plan_assay(procedure, specs, defects, range(seed, seed + seeds))
    says = _says(as_json)
    _opening(plan, says)
    outcomes = _carried_out(plan, keep, says)
    if as_json:
        typer.echo(json_text.dumps(document(plan.procedure, outcomes), ensure_ascii=False, allow_nan=False))
    else:
        show(outcomes)
        summary(outcomes, plan.untried, wall_seconds() - begun_s, says)
    raise typer.Exit(exit_status(outcomes, plan.untried))


def _says(as_json: bool) -> Callable[[str], None]:
    """Sentences go to the terminal; with --json to standard error, and only where a person looks at it."""
    if not as_json:
        return Terminal(0.0).say
    if sys.stderr.isatty():
        return Terminal(0.0, Console(stderr=True, highlight=False)).say
    return lambda words: None


def _opening(plan: AssayPlan, says: Callable[[str], None]) -> None:
    sound = sum(trial.defect is None for trial in plan.trials)
    workers = min(cores(), len(plan.trials))
    says(
        f"{plan.procedure}: {sound} runs on sound chargers, {len(plan.trials) - sound} on chargers with a defect, "
        f"{workers} side by side; all on virtual benches"
    )
    for note in plan.notes:
        says(note)


def _carried_out(plan: AssayPlan, keep: Path | None, says: Callable[[str], None]) -> list[Outcome]:
    stop, done = StopFlag(), 0

    def told(outcome: Outcome) -> None:
        nonlocal done
        done += 1
        says(f"{done:3d}/{len(plan.trials)}  {sentence(outcome)}")

    with noted_signals(stop):
        outcomes = side_by_side(plan.trials, keep, stop, told)
    if stop.why is not None:
        Terminal(0.0, Console(stderr=True, highlight=False)).say(f"{stop.why}; every run was ended")
        raise typer.Exit(BENCH_FAULT)
    faults = [one for one in outcomes if one.fault is not None]
    for one in faults:
        Terminal(0.0, Console(stderr=True, highlight=False)).say(
            f"a fault of packmime itself: {one.trial.words}: {one.fault}"
        )
    if faults:
        raise typer.Exit(OUR_FAULT)
    return outcomes
