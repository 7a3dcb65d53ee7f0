"""The seam: jobs in, replies out; in turn or side by side, and nobody held up by one that hangs."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.clock import WallClock, wall_seconds
from drivers.exchange import CLOSE_PATIENCE_s, Exchange, Inline, Job, Workers, perform, split_fields
from drivers.session import Session
from drivers.trouble import InstrumentFault, LinkFault, ReplyFault

QUOTED = st.text(st.characters(codec="ascii", exclude_characters='"\n'), max_size=8).map(lambda text: f'"{text}"')
PLAIN = st.text(st.characters(codec="ascii", exclude_characters='";\n'), max_size=8)


class Fake(Session):
    """A link without a wire. `answers`: what is said to a message, or a callable that may wait or raise."""

    def __init__(self, name: str, delay_s: float = 0.0) -> None:
        self.name = name
        self.heard: list[str] = []
        self.delay_s = delay_s
        self.answer: Callable[[str], str] = lambda message: "1"
        self.opened = True
        self.reopened = 0
        self.never = threading.Event()

    @property
    def is_open(self) -> bool:
        return self.opened

    def reopen(self) -> None:
        self.reopened += 1
        self.opened = True

    def ask(self, message: str) -> str:
        self.heard.append(message)
        self.never.wait(self.delay_s)
        return self.answer(message)

    def tell(self, message: str) -> None:
        self.heard.append(message)

    def close(self, why: str = "") -> None:
        self.opened = False


@pytest.fixture
def workers() -> Iterator[Callable[..., Workers]]:
    made: list[tuple[Workers, tuple[Fake, ...]]] = []

    def make(*fakes: Fake) -> Workers:
        made.append((Workers({fake.name: fake for fake in fakes}, WallClock()), fakes))
        return made[-1][0]

    yield make
    for exchange, fakes in made:
        for fake in fakes:
            fake.never.set()
        exchange.close()
    assert not [thread for thread in threading.enumerate() if thread.name.startswith("link-")]


MakeWorkers = Callable[..., Workers]


def question(name: str, message: str = "READ?", fields: int = 1, *, reopen: bool = False) -> Job:
    return Job(name, (message,), fields, reopen)


# -- values of an answer ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "fields"),
    [
        ("1", ("1",)),
        ("1;2;3", ("1", "2", "3")),
        ("", ("",)),
        (";", ("", "")),
        ('1;0,"No error"', ("1", '0,"No error"')),
        ('-222,"Data out of range;VOLT 99";7', ('-222,"Data out of range;VOLT 99"', "7")),
        ('"a ""b;c"" d";2', ('"a ""b;c"" d"', "2")),  # IEEE 488.2, 8.7.8: a quote inside a string stands twice
        ('"open;1', ('"open;1',)),
    ],
)
def test_split_fields(text: str, fields: tuple[str, ...]) -> None:
    """IEEE 488.2, 8.4.1: a semicolon parts the answers of a compound query."""
    assert split_fields(text) == fields


@given(st.lists(PLAIN | QUOTED, min_size=1, max_size=6))
def test_split_undoes_join(fields: list[str]) -> None:
    assert split_fields(";".join(fields)) == tuple(fields)


@given(st.text())
def test_split_loses_nothing(text: str) -> None:
    assert ";".join(split_fields(text)) == text


# -- one job ----------------------------------------------------------------------------------------------------


def test_questions_are_asked_and_commands_told_in_order() -> None:
    fake = Fake("supply")
    got = perform(fake, Job("supply", ("VOLT 1", "VOLT?;:OUTP?", "SYST:ERR?"), 3), WallClock())
    assert fake.heard == ["VOLT 1", "VOLT?;:OUTP?", "SYST:ERR?"]
    assert isinstance(got.fault, ReplyFault)  # two values came of three
    assert not fake.opened


def test_a_reply_carries_its_time() -> None:
    clock = WallClock()
    got = perform(Fake("meter"), question("meter"), clock)
    assert got.fault is None
    assert 0 <= got.time_s <= clock.now()


def test_a_closed_link_is_opened_anew_only_for_a_job_that_asks_for_it() -> None:
    fake = Fake("meter")
    fake.opened = False
    perform(fake, question("meter"), WallClock())
    assert fake.reopened == 0
    perform(fake, Job("meter", (), 0, reopen=True), WallClock())
    perform(fake, question("meter", reopen=True), WallClock())
    assert fake.reopened == 1


def test_inline_goes_on_after_a_fault_and_counts() -> None:
    lost, good = Fake("lost"), Fake("good")

    def gone(message: str) -> str:
        raise LinkFault("lost", "gone")

    lost.answer = gone
    exchange: Exchange = Inline({"lost": lost, "good": good}, WallClock())
    first, second = exchange([question("lost"), question("good")], 1.0)
    assert str(first.fault) == "lost: gone"
    assert second.fields == ("1",)
    assert exchange.count == 2
    exchange.close()
    assert not good.opened


# -- side by side -----------------------------------------------------------------------------------------------


def test_a_scan_costs_the_slowest_and_not_the_sum(workers: MakeWorkers) -> None:
    fakes = [Fake(f"meter_{number}", delay_s=0.2) for number in range(8)]
    exchange = workers(*fakes)
    begun_s = wall_seconds()
    replies = exchange([question(fake.name) for fake in fakes], 5.0)
    took_s = wall_seconds() - begun_s
    assert all(reply.fault is None for reply in replies)
    assert took_s < 0.5 * 8 * 0.2


def test_replies_come_in_the_order_of_the_jobs(workers: MakeWorkers) -> None:
    one, two = Fake("one", delay_s=0.02), Fake("two")
    one.answer, two.answer = (lambda message: f"one {message}"), (lambda message: f"two {message}")
    jobs = [question("one", "a?"), question("two", "b?"), question("one", "c?"), question("two", "d?")]
    replies = workers(one, two)(jobs, 5.0)
    assert [reply.fields[0] for reply in replies] == ["one a?", "two b?", "one c?", "two d?"]
    assert [reply.instrument for reply in replies] == ["one", "two", "one", "two"]


def test_one_that_hangs_holds_nobody_up_and_owes_an_answer(workers: MakeWorkers) -> None:
    hung, good = Fake("hung", delay_s=60.0), Fake("good")
    exchange = workers(hung, good)
    for what in ("no answer in time", "still owes an answer", "still owes an answer"):
        begun_s = wall_seconds()
        late, fine = exchange([question("hung"), question("good")], 0.1)
        assert wall_seconds() - begun_s < 1.0
        assert isinstance(late.fault, LinkFault)
        assert str(late.fault) == f"hung: {what}"
        assert fine.fields == ("1",)
    assert hung.heard == ["READ?"], "a second question while the first is open would mix the answers up"


def test_a_late_answer_never_passes_for_a_later_one(workers: MakeWorkers) -> None:
    slow = Fake("slow", delay_s=0.2)
    slow.answer = lambda message: f"to {message}"
    exchange = workers(slow)
    assert exchange([question("slow", "first?")], 0.05)[0].fault is not None
    slow.delay_s = 0.0
    assert exchange([question("slow", "second?")], 5.0)[0].fields == ("to second?",)


def test_what_nobody_waits_for_any_more_is_not_done_late(workers: MakeWorkers) -> None:
    """A setting that was reported as failed must not switch an output on seconds later."""
    slow = Fake("slow", delay_s=0.2)
    exchange = workers(slow)
    exchange([question("slow", "first?"), question("slow", "OUTP ON;:OUTP?")], 0.05)
    exchange([question("slow", "INP ON;:INP?")], 0.05)
    slow.delay_s = 0.0
    exchange([question("slow", "last?")], 5.0)
    assert slow.heard == ["first?", "last?"]


def test_answers_that_came_in_time_are_kept_beside_those_that_did_not(workers: MakeWorkers) -> None:
    slow = Fake("slow")

    def answer(message: str) -> str:
        if message == "second?":
            slow.never.wait(60.0)
        return message

    slow.answer = answer
    first, second, third = workers(slow)([question("slow", f"{word}?") for word in ("first", "second", "third")], 0.2)
    assert first.fields == ("first?",)
    assert second.fault is not None
    assert third.fault is not None
    assert slow.heard == ["first?", "second?"]


@pytest.mark.parametrize("fault", [LinkFault("it", "gone"), InstrumentFault("it", "said -222")])
def test_a_fault_stands_in_the_reply_and_the_worker_lives_on(workers: MakeWorkers, fault: Exception) -> None:
    it = Fake("it")

    def answer(message: str) -> str:
        if message == "bad?":
            raise fault
        return "1"

    it.answer = answer
    exchange = workers(it)
    assert exchange([question("it", "bad?")], 5.0)[0].fault is fault
    assert exchange([question("it")], 5.0)[0].fields == ("1",)


def test_a_bug_of_ours_is_raised_where_it_was_called_and_the_worker_lives_on(workers: MakeWorkers) -> None:
    it = Fake("it")
    exchange = workers(it)
    it.answer = lambda message: str(1 / 0)
    with pytest.raises(ZeroDivisionError):
        exchange([question("it")], 5.0)
    it.answer = lambda message: "1"
    assert exchange([question("it")], 5.0)[0].fields == ("1",)


def test_closing_ends_every_thread_and_closes_every_link(workers: MakeWorkers) -> None:
    fakes = [Fake(f"meter_{number}") for number in range(3)]
    exchange = workers(*fakes)
    exchange([question(fake.name) for fake in fakes], 5.0)
    exchange.close()
    exchange.close()
    assert not any(fake.opened for fake in fakes)
    assert not [thread for thread in threading.enumerate() if thread.name.startswith("link-meter_")]
    assert "the link is closed" in str(exchange([question("meter_0")], 5.0)[0].fault)


def test_closing_leaves_one_that_hangs_behind_and_it_lets_go_of_its_link_by_itself(workers: MakeWorkers) -> None:
    hung = Fake("hung", delay_s=60.0)
    exchange = workers(hung)
    exchange([question("hung")], 0.05)
    begun_s = wall_seconds()
    exchange.close()
    assert wall_seconds() - begun_s < CLOSE_PATIENCE_s + 1.0
    assert hung.opened
    hung.never.set()
    next(thread for thread in threading.enumerate() if thread.name == "link-hung").join(5.0)
    assert not hung.opened


# -- begun and read later ---------------------------------------------------------------------------------------


def test_begin_waits_for_nobody_and_holds_up_no_other_question(workers: MakeWorkers) -> None:
    slow, quick = Fake("scanner", delay_s=0.4), Fake("meter")
    exchange = workers(slow, quick)
    begun = wall_seconds()
    pending = exchange.begin([question("scanner")])
    assert not pending.ready
    for _ in range(5):
        assert exchange([question("meter")], 0.2)[0].fields == ("1",)
    assert wall_seconds() - begun < 0.35
    while not pending.ready:
        slow.never.wait(0.01)
    assert [reply.fields for reply in pending.replies()] == [("1",)]


def test_what_was_begun_and_has_not_come_is_given_up(workers: MakeWorkers) -> None:
    hung, quick = Fake("scanner", delay_s=60.0), Fake("cells")
    exchange = workers(hung, quick)
    pending = exchange.begin([question("scanner"), question("cells")])
    while not quick.heard:
        hung.never.wait(0.01)
    hung.never.wait(0.05)
    late, came = pending.replies()
    assert isinstance(late.fault, LinkFault)
    assert "no answer in time" in late.fault.what
    assert came.fields == ("1",)
    again = exchange.begin([question("scanner")]).replies()[0]
    assert again.fault is not None
    assert "still owes an answer" in again.fault.what


def test_in_turn_what_is_begun_is_done() -> None:
    fake = Fake("scanner")
    pending = Inline({"scanner": fake}, WallClock()).begin([question("scanner")])
    assert pending.ready
    assert pending.replies()[0].fields == ("1",)


def test_a_closed_bench_answers_what_is_begun(workers: MakeWorkers) -> None:
    exchange = workers(Fake("scanner"))
    exchange.close()
    fault = exchange.begin([question("scanner")]).replies()[0].fault
    assert fault is not None
    assert "the bench was closed" in fault.what
