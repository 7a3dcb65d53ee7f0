"""Many rows in an order that people can take in."""

from collections.abc import Callable

import pytest

from reports import families, rows
from reports.rows import VerdictRow

LAST = "Balancing, screened"


@pytest.fixture
def judged(breadth: dict) -> list[VerdictRow]:
    return [rows.verdict_row(number, one, {}) for number, one in enumerate(breadth["verdicts"]["verdicts"], 1)]


@pytest.fixture
def row(judged: list[VerdictRow], breadth: dict) -> Callable[..., VerdictRow]:
    return lambda **changed: rows.verdict_row(1, breadth["verdicts"]["verdicts"][0] | changed, {})


def test_no_row_is_lost_and_each_keeps_its_order(judged: list[VerdictRow]) -> None:
    groups = families.families(judged)
    assert [group.title for group in groups] == ["Charge", "ID resistor", "Temperature window", "Cell taps", LAST]
    assert [one.node for group in groups for one in group.rows] == [one.node for one in judged]


def test_a_family_is_as_good_as_its_worst_row(judged: list[VerdictRow]) -> None:
    temperature = families.families(judged)[2]
    assert temperature.worst.text == "fail"
    assert temperature.tally == "1 fail, 1 conditional pass, 4 pass"


def test_the_summary_names_the_worst_first(judged: list[VerdictRow]) -> None:
    words = [one.verdict.text for one in families.summary(judged).urgent]
    assert words == sorted(words, key=("fail", "conditional fail", "inconclusive").index)
    assert words.count("fail") == 9
    assert "id.band3.lower_edge" in [one.limit for one in families.summary(judged).urgent]


def test_a_long_summary_says_how_many_more_there_are(row: Callable[..., VerdictRow]) -> None:
    told = families.summary([row(verdict="inconclusive")] * 40)
    assert (len(told.urgent), told.further) == (families.MOST, 40 - families.MOST)


def test_what_is_declared_elsewhere_is_counted() -> None:
    names = ["charge.voltage", "tap_trip.cell1.voltage", "charge.ends", "tap_trip.cell2.voltage"]
    assert families.counted(names) == ("Charge (2)", "Cell taps (2)")


def test_a_family_that_is_not_known_keeps_its_own_name(row: Callable[..., VerdictRow]) -> None:
    (group,) = families.families([row(limit="node_noise.level")])
    assert group.title == "Node noise"
