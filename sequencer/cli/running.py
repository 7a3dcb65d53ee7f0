"""`packmime run`: files checked, bench opened, procedure carried out, record judged, report written."""

from __future__ import annotations

from pathlib import Path

import typer

from drivers.clock import utc_now
from drivers.open_bench import open_bench
from drivers.text.faults import BadInput, Fault, Faults, Place
from drivers.text.nearest import unknown
from sequencer.cli.access import access_to, charger_for
from sequencer.cli.answers import BENCH_FAULT, OUR_FAULT
from sequencer.cli.judging import judge_and_report
from sequencer.cli.stopping import noted_signals
from sequencer.cli.terminal import Terminal
from sequencer.engine.inputs import Asked, gather
from sequencer.engine.loop import StopFlag
from sequencer.engine.plan import plan_of
from sequencer.engine.record import refuse_unless_free
from sequencer.engine.run import Ended, Options, run
from sequencer.model.steps import KINDS


def run_command(asked: Asked, charger: str | None, out: Path | None, only: list[str]) -> None:
    """See `packmime run --help`. Raises typer.Exit with the status of what came of it."""
    seed = asked.seed if asked.seed is not None else 1
    inputs = gather(asked)
    _check_only(only)
    virtual_charger = charger_for(inputs.bench, charger, asked.specification, inputs.pack)
    folder = out or Path("runs") / f"{utc_now():%Y%m%dT%H%M%S}-{inputs.procedure.model.name}"
    refuse_unless_free(folder)
    stop = StopFlag()
    terminal = Terminal(plan_of(inputs).bench_s)
    with access_to(inputs.bench, virtual_charger, seed) as access, noted_signals(stop), terminal:
        terminal.opening(inputs, access, folder)
        opened = open_bench(inputs.bench, access)
        try:
            options = Options(folder, seed if access.clock.virtual else None, tuple(only))
            ended = run(inputs, opened, options, stop, terminal.watching(opened.clock.now))
        finally:
            opened.close()
    raise typer.Exit(_finish(ended, terminal))


def folder_of(text: str | None) -> Path | None:
    """The folder that --out names. Raises BadInput for an empty text, which would mean the folder one stands in."""
    if text is not None and not text.strip():
        raise BadInput([Fault(Place("--out"), "a folder was expected, and nothing stands there")])
    return None if text is None else Path(text)


def _check_only(only: list[str]) -> None:
    """Raise BadInput for a kind of step that there is not."""
    faults = Faults()
    for kind in only:
        if kind not in KINDS:
            faults.add(Place("--only"), unknown(kind, KINDS, "kind of step"))
    faults.raise_if_any()


def _finish(ended: Ended, terminal: Terminal) -> int:
    terminal.ended(ended)
    if not ended.sealed:
        terminal.say(
            "the record could not be sealed (disk full?); `packmime judge` seals and judges it once there is room"
        )
        return OUR_FAULT if ended.fault is not None else BENCH_FAULT
    try:
        judged = judge_and_report(ended.record, terminal)
    except KeyboardInterrupt:
        terminal.say(f"stopped while judging; the record is sealed: `packmime judge {ended.record}` judges it")
        return BENCH_FAULT
    terminal.verdicts(judged)
    terminal.figures(ended.performance, judged)
    if ended.fault is not None:
        terminal.say(f"a fault of packmime itself: {ended.why}; its traceback is in the record")
        return OUR_FAULT
    blamed_on_bench = ended.ended in ("bench fault", "stopped") or judged.bench_trip
    if blamed_on_bench or not ended.safe.verified:
        return BENCH_FAULT
    return judged.exit_status
