"""Searches for an edge: where they look, how many steps they take, and that the edge is where they say."""

import math
from collections.abc import Callable
from itertools import pairwise

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from sequencer.analysis.edges import (
    EdgeInterval,
    EdgeSearch,
    end_budget,
    expected_steps,
)
from sequencer.analysis.uncertainty import Contribution

OHMS = st.floats(100.0, 1e6)
RESOLUTIONS = st.floats(1e-3, 0.1)


def start(low: float = 1e3, high: float = 2e3, resolution: float = 0.005) -> EdgeSearch:
    return EdgeSearch.between(low, high, "charges, band 1", "no charge", resolution=resolution)


def run(search: EdgeSearch, charger: Callable[[float], str]) -> tuple[EdgeSearch, int]:
    steps = 0
    while (setting := search.ask()) is not None:
        search, steps = search.told(charger(setting)), steps + 1
    return search, steps


def sharp(edge: float) -> Callable[[float], str]:
    return lambda value: "charges, band 1" if value < edge else "no charge"


@pytest.mark.parametrize(
    ("low", "high", "resolution", "steps"),
    [
        # computed: log2(ln(hi/lo) / ln(1 + res)); common practice says ten from scratch over 4 decades at 1 %
        (100.0, 1e6, 0.01, 10),
        (1000.0, 1100.0, 0.005, 5),
        (1000.0, 1100.0, 0.01, 4),
        (1000.0, 1004.0, 0.005, 0),
        (1000.0, 1000.0 * 1.01**8, 0.01, 3),  # a power of two exactly
    ],
)
def test_expected_steps(low: float, high: float, resolution: float, steps: int) -> None:
    assert expected_steps(low, high, resolution) == steps
    assert run(start(low, high, resolution), sharp(math.sqrt(low * high) * 1.0003))[1] == steps


def test_expected_steps_of_a_temperature() -> None:
    assert expected_steps(25.0, 60.0, 0.2, "arithmetic") == 8  # 35 K / 0.2 K = 175 <= 256
    search = EdgeSearch.between(
        25.0, 60.0, "charges, band 1", "no charge", resolution=0.2, scale="arithmetic", unit="°C"
    )
    found, steps = run(search, sharp(45.3))
    assert steps == 8
    assert found.interval.low <= 45.3 <= found.interval.high
    assert found.interval.width <= 0.2


@given(low=OHMS, ratio=st.floats(1.002, 1e4), share=st.floats(0.0, 1.0), resolution=RESOLUTIONS)
def test_the_interval_holds_the_edge_after_as_many_steps_as_expected(
    low: float, ratio: float, share: float, resolution: float
) -> None:
    high = low * ratio
    edge = math.nextafter(low * ratio**share, math.inf)
    assume(low < edge <= high)
    found, steps = run(start(low, high, resolution), sharp(edge))
    assert found.trouble is None
    assert found.interval.low < edge <= found.interval.high
    assert found.interval.high / found.interval.low <= (1.0 + resolution) * (1.0 + 1e-9)
    assert steps == expected_steps(low, high, resolution)
    exact = math.log2(math.log(ratio) / math.log1p(resolution))
    if abs(exact - round(exact)) > 1e-6:
        assert steps == max(0, math.ceil(exact))


@given(low=OHMS, ratio=st.floats(1.01, 100.0), share=st.floats(0.05, 0.95), grid=st.floats(0.1, 50.0))
def test_a_resistor_with_steps_ends_the_search_with_the_edge_inside(
    low: float, ratio: float, share: float, grid: float
) -> None:
    edge = low * ratio**share
    search = start(low, low * ratio, 0.001)
    for _ in range(60):
        setting = search.ask()
        if setting is None:
            break
        made = round(setting / grid) * grid
        if not low < made < low * ratio:
            made = low
        search = search.told(sharp(edge)(made), at=made)
    assert search.ask() is None
    assert search.interval.low < edge <= search.interval.high


def test_no_finer_step_is_said() -> None:
    search = start(1000.0, 1100.0, 0.001)
    search = search.told("charges, band 1", at=1000.0)
    assert search.ask() is None
    assert search.trouble == "no setting lies within the last 100 Ω; there is no finer step"


def test_an_unclear_answer_is_asked_once_more() -> None:
    once = start().told("undecided")
    assert once.trouble is None
    assert once.ask() == start().ask()
    twice = once.told("undecided")
    assert twice.ask() is None
    assert twice.trouble == "1.41421 kΩ gave no clear answer in 2 tries"
    assert twice.interval == start().interval
    again = once.told("no charge").told("undecided")  # another setting has tries of its own
    assert again.trouble is None


def test_a_failed_control_voids_what_came_since_the_last_good_one() -> None:
    first = start().told("no charge")
    assert first.interval.high == pytest.approx(1414.21, abs=0.01)
    vouched = first.controlled(good=True)
    latched = vouched.told("no charge").controlled(good=False)
    assert latched.trouble is None
    assert latched.interval == first.interval
    assert latched.ask() == vouched.ask()  # the same setting once more, after the mains were cycled
    welded = latched.told("no charge").controlled(good=False)
    assert welded.ask() is None
    assert welded.interval == first.interval
    assert welded.trouble == ("the control failed 2 times in a row; what was seen at 1.18921 kΩ counts for nothing")
    recovered = latched.told("charges, band 1").controlled(good=True)
    assert recovered.failed == 0
    assert recovered.interval.low == pytest.approx(1189.21, abs=0.01)


