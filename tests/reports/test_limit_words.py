"""Every finding that is judged has words; a name that does not say which one has none."""

import pytest

from reports.limit_words import limit_words
from sequencer.model.findings import definitions


def test_every_finding_of_the_table_has_words() -> None:
    for name, one in definitions().items():
        limit = name if one.each is None else name.replace(f".{one.each}.", f".{one.each}1.")
        if one.each in ("cell", "start"):
            limit = name.replace(".", f".{one.each}1.")
        assert limit_words({"finding": name, "limit": limit}), name


@pytest.mark.parametrize(
    ("limit", "words"),
    [
        ("tap_trip.cell3.voltage", "cell 3: stops the charge at"),
        ("tap_trip.cell12.voltage", "cell 12: stops the charge at"),
        ("tap_trip.voltage", ""),
        ("tap_trip.cell{0.__class__}.voltage", ""),
        ("tap_trip.cell٣.voltage", ""),
    ],
)
def test_the_place_is_read_from_the_name(limit: str, words: str) -> None:
    assert limit_words({"finding": "tap_trip.voltage", "limit": limit}) == words


def test_unknown_findings_have_none() -> None:
    assert limit_words({"finding": None, "limit": "x"}) == ""
