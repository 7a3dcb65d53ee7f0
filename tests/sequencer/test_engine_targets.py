"""What a sweep must show, from the specification alone (computed by hand from the texts below)."""

from __future__ import annotations

import pytest

from drivers.text.measures import Limit
from sequencer.analysis.classes import Seen
from sequencer.engine.inputs import FOLDERS, rebind
from sequencer.engine.targets import ends, passed_over, sides, starts
from sequencer.model.specification import Specification
from sequencer.model.steps import Step, SweepTemperature

STEP = SweepTemperature.model_validate({"cell_voltage": "3.7 V", "resolution": "0.5 K", "beyond": "3 K"})


def specification(*bands: str) -> Specification:
    text = (FOLDERS["specification"] / "lantern.yaml").read_text("utf-8")
    old = "  - {id: [4.23 kΩ, 5.17 kΩ], current: 2.0 A ± 5 %}\n"
    assert old in text
    text = text.replace(old, "".join(f"  - {{{band}, current: 2.0 A ± 5 %}}\n" for band in bands))
    return rebind(Specification, text.encode(), "specification.yaml", "specification").model


def test_an_edge_is_looked_for_a_share_beyond_the_band() -> None:
    lower, upper = sides(specification("id: [4.0 kΩ, 5.0 kΩ]"), 0.25)
    assert (lower.end_ohm, lower.beyond_ohm) == pytest.approx((4.0e3, 3.2e3))
    assert (upper.end_ohm, upper.beyond_ohm) == pytest.approx((5.0e3, 6.25e3))
    assert upper.roles == ("band1.middle", "band1.high", "band1.upper_edge", "band1.upper_outside")


def test_beyond_what_is_declared_for_the_edge_itself() -> None:
    """A charger may charge up to 9 kΩ here: only beyond that must it refuse."""
    lower, upper = sides(specification("id: [4.0 kΩ, 5.0 kΩ], lower_edge: [2 kΩ, 4 kΩ], upper_edge: [5 kΩ, 9 kΩ]"), 0.5)
    assert lower.beyond_ohm == pytest.approx(2e3 / 1.5)
    assert upper.beyond_ohm == pytest.approx(13.5e3)


@pytest.mark.parametrize(
    ("next_band", "neighbour"), [("id: [6.0 kΩ, 7 kΩ]", True), ("id: [6.3 kΩ, 7 kΩ]", False),
                                 ("id: [6.3 kΩ, 7 kΩ], lower_edge: [6.1 kΩ, 6.3 kΩ]", True)],
)  # fmt: skip
def test_a_band_within_reach_ends_the_search(next_band: str, neighbour: bool) -> None:
    found = sides(specification("id: [4.0 kΩ, 5.0 kΩ]", next_band), 0.25)
    upper, next_lower = found[1], found[2]
    assert upper.neighbour is neighbour
    assert upper.beyond_ohm == pytest.approx(float(next_band[5:8]) * 1e3 if neighbour else 6.25e3)
    assert next_lower.beyond_ohm == (5.0e3 if next_lower.neighbour else pytest.approx(next_lower.end_ohm / 1.25))


def test_no_point_that_must_not_charge_lies_in_a_band() -> None:
    spec = specification("id: [1 kΩ, 2 kΩ]", "id: [2.1 kΩ, 3 kΩ]", "id: [3.5 kΩ, 9 kΩ]")
    for side in sides(spec, 0.25):
        inside = [band for band in spec.id_bands if band.low_ohm <= side.beyond_ohm <= band.high_ohm]
        assert bool(inside) is side.neighbour


def test_limits_of_temperature_open_at_one_end() -> None:
    """0.5 K inside the limit's inner end, 3 K outside its outer one; one end stands for both."""
    read = Limit("temperature").read
    assert ends(read("3 °C ± 2 °C"), True, STEP) == pytest.approx((5.5, -2.0))
    assert ends(read("45 °C ± 2 °C"), False, STEP) == pytest.approx((42.5, 50.0))
    assert ends(read({"above": "45 °C"}), False, STEP) == pytest.approx((44.5, 48.0))
    assert ends(read({"below": "5 °C"}), True, STEP) == pytest.approx((5.5, 2.0))


def test_a_start_is_a_start_with_whatever_current() -> None:
    assert starts(Seen("charges", None, None, "", True)) == starts(Seen("pulses", None, None, "", True)) == "charges"
    assert starts(Seen("no charge", None, None, "", False)) == "no charge"


def test_taps_are_watched_where_something_is_declared_about_balancing() -> None:
    step = Step.model_validate({"watch_taps": {"cell_voltage": "3.9 V"}})
    declared = specification("id: [4.0 kΩ, 5.0 kΩ]")
    assert passed_over(step, declared) is None
    bare = declared.model_copy(update={"balancing": None})
    assert passed_over(step, bare) == "the specification declares nothing about balancing"
