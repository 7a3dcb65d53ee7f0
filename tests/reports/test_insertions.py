"""Points and verdicts as figures need them, whatever is missing in them."""

import pytest

from reports import insertions
from reports.insertions import Mark


def point(**changed: object) -> dict:
    return {"finding": "id", "role": "band1.low", "ohm": 900.0, "celsius": None, "kind": "charges", "current_A": 1.5,
            "void": False, "words": ""} | changed  # fmt: skip


def test_a_void_point_is_no_kind_of_answer() -> None:
    (mark,) = insertions.marks([point(void=True)], "id")
    assert mark.style == "void"


@pytest.mark.parametrize(
    ("changed", "expected"),
    [
        ({"ohm": "open"}, Mark("band1.low", None, None, 1.5, "charges")),
        ({"current_A": None, "kind": "undecided"}, Mark("band1.low", 900.0, None, 0.0, "undecided")),
        ({"kind": "something newer"}, Mark("band1.low", 900.0, None, 1.5, "undecided")),
        ({"ohm": float("inf"), "celsius": float("nan")}, Mark("band1.low", None, None, 1.5, "charges")),
        ({"ohm": True}, Mark("band1.low", None, None, 1.5, "charges")),
    ],
)
def test_what_is_no_number_is_none(changed: dict, expected: Mark) -> None:
    assert insertions.marks([point(**changed)], "id") == (expected,)


def test_each_sweep_has_its_own_points(breadth: dict) -> None:
    points = breadth["findings"]["points"]
    sweeps = [insertions.marks(points, name) for name in ("id", "temperature")]
    assert sum(map(len, sweeps)) == len(points)
    assert all(mark.celsius is None for mark in sweeps[0])


@pytest.mark.parametrize("ends", [None, [], [1.0], [1.0, None], ["1", "2"], [1.0, float("inf")], 7])
def test_an_interval_with_an_end_missing_is_none(ends: object) -> None:
    assert insertions.bracket_of({"interval": ends}) is None


def test_brackets_carry_their_verdict(breadth: dict) -> None:
    found = insertions.brackets(breadth["verdicts"]["verdicts"])
    edge = found["id.band3.lower_edge"]
    assert edge.failed
    assert edge.low < 9210 < edge.high  # the invented charger's own edge, 9.21 kΩ
    assert (edge.limit_low, edge.limit_high) == (None, 9000)
    assert not found["id.band1.lower_edge"].failed
    assert "tap_trip.cell4.voltage" not in found


def test_insertions_are_counted_in_words() -> None:
    shown = insertions.marks([point(), point(kind="no charge"), point(void=True, kind="no charge")], "id")
    assert insertions.counted(shown) == (
        "3 insertions: 1 with a charge, 1 without,"
        " 1 void: the control after it failed twice, and it counts for nothing."
    )
    assert insertions.at_contact(insertions.marks([point(role="open", ohm=None)], "id"), "ID contact") == (
        "ID contact open: charges."
    )
    assert insertions.at_contact(shown, "ID contact") == ""