def test_a_charger_that_latches_for_good_never_narrows_the_interval() -> None:
    search, edge = start(1e3, 2e3, 0.001), 1900.0
    latched = False
    for _ in range(40):
        setting = search.ask()
        if setting is None:
            break
        latched = latched or setting >= edge
        search = search.told("no charge" if latched else "charges, band 1").controlled(good=not latched)
    assert search.trouble is not None
    assert search.interval.low < edge <= search.interval.high


def test_of_a_third_class_in_between_the_edge_next_to_the_low_end_is_found() -> None:
    def charger(ohm: float) -> str:
        return "charges, band 1" if ohm < 1100.0 else "no charge" if ohm < 2700.0 else "charges, band 2"

    search = EdgeSearch.between(1000.0, 3000.0, "charges, band 1", "charges, band 2", resolution=0.01)
    found, _ = run(search, charger)
    assert found.trouble is None
    assert found.interval.low < 1100.0 <= found.interval.high
    assert (found.interval.low_class, found.interval.high_class) == ("charges, band 1", "no charge")


@pytest.mark.parametrize(
    ("seen", "at", "words"),
    [
        ("no charge", 1000.0, "1 kΩ showed charges, band 1 and no charge"),
        ("charges, band 1", 2000.0, "2 kΩ showed charges, band 1 and no charge"),
        ("charges, band 1", 2500.0, "no charge at 2 kΩ, charges, band 1 above it at 2.5 kΩ"),
        ("no charge", 900.0, "no charge at 900 Ω, charges, band 1 above it at 1 kΩ"),
    ],
)
def test_answers_that_contradict_each_other_end_the_search(seen: str, at: float, words: str) -> None:
    search = start().besides(at, seen)
    assert search.ask() is None
    assert search.trouble == f"answers contradict each other: {words}"
    assert search.interval.low <= at <= search.interval.high


def test_ends_seen_once_more_let_the_search_go_on() -> None:
    search = start().besides(1000.0, "charges, band 1").besides(2000.0, "no charge").besides(1500.0, "undecided")
    assert (search.trouble, search.ask()) == (None, start().ask())


@given(st.lists(st.tuples(st.floats(1001.0, 1999.0), st.booleans()), max_size=12))
def test_an_interval_spans_every_contradiction(points: list[tuple[float, bool]]) -> None:
    search = start()
    for ohm, charged in points:
        search = search.besides(ohm, "charges, band 1" if charged else "no charge")
    found = search.interval
    assert all(charged for ohm, charged in points if ohm < found.low)
    assert not any(charged for ohm, charged in points if ohm > found.high)
    monotone = all(not (b and not a) for (_, a), (_, b) in pairwise(sorted(points, key=lambda p: (p[0], not p[1]))))
    same = {ohm for ohm, charged in points if charged} & {ohm for ohm, charged in points if not charged}
    contradicted = search.trouble is not None and "contradict" in search.trouble
    assert contradicted == (not monotone or bool(same))


def test_a_contradiction_that_a_failed_control_explains_is_forgotten() -> None:
    search = start().besides(1000.0, "no charge")
    assert search.trouble is not None
    assert search.controlled(good=False).trouble is None


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((2e3, 1e3, "a", "b"), "low, high: expected 0 < low < high"),
        ((0.0, 1e3, "a", "b"), "low, high: expected 0 < low < high"),
        ((1e3, 2e3, "a", "a"), "two classes that differ"),
        ((1e3, 2e3, "a", "undecided"), "two classes that differ"),
    ],
)
def test_what_is_no_bracket_is_refused(arguments: tuple[float, float, str, str], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        EdgeSearch.between(*arguments, resolution=0.01)


def test_a_resolution_of_nothing_and_an_answer_to_nothing_are_refused() -> None:
    with pytest.raises(ValueError, match="resolution"):
        start(resolution=0.0)
    done, _ = run(start(), sharp(1500.0))
    with pytest.raises(ValueError, match="nothing was asked"):
        done.told("no charge")


def test_budget_of_an_edge() -> None:
    # computed: resistor ± 0.1 % of 1 kΩ -> 0.577 Ω; contact ± 0.1 Ω -> 0.058 Ω
    interval = EdgeInterval(995.0, 1005.0, "charges, band 1", "no charge")
    resistor = Contribution.from_half_width("resistor as measured", 1.0)
    contact = Contribution.from_half_width("contact", 0.1)
    budget = end_budget(interval, [resistor, contact])
    assert (budget.value, budget.unit) == (1000.0, "Ω")
    assert budget.u == pytest.approx(math.sqrt(1.01 / 3.0), rel=1e-12)
    assert [line.name for line in budget.contributions] == ["resistor as measured", "contact"]


def test_an_interval_in_another_quantity() -> None:
    interval = EdgeInterval(45.0, 45.2, "charges", "no charge")
    ohms = interval.converted(lambda celsius: 10e3 - 100.0 * celsius)  # falls, as an NTC does
    assert (ohms.low, ohms.high) == (pytest.approx(5480.0), pytest.approx(5500.0))
    assert (ohms.low_class, ohms.high_class) == ("no charge", "charges")
    up = interval.converted(lambda celsius: 100.0 + 0.4 * celsius)
    assert (up.low_class, up.high_class) == ("charges", "no charge")
    with pytest.raises(ValueError, match="low <= high"):
        EdgeInterval(2.0, 1.0, "a", "b")
