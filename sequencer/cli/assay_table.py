"""What a person sees of an assay: a sentence for each run, tables, what it comes to."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from contextlib import suppress

from rich.table import Table
from rich.text import Text

from drivers.text.si import clock_time
from sequencer.cli.assay_outcome import MET, UNCLEAR, Outcome, exit_status
from sequencer.cli.terminal import console_of_ours

MANY = 3  # limits named in a sentence


def sentence(one: Outcome) -> str:
    """What one run showed."""
    if one.fault is not None:
        return f"{one.trial.words}: a fault of packmime itself"
    if one.trial.defect is None:
        return f"{one.trial.words}: {_alarms(one)}"
    return f"{one.trial.words}: {_answer(one)}{f' by {_few(one.by)}' if one.by else ''}"


def _alarms(one: Outcome) -> str:
    if one.failing:
        return f"FALSE ALARM by {_few(one.failing)}"
    return f"inconclusive: {_few(one.inconclusive)}" if one.inconclusive else "no false alarm"


def _answer(one: Outcome) -> str:
    return "found" if one.found else "inconclusive" if one.unclear else "NOT FOUND"


def _few(limits: Sequence[str]) -> str:
    rest = len(limits) - MANY
    return ", ".join(limits[:MANY]) + (f" and {rest} more" if rest > 0 else "")


def show(outcomes: Sequence[Outcome]) -> None:
    """Both tables: sound chargers, then defects."""
    console = console_of_ours()
    with suppress(OSError):
        console.print(_sound([one for one in outcomes if one.trial.defect is None]))
        console.print()
        console.print(_defects([one for one in outcomes if one.trial.defect is not None]))
        console.print()


def _table(*headings: str) -> Table:
    table = Table(box=None, pad_edge=False, header_style="bold", show_edge=False)
    for heading in headings:
        table.add_column(heading, overflow="fold")
    return table


def _sound(outcomes: Sequence[Outcome]) -> Table:
    table = _table("sound charger", "seed", "false alarms", "inconclusive")
    for one in outcomes:
        alarms = Text(", ".join(one.failing), style="bold red") if one.failing else Text("none", style="green")
        open_ = Text(", ".join(one.inconclusive), style="magenta") if one.inconclusive else Text("none", style="green")
        table.add_row(Text(one.trial.product), str(one.trial.seed), alarms, open_)
    return table


def _defects(outcomes: Sequence[Outcome]) -> Table:
    table = _table("defect", "size", "charger", "seed", "claimed", "found", "by")
    for one in outcomes:
        trial = one.trial
        assert trial.defect is not None
        table.add_row(
            Text(trial.defect.name),
            str(trial.size or ""),
            Text(trial.product),
            str(trial.seed),
            "yes" if trial.claimed else "",
            _found(one),
            Text(_by(one)),
        )
    return table


def _found(one: Outcome) -> Text:
    if one.found:
        return Text("yes", style="green")
    style = "magenta" if one.unclear else "bold red" if one.trial.claimed else "yellow"
    return Text("inconclusive" if one.unclear else "no", style=style)


def _by(one: Outcome) -> str:
    """The right limits that failed; where it was not found, what else did, and how the run ended."""
    if one.found:
        return _few(one.by)
    told = f"must be found by {', '.join(one.trial.defect.limits)}" if one.trial.defect else ""
    if one.failing:
        told += f"; failed: {_few(one.failing)}"
    if one.inconclusive:
        told += f"; inconclusive: {_few(one.inconclusive)}"
    return told if one.ended == "complete" else f"{told}; the run ended: {one.why}"


def summary(outcomes: Sequence[Outcome], untried: Sequence[str], spent_s: float, says: Callable[[str], None]) -> None:
    """What the assay comes to, and what it took."""
    sound = [one for one in outcomes if one.trial.defect is None]
    spoiled = [one for one in outcomes if one.trial.defect is not None]
    claimed = [one for one in spoiled if one.trial.claimed]
    says(
        f"{sum(bool(one.failing) for one in sound)} of {len(sound)} runs on sound chargers gave a false alarm; "
        f"{sum(one.found for one in claimed)} of {len(claimed)} claimed defects were found, "
        f"{sum(one.found for one in spoiled)} of {len(spoiled)} in all"
    )
    for kind in untried:
        says(f"{kind} is claimed, and no defect of that kind and size was tried")
    status = exit_status(outcomes, untried)
    met = "met" if status == MET else "not decided" if status == UNCLEAR else "NOT met"
    claims = f"The claims of the procedure are {met}." if claimed or untried else "None of these defects is claimed."
    says(f"{claims} {len(outcomes)} runs in {clock_time(spent_s)}.")
