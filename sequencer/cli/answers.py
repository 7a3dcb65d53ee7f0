"""Exit statuses: what went wrong, in one sentence, and the number that says whose fault it was."""

from __future__ import annotations

import errno
import os
import sys
import traceback
from collections.abc import Callable
from functools import wraps
from typing import ParamSpec

import typer

BAD_INPUT = 2
BENCH_FAULT = 3
OUR_FAULT = 70
NOBODY_LISTENS = 141  # 128 + SIGPIPE, as a shell shows it
DISK_FULL = (errno.ENOSPC, errno.EDQUOT) if hasattr(errno, "EDQUOT") else (errno.ENOSPC,)
TRACE = "PACKMIME_TRACE"  # set in the environment: a fault of ours shows where it happened
P = ParamSpec("P")


def answers(command: Callable[P, None]) -> Callable[P, None]:
    """Turn what a command raises into a sentence on standard error and an exit status; never a bare traceback."""

    @wraps(command)
    def answering(*args: P.args, **kwargs: P.kwargs) -> None:
        try:
            command(*args, **kwargs)
            sys.stdout.flush()
        except (typer.Exit, typer.Abort):
            _last_words()
            raise
        except BrokenPipeError:
            # Whoever read our output has gone, as `| head` does; nothing is left to be said to anybody.
            _to_nowhere()
            raise typer.Exit(NOBODY_LISTENS) from None
        except KeyboardInterrupt:
            _say("stopped by Ctrl-C; nothing was switched on")
            raise typer.Exit(BENCH_FAULT) from None
        except Exception as reason:
            status = _answer(reason)
            _last_words()
            raise typer.Exit(status) from None

    return answering


def _last_words() -> None:
    """Empty the output here: where it cannot be written, the interpreter's own end would give a status of its own."""
    try:
        sys.stdout.flush()
    except OSError as reason:
        _say(f"what stood on standard output is lost: {reason.strerror or reason}")
        _to_nowhere()


def _to_nowhere() -> None:
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _answer(reason: Exception) -> int:
    from drivers.text.faults import BadInput
    from drivers.trouble import BenchFault
    from sequencer.engine.durable import RecordError

    if isinstance(reason, BadInput):
        count = len(reason.faults)
        _say(f"{count} fault{'s' if count > 1 else ''} in what was given; nothing was touched:")
        for fault in reason.faults:
            _say(f"  {fault}")
        return BAD_INPUT
    if isinstance(reason, RecordError):
        _say(str(reason))
        return BAD_INPUT
    if isinstance(reason, BenchFault):
        _say(f"bench fault: {reason}")
        return BENCH_FAULT
    if isinstance(reason, OSError) and reason.errno in DISK_FULL:
        _say(f"nothing more can be written: {reason.strerror}; make room and say the command again")
        return BENCH_FAULT  # interrupted, and nobody's wrong input
    first, *more = str(reason).splitlines() or [""]
    hint = f" ({TRACE}=1 in the environment shows more)" if more else ""
    _say(f"a fault of packmime itself: {type(reason).__name__}: {first}{hint}")
    if os.environ.get(TRACE):
        traceback.print_exception(reason)
    return OUR_FAULT


def _say(words: str) -> None:
    print(words, file=sys.stderr)  # noqa: T201 - the terminal is what this module is for
