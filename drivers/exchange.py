"""The one seam through which all input and output passes: jobs in, replies out, plain data both ways.

Inline, in turn, in virtual time; one worker thread an instrument in wall time, so that a scan costs the slowest.
"""

from __future__ import annotations

import queue
import threading
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Protocol

from drivers.clock import Clock, wall_seconds
from drivers.session import Session
from drivers.trouble import BenchFault, LinkFault, ReplyFault

CLOSE_PATIENCE_s = 1.0


@dataclass(frozen=True, slots=True)
class Job:
    """Messages for one instrument, sent in order; `fields` is how many values all answers together hold.

    `reopen`: a link that is closed is opened anew first, and who answers is proven (one try); without it the job
    of a closed link only says why it is closed. A job without messages just does that.
    """

    instrument: str
    messages: tuple[str, ...]
    fields: int
    reopen: bool = False


@dataclass(frozen=True, slots=True)
class Reply:
    """What one job brought: its values as text, the run time at its completion, or what went wrong."""

    instrument: str
    fields: tuple[str, ...]
    time_s: float
    fault: BenchFault | None = None


class Pending(Protocol):
    """Jobs that are under way."""

    @property
    def ready(self) -> bool:
        """Whether every instrument has answered or failed."""

    def replies(self) -> list[Reply]:
        """What has come by now, one reply a job; whoever has not answered is given up."""


class Exchange(Protocol):
    """Carries jobs to the instruments. Never raises for an instrument: a fault stands in the reply."""

    count: int

    def begin(self, jobs: Sequence[Job]) -> Pending:
        """Send jobs off without waiting for anybody."""

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
        if job.reopen and not session.is_open:
            session.reopen()
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
        if isinstance(fault, ReplyFault):
            session.distrust(fault)
        return Reply(job.instrument, (), clock.now(), fault)
    return Reply(job.instrument, fields, clock.now())


@dataclass(frozen=True)
class _Here:
    """Replies that are there already."""

    came: list[Reply]
    ready: bool = True

    def replies(self) -> list[Reply]:
        return self.came


class Inline:
    """Jobs one after the other in the caller's thread: for virtual time, in which order costs nothing."""

    def __init__(self, sessions: Mapping[str, Session], clock: Clock) -> None:
        self._sessions = sessions
        self._clock = clock
        self.count = 0

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]:
        self.count += len(jobs)
        replies = [perform(self._sessions[job.instrument], job, self._clock) for job in jobs]
        if any(reply.fault is not None for reply in replies):
            self._clock.catch_up()
        return replies

    def begin(self, jobs: Sequence[Job]) -> Pending:
        return _Here(self(jobs, 0.0))

    def close(self) -> None:
        for session in self._sessions.values():
            session.close()


@dataclass
class _Round:
    """The jobs of one exchange for one instrument, and what has come back so far."""

    jobs: list[Job]
    replies: list[Reply] = field(default_factory=list)
    begun: bool = False
    abandoned: bool = False  # nobody waits any more: what has not begun must not be done late
    done: threading.Event = field(default_factory=threading.Event)
    bug: Exception | None = None


class _Worker:
    """One thread that serves one instrument, round after round; abandoned with its socket when it hangs.

    Rounds stand in line: a second question never goes out before the first is answered or has failed.
    """

    def __init__(self, session: Session, clock: Clock) -> None:
        self._session = session
        self._latest: _Round | None = None
        self._rounds: queue.SimpleQueue[_Round | None] = queue.SimpleQueue()
        self._clock = clock
        self.thread = threading.Thread(target=self._serve, name=f"link-{session.name}", daemon=True)
        self.thread.start()

    def _serve(self) -> None:
        while (round_ := self._rounds.get()) is not None:
            try:
                self._do(round_)
            except Exception as bug:  # ours; the thread lives on, for the safe state needs it
                round_.bug = bug
            round_.done.set()
        self._session.close()

    def _do(self, round_: _Round) -> None:
        for job in round_.jobs:
            if round_.abandoned:
                return
            round_.begun = True
            round_.replies.append(perform(self._session, job, self._clock))

    def give(self, jobs: list[Job]) -> _Round:
        self._latest = _Round(jobs)
        self._rounds.put(self._latest)
        return self._latest

    def stop(self) -> None:
        """Let the thread end once it has finished what it is at; it closes its link itself."""
        if self._latest is not None:
            self._latest.abandoned = True
        self._rounds.put(None)


@dataclass(frozen=True)
class _Underway:
    """Rounds that workers are at, by instrument; `instruments`: of each job, in their order."""

    instruments: list[str]
    rounds: dict[str, _Round]
    end: Callable[[str, _Round, float], list[Reply]]

    @property
    def ready(self) -> bool:
        return all(round_.done.is_set() for round_ in self.rounds.values())

    def replies(self, deadline_s: float = 0.0) -> list[Reply]:
        replies = {name: iter(self.end(name, round_, deadline_s)) for name, round_ in self.rounds.items()}
        return [next(replies[name]) for name in self.instruments]


class Workers:
    """Jobs side by side, one thread an instrument: for wall time. A call lasts `wait_s` at most.

    An instrument that is still at an earlier round when `wait_s` is over "still owes an answer": its new jobs are
    dropped, never done late. A late answer is dropped too; it cannot pass as the answer to a later question.
    """

    def __init__(self, sessions: Mapping[str, Session], clock: Clock) -> None:
        self._workers = {name: _Worker(session, clock) for name, session in sessions.items()}
        self._clock = clock
        self._closed = False
        self.count = 0

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]:
        deadline_s = self._clock.now() + wait_s
        pending = self.begin(jobs)
        return pending.replies(deadline_s) if isinstance(pending, _Underway) else pending.replies()

    def begin(self, jobs: Sequence[Job]) -> Pending:
        self.count += len(jobs)
        if self._closed:
            return _Here([self._late(job.instrument, "the link is closed (the bench was closed)") for job in jobs])
        by_instrument: dict[str, list[Job]] = {}
        for job in jobs:
            by_instrument.setdefault(job.instrument, []).append(job)
        rounds = {name: self._workers[name].give(mine) for name, mine in by_instrument.items()}
        return _Underway([job.instrument for job in jobs], rounds, self._end)

    def _end(self, name: str, round_: _Round, deadline_s: float) -> list[Reply]:
        """What came back of a round by the deadline, one reply a job. Raises a bug of ours that a worker met."""
        in_time = round_.done.wait(max(0.0, deadline_s - self._clock.now()))
        if round_.bug is not None:
            raise round_.bug
        if in_time:
            return round_.replies
        round_.abandoned = True
        came = list(round_.replies)
        what = "no answer in time" if round_.begun else "still owes an answer"
        return came + [self._late(name, what)] * (len(round_.jobs) - len(came))

    def _late(self, name: str, what: str) -> Reply:
        return Reply(name, (), self._clock.now(), LinkFault(name, what))

    def close(self) -> None:
        """End all threads and close their links; one that hangs is left behind after CLOSE_PATIENCE_s."""
        self._closed = True
        for worker in self._workers.values():
            worker.stop()
        until_s = wall_seconds() + CLOSE_PATIENCE_s
        for worker in self._workers.values():
            worker.thread.join(max(0.0, until_s - wall_seconds()))
