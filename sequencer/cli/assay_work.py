"""The runs of an assay, in processes side by side; each judged without a report, its record removed."""

from __future__ import annotations

import multiprocessing
import os
import shutil
import signal
import tempfile
import threading
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from contextlib import contextmanager
from multiprocessing.synchronize import Event
from pathlib import Path
from typing import Any

from drivers.open_bench import open_bench
from sequencer.cli.access import access_to
from sequencer.cli.answers import BENCH_FAULT
from sequencer.cli.assay_outcome import Outcome
from sequencer.cli.assay_plan import Trial
from sequencer.engine.judging import Rejudging, judge
from sequencer.engine.loop import StopFlag
from sequencer.engine.run import Ended, Options, Watching, run

LOOK_s = 0.2  # how often it is looked whether a person wants to stop
MEMORY = Path("/dev/shm")  # where Linux keeps files in memory
LEAST_FREE = 256 * 1024**2  # bytes; a record takes a few megabytes
LAST_WAIT_s = 5.0  # for a run to end when nobody waits for it any more
JUDGED_UTC = "2000-01-01T00:00:00.000Z"  # of records that nobody sees; a kept one gives its own times in its manifest


def cores() -> int:
    """How many runs go on side by side."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def side_by_side(
    trials: Sequence[Trial], keep: Path | None, stop: StopFlag, says: Callable[[Outcome], None]
) -> list[Outcome]:
    """Carry out all trials; the outcomes in their order. `says` is called as each is done; fewer where `stop` is set.

    Raises what a run may raise before anything is touched (RecordError), and faults of our own.
    """
    context = multiprocessing.get_context("spawn")
    stopping = context.Event()
    workers = max(min(cores(), len(trials)), 1)
    with ProcessPoolExecutor(workers, mp_context=context, initializer=_begin, initargs=(stopping,)) as pool:
        futures = [pool.submit(carry_out, trial, keep) for trial in trials]
        try:
            _await(futures, stop, says)
        finally:
            stopping.set()  # what still runs goes to its safe state within a scan
            pool.shutdown(wait=True, cancel_futures=True)
    return [] if stop.why else [future.result() for future in futures]


def _await(futures: Sequence[Future[Outcome]], stop: StopFlag, says: Callable[[Outcome], None]) -> None:
    pending = set(futures)
    while pending and stop.why is None:
        done, pending = wait(pending, LOOK_s, FIRST_COMPLETED)
        for future in sorted(done, key=futures.index):
            says(future.result())


class _Stopping(StopFlag):
    """A flag that the loop of a run reads, set by the process that began it."""

    def __init__(self, event: Event) -> None:
        self._event = event

    @property
    def why(self) -> str | None:  # type: ignore[override]
        return "stopped with the assay" if self._event.is_set() else None


_stop: StopFlag = StopFlag()
_busy = threading.Lock()  # while a run goes on


def _begin(event: Event) -> None:
    """Set a worker up: Ctrl-C is the first process's to hear, and no worker outlives it."""
    global _stop
    _stop = _Stopping(event)
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with_the_first, args=(event,), daemon=True).start()


def _end_with_the_first(event: Event) -> None:
    """Once the first process is gone, whatever ended it: the run that goes on ends and takes its record away."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        parent.join()
        event.set()
        _busy.acquire(timeout=LAST_WAIT_s)
        os._exit(BENCH_FAULT)


def carry_out(trial: Trial, keep: Path | None) -> Outcome:
    """One run from its files to its verdicts; the record stays only where it is to be kept."""
    if _stop.why is not None:  # one that was handed out before the others were called off
        return Outcome(trial, {}, "stopped", _stop.why, False)
    with _busy, _folder(trial, keep) as folder:
        ended = _run(trial, folder)
        if ended.ended == "stopped":
            return Outcome(trial, {}, ended.ended, ended.why, False)
        if ended.fault is not None or not ended.sealed:
            trouble = ended.why if ended.sealed else f"{ended.why}; the record could not be sealed"
            return Outcome(trial, {}, ended.ended, ended.why, False, trouble)
        judgement = judge(folder, Rejudging(), JUDGED_UTC)
        words = {verdict["limit"]: verdict["verdict"] for verdict in judgement.document["verdicts"]}
        return Outcome(trial, words, ended.ended, ended.why, judgement.exit_status in (0, 5))


@contextmanager
def _folder(trial: Trial, keep: Path | None) -> Iterator[Path]:
    if keep is not None:
        yield keep / trial.folder
        return
    with tempfile.TemporaryDirectory(prefix="packmime-assay-", dir=in_memory()) as made:
        yield Path(made) / "record"


def in_memory(place: Path = MEMORY, least: int = LEAST_FREE) -> Path | None:
    """Where a record that nobody keeps need not wait for a disk: a record is synced at every event.

    None: where temporary files go anyhow, as for one who has named a place for them.
    """
    if "TMPDIR" in os.environ:
        return None
    try:
        roomy = place.is_dir() and shutil.disk_usage(place).free >= least
    except OSError:
        return None
    return place if roomy and os.access(place, os.W_OK | os.X_OK) else None


def _run(trial: Trial, folder: Path) -> Ended:
    with access_to(trial.inputs.bench, trial.charger, trial.seed) as access:
        opened: Any = open_bench(trial.inputs.bench, access)
        try:
            return run(trial.inputs, opened, Options(folder, trial.seed), _stop, Watching())
        finally:
            opened.close()
