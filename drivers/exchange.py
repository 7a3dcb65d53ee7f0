"""The one seam through which all input and output passes: jobs in, replies out, plain data both ways.

Inline, in turn, in virtual time; one worker thread an instrument in wall time, so that a scan costs the slowest.
"""

from __future__ import annotations

import queue
import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

from drivers.clock import Clock
from drivers.session import Session
from drivers.trouble import BenchFault, LinkFault, ReplyFault


@dataclass(frozen=True, slots=True)
class Job:
    """Messages for one instrument, sent in order; `fields` is how many values all answers together hold."""

    instrument: str
    messages: tuple[str, ...]
    fields: int


@dataclass(frozen=True, slots=True)
class Reply:
    """What one job brought: its values as text, the run time at its completion, or what went wrong."""

    instrument: str
    fields: tuple[str, ...]
    time_s: float
    fault: BenchFault | None = None


class Exchange(Protocol):
    """Carries jobs to the instruments. Never raises for an instrument: a fault stands in the reply."""

    count: int

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]: ...

    def close(self) -> None: ...


def split_fields(text: str) -> tuple[str, ...]:
    """The values of an answer to a compound message; a semicolon inside quotes does not part them."""
    if '"' not in text:
        return tuple(text.split(";"))
    parts, quoted = [""], False
    for letter in text:
        quoted ^= letter == '"'
        if letter == ";" and not quoted:
            parts.append("")
        else:
            parts[-1] += letter
    return tuple(parts)


def perform(session: Session, job: Job, clock: Clock) -> Reply:
    """Do one job now."""
    try:
        fields: tuple[str, ...] = ()
        for message in job.messages:
            if "?" in message:
                fields += split_fields(session.ask(message))
            else:
                session.tell(message)
        if len(fields) != job.fields:
            told = f"{job.fields} values were expected to '{'; '.join(job.messages)}', {len(fields)} came: {fields}"
            raise ReplyFault(job.instrument, told)
    except BenchFault as fault:
        return Reply(job.instrument, (), clock.now(), fault)
    return Reply(job.instrument, fields, clock.now())


class Inline:
    """Jobs one after the other in the caller's thread: for virtual time, in which order costs nothing."""

    def __init__(self, sessions: Mapping[str, Session], clock: Clock) -> None:
        self._sessions = sessions
        self._clock = clock
        self.count = 0

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]:
        self.count += len(jobs)
        return [perform(self._sessions[job.instrument], job, self._clock) for job in jobs]

    def close(self) -> None:
        for session in self._sessions.values():
            session.close()


@dataclass
class _Round:
    """The jobs of one exchange for one instrument, and what has come back so far."""

    jobs: list[Job]
    replies: list[Reply]
    done: threading.Event


class _Worker:
    """One thread that serves one instrument; abandoned with its socket when it hangs."""

    def __init__(self, session: Session, clock: Clock) -> None:
        self.session = session
        self.latest: _Round | None = None
        self._rounds: queue.SimpleQueue[_Round | None] = queue.SimpleQueue()
        self._clock = clock
        threading.Thread(target=self._serve, name=f"link-{session.name}", daemon=True).start()

    @property
    def owes(self) -> bool:
        """Whether an earlier round is still unanswered."""
        return self.latest is not None and not self.latest.done.is_set()

    def _serve(self) -> None:
        while (round_ := self._rounds.get()) is not None:
            for job in round_.jobs:
                round_.replies.append(perform(self.session, job, self._clock))
            round_.done.set()

    def give(self, jobs: list[Job]) -> _Round:
        self.latest = _Round(jobs, [], threading.Event())
        self._rounds.put(self.latest)
        return self.latest

    def stop(self) -> None:
        self._rounds.put(None)
        if not self.owes:
            self.session.close()


class Workers:
    """Jobs side by side, one thread an instrument: for wall time."""

    def __init__(self, sessions: Mapping[str, Session], clock: Clock) -> None:
        self._workers = {name: _Worker(session, clock) for name, session in sessions.items()}
        self._clock = clock
        self.count = 0

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]:
        self.count += len(jobs)
        deadline = self._clock.now() + wait_s
        by_instrument: dict[str, list[Job]] = {}
        for job in jobs:
            by_instrument.setdefault(job.instrument, []).append(job)
        rounds = {name: self._begin(name, mine) for name, mine in by_instrument.items()}
        replies = {
            name: iter(self._end(name, round_, by_instrument[name], deadline)) for name, round_ in rounds.items()
        }
        return [next(replies[job.instrument]) for job in jobs]

    def _begin(self, name: str, jobs: list[Job]) -> _Round | None:
        worker = self._workers[name]
        # A second question to an instrument that still owes an answer would mix the two up.
        return None if worker.owes else worker.give(jobs)

    def _end(self, name: str, round_: _Round | None, jobs: list[Job], deadline: float) -> list[Reply]:
        if round_ is None:
            return [self._late(name, "still owes an answer")] * len(jobs)
        if not round_.done.wait(max(0.0, deadline - self._clock.now())):
            return [self._late(name, "no answer in time")] * len(jobs)
        return round_.replies

    def _late(self, name: str, what: str) -> Reply:
        return Reply(name, (), self._clock.now(), LinkFault(name, what))

    def close(self) -> None:
        for worker in self._workers.values():
            worker.stop()
