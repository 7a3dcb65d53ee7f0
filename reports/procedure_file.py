"""A procedure as a pytest file: its limits are the items; the bench is run in its setup, never on collecting."""

from __future__ import annotations

import argparse
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

from reports.items import Json, VerdictFile
from reports.source import read_json

OPTION = "--packmime"
HEAD = "packmime: procedure"
NOTHING_TO_READ = (2, 70)  # exit statuses after which no verdicts may stand: bad input, a fault of ours


RECORDS = pytest.StashKey[list[Path]]()


class RunFault(Exception):
    """The run did not get as far as verdicts; the message is what it said last."""


def is_procedure(path: Path) -> bool:
    """Whether a file opens as a procedure does, comments aside."""
    if path.suffix not in (".yaml", ".yml") or not path.is_file():
        return False
    try:
        lines = path.read_text("utf-8").splitlines()
    except (OSError, UnicodeDecodeError):
        return False
    first = next((line for line in lines if line.strip() and not line.lstrip().startswith("#")), "")
    return first.startswith(HEAD)


def asked_of(words: list[str]) -> argparse.Namespace:
    """What decides which limits there are, out of the words for `packmime run`; the rest is passed on unread."""
    parser = argparse.ArgumentParser(add_help=False, exit_on_error=False)
    parser.add_argument("--spec", default="sprayer")
    parser.add_argument("--pack")
    parser.add_argument("--bench", default="virtual")
    parser.add_argument("--set", action="append", default=[])
    parser.add_argument("--out")
    return parser.parse_known_args(words)[0]


class ProcedureFile(VerdictFile):
    """A procedure named on the command line; `--packmime "--spec lantern --seed 3"` goes on to `packmime run`."""

    _verdicts: list[Json]

    def _words(self) -> list[str]:
        return shlex.split(self.config.getoption(OPTION) or "")

    def limits(self) -> list[str]:
        """Reads and checks every file; touches nothing."""
        from drivers.text.faults import BadInput
        from sequencer.engine.inputs import Asked, changes_of, gather
        from sequencer.model.limits import Declared

        asked = asked_of(self._words())
        try:
            inputs = gather(Asked(str(self.path), asked.spec, asked.pack, asked.bench, changes_of(asked.set)))
        except BadInput as bad:
            raise self.CollectError(str(bad)) from bad
        curve = None if inputs.curve is None else inputs.curve.model
        declared = Declared(inputs.specification.model, inputs.pack.model.cells, curve)
        return [row.name for row in declared.rows(inputs.procedure.model.judge)]

    def setup(self) -> None:
        """Run the bench, in a process of its own."""
        out = self._out()
        words = [*self._words(), *([] if asked_of(self._words()).out else ["--out", str(out)])]
        call = [sys.executable, "-P", "-c", "from sequencer.cli import main; main()", "run", str(self.path), *words]
        done = subprocess.run(call, capture_output=True, text=True, encoding="utf-8", errors="replace", check=False)
        verdicts = out / "verdicts.json"
        if done.returncode in NOTHING_TO_READ or not verdicts.is_file():
            last = (done.stderr or done.stdout).strip().splitlines()[-8:]
            raise RunFault(f"packmime run ended with {done.returncode}: " + "\n".join(last))
        self._verdicts = list(read_json(verdicts)["verdicts"])
        self.written(self.config).append(out)

    @staticmethod
    def written(config: pytest.Config) -> list[Path]:
        """The records written in this session, for the summary."""
        return config.stash.setdefault(RECORDS, [])

    def _out(self) -> Path:
        from drivers.clock import utc_now

        folder = Path(self.config.invocation_params.dir)
        asked = asked_of(self._words()).out
        return folder / asked if asked else folder / "runs" / f"{utc_now():%Y%m%dT%H%M%S%f}-{self.path.stem}"

    def verdict(self, number: int) -> Json:
        return self._verdicts[number - 1]
