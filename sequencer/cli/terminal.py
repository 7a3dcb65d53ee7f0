"""What a person sees while a run goes on, and at its end."""

from __future__ import annotations

import sys
from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Self

from rich.console import Console, RenderableType
from rich.live import Live
from rich.table import Table
from rich.text import Text

from drivers.clock import wall_seconds
from drivers.open_bench import Access
from drivers.text.si import clock_time
from sequencer.engine.inputs import Inputs
from sequencer.engine.run import Ended, Watching
from sequencer.engine.scan import Scan

if TYPE_CHECKING:
    from sequencer.cli.judging import Judged

REDRAW_s = 0.1
PIPED_WIDTH = 120  # of tables where the output is no terminal
STYLES = {
    "pass": "green",
    "conditional pass": "yellow",
    "conditional fail": "red",
    "fail": "bold red",
    "inconclusive": "magenta",
    "not run": "bright_black",
    "not applicable": "bright_black",
}
CAUTION = "Safe means de-energised, not isolated: unplug the charger before touching it."


class _Console(Console):
    """rich ends the program when nobody reads its output any more; a run must go on to its safe state."""

    def on_broken_pipe(self) -> None:
        raise BrokenPipeError


def console_of_ours() -> Console:
    console = _Console(highlight=False)
    return console if console.is_terminal else _Console(highlight=False, width=PIPED_WIDTH)


class Terminal:
    """One line that says what is being done and seen; sentences above it; a summary at the end."""

    def __init__(self, planned_s: float, console: Console | None = None) -> None:
        self._console = console or console_of_ours()
        self._planned_s = planned_s
        self._words = "starting"
        self._drawn_s = 0.0
        self._live = Live(console=self._console, auto_refresh=False, transient=True)
        self._now: Callable[[], float] = lambda: 0.0

    def __enter__(self) -> Self:
        if self._console.is_terminal:
            self._live.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, reason: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._console.is_terminal:
            self._live.stop()

    def say(self, words: str) -> None:
        # A terminal would cut a word at its edge; what is piped stays one line a sentence.
        self._print(Text(words), soft_wrap=not self._console.is_terminal)

    def _print(self, what: RenderableType, *, soft_wrap: bool = False) -> None:
        """A run must not end because nobody reads what it says any more."""
        with suppress(OSError):
            self._console.print(what, soft_wrap=soft_wrap)

    def opening(self, inputs: Inputs, access: Access, folder: Path) -> None:
        model, procedure = inputs.specification.model.model, inputs.procedure.model
        if inputs.bench.bench.virtual is not None:
            self._print(Text(f"REHEARSAL on a virtual bench: {access.charger}, seed {access.seed}", style="bold"))
        else:
            self.say("Real instruments. Stay within reach of the emergency stop; a software stop is none.")
        self.say(f"{procedure.name}: {procedure.purpose}")
        self.say(f"{model}; about {clock_time(self._planned_s)} of bench time; the record goes to {folder}")

    def watching(self, now: Callable[[], float]) -> Watching:
        self._now = now
        return Watching(self._says, self._scan, self._alarm, self._confirm)

    def _says(self, words: str) -> None:
        self._words = words
        self.say(f"{self._now():8.1f} s  {words}")

    def _alarm(self, words: str) -> None:
        with suppress(OSError):
            self._console.bell()
        self._print(Text(f"ALARM: {words}", style="bold white on red"))

    def _confirm(self) -> bool:
        """Stay until a person has acted: load and supply are left as they are meanwhile. False where nobody sits."""
        if not (self._console.is_terminal and sys.stdin.isatty()):
            return False
        self._live.stop()
        try:
            self._console.input("Press Enter once the charger's mains are unplugged: ")
        except EOFError:
            return False
        return True

    def _scan(self, scan: Scan) -> None:
        if not self._console.is_terminal or wall_seconds() - self._drawn_s < REDRAW_s:
            return
        self._drawn_s = wall_seconds()
        rest_s = max(self._planned_s - scan.time_s, 0.0)
        seen = f"{scan.charger_V.value:7.3f} V  {round(scan.current_A.value, 3) + 0.0:7.3f} A at the charger"
        line = f"{scan.time_s:8.1f} s  {self._words}  |  {seen}  |  about {clock_time(rest_s)} to go"
        self._live.update(Text(line, no_wrap=True, overflow="ellipsis"), refresh=True)

    def ended(self, ended: Ended) -> None:
        self.say(ended.why if ended.why.startswith(ended.ended) else f"{ended.ended}: {ended.why}")
        for words in (*ended.safe.words[-1:], *ended.safe.troubles):
            self.say(words)

    def verdicts(self, judged: Judged) -> None:
        table = Table(box=None, pad_edge=False, header_style="bold", show_edge=False)
        for heading in ("limit", "verdict", "why"):
            table.add_column(heading, overflow="fold")
        for verdict in judged.document["verdicts"]:
            word = verdict["verdict"]
            table.add_row(Text(verdict["limit"]), Text(word, style=STYLES[word]), Text(verdict["why"]))
        self._print(table)
        overall = judged.document["overall"]
        self._print(Text.assemble("Overall: ", (overall, STYLES[overall])))
        for deviation in judged.deviations:
            self.say(f"Deviation: {deviation}")
        if judged.changed is not None:
            self._changes(judged.changed)
        if judged.document["rehearsal"]:
            self.say("This was a rehearsal: it says something about the procedure, nothing about a charger.")
        else:
            self.say(CAUTION)
        self.say(f"Report: {judged.folder.parent.parent / 'report.html'}")

    def _changes(self, changed: tuple[str, ...]) -> None:
        """Against the judgement before: changed verdicts by name, the rest as a number."""
        verdicts = [one for one in changed if one.startswith("overall: ") or ": verdict " in one]
        for one in verdicts:
            self.say(f"Changed: {one}")
        rest = len(changed) - len(verdicts)
        if not verdicts:
            self.say("No verdict differs from the judgement before.")
        if rest:
            self.say(f"{rest} more differences, in values and words: see judgement.json.")

    def figures(self, performance: dict[str, float], judged: Judged) -> None:
        """What the run cost."""
        shares = {name.removeprefix("share_"): part for name, part in performance.items() if name.startswith("share_")}
        total_s = performance["wall_s"] + judged.report_s
        parts = [f"{name} {part * performance['wall_s'] / total_s:.0%}" for name, part in shares.items()]
        parts.append(f"report {judged.report_s / total_s:.0%}")
        self.say(
            f"{performance['run_s']:.0f} s of bench time in {total_s:.1f} s "
            f"({performance['run_s_per_wall_s']:.0f} virtual seconds per wall second in the run), "
            f"{performance['exchanges_per_scan']:.1f} exchanges per scan; {', '.join(parts)}"
        )
