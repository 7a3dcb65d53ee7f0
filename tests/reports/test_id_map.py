"""What the ID map will show."""

import pytest

from reports.id_map import IdMap, id_map
from sequencer.model.specification import Specification


@pytest.fixture
def shown(breadth: dict, declared: Specification) -> IdMap:
    made = id_map(breadth["findings"]["points"], breadth["verdicts"]["verdicts"], declared)
    assert made is not None
    return made


def test_bands_are_those_of_the_specification_with_the_edges_found(shown: IdMap) -> None:
    band = shown.bands[1]
    assert (band.low_ohm, band.high_ohm) == pytest.approx((2700, 3300))
    assert (band.low_A, band.high_A) == pytest.approx((2.85, 3.15))  # computed: 3 A ± 5 %
    assert band.lower is not None
    assert band.lower.low < 2600 < band.lower.high  # the invented charger's own edge
    assert band.current == "3.0 A ± 5 %"


def test_open_and_short_stand_beside_the_axis(shown: IdMap) -> None:
    assert [mark.style for mark in (*shown.open, *shown.short)] == ["no charge", "pulses"]
    assert all(mark.ohm is not None for mark in shown.marks)
    assert "ID contact open: no charge; short: pulses." in shown.caption


def test_void_points_are_told(shown: IdMap) -> None:
    assert [mark.role for mark in shown.marks if mark.style == "void"] == ["band2.upper_outside"]
    assert "1 void" in shown.caption


def test_the_axis_holds_every_mark_with_a_margin_of_the_given_share(shown: IdMap) -> None:
    low, high = shown.span_ohm(0.06)
    ohms = [mark.ohm for mark in shown.marks if mark.ohm is not None]
    assert low < min(ohms)
    assert high > max(ohms)
    assert shown.top_A >= 4.2  # the upper limit of the third band, computed


def test_without_a_sweep_no_map_and_without_a_specification_no_bands(breadth: dict) -> None:
    assert id_map([], breadth["verdicts"]["verdicts"], None) is None
    bare = id_map(breadth["findings"]["points"], [], None)
    assert bare is not None
    assert bare.bands == ()
    assert "could not be read" in bare.caption


def test_a_single_point_has_an_axis(breadth: dict) -> None:
    one = id_map(breadth["findings"]["points"][:1], [], None)
    assert one is not None
    low, high = one.span_ohm(0.06)
    assert 0 < low < high
