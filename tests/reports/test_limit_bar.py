"""The bar must show what the verdict says: the same zones, drawn to scale."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reports.limit_bar import WIDTH, limit_bar

# Worked zones of ILAC-G8:09/2019, 4.2.3, for an upper limit of 4.25 V and U = w = 4 mV (computed).
UPPER, GUARD = 4.25, 0.004


@pytest.mark.parametrize(
    ("value", "zone"),
    [
        (4.2450, "inside"),
        (4.2470, "guard"),
        (4.2490, "guard"),
        (4.2515, "outer"),
        (4.2530, "outer"),
        (4.2550, "beyond"),
    ],
)
def test_the_marker_stands_in_the_zone_of_ilac_g8(value: float, zone: str) -> None:
    bar = limit_bar(value, GUARD, None, UPPER, GUARD)
    assert bar is not None
    (guard,), (outer,), (edge,) = bar.guards, bar.outside, bar.edges
    assert guard[1] == edge == outer[0]
    found = {
        "inside": bar.value < guard[0],
        "guard": guard[0] < bar.value < guard[1],
        "outer": outer[0] < bar.value < outer[1],
        "beyond": bar.value > outer[1],
    }
    assert [name for name, here in found.items() if here] == [zone]


def test_bar_is_to_scale() -> None:
    bar = limit_bar(4.20, 0.005, 4.175, 4.225, 0.005)
    assert bar is not None
    low, high = bar.edges
    assert bar.value == pytest.approx((low + high) / 2, abs=0.02)
    # Computed: 2 U over the width between the limits is 10 mV / 50 mV.
    assert (bar.right - bar.left) / (high - low) == pytest.approx(0.2, abs=0.002)


@pytest.mark.parametrize(("value", "side"), [(9.0, 1), (-9.0, -1), (2.0, 0)])
def test_a_value_far_out_is_an_arrow_and_the_limits_stay_readable(value: float, side: int) -> None:
    bar = limit_bar(value, 0.01, 1.9, 2.1, 0.01)
    assert bar is not None
    assert bar.beyond == side
    assert bar.edges[1] - bar.edges[0] > 0.2 * WIDTH


def test_overlapping_guard_bands_meet_in_the_middle() -> None:
    bar = limit_bar(2.0, 0.3, 1.9, 2.1, 0.3)
    assert bar is not None
    assert bar.guards[0][1] == bar.guards[1][0]


def test_an_interval_is_drawn_from_end_to_end_with_u_at_its_ends() -> None:
    bar = limit_bar((3980.0, 4020.0), 4.0, 3900.0, 4100.0, 4.0)
    assert bar is not None
    assert bar.bracket is not None
    low, high = bar.edges
    per_ohm = (high - low) / 200
    # Computed: the interval is 40 of 200 Ω wide, U reaches 4 Ω beyond each end, its middle is that of the limits.
    assert bar.bracket[1] - bar.bracket[0] == pytest.approx(40 * per_ohm, abs=0.02)
    assert bar.bracket[0] - bar.left == pytest.approx(4 * per_ohm, abs=0.02)
    assert bar.value == pytest.approx((low + high) / 2, abs=0.02)


def test_an_interval_across_a_limit_stands_on_both_sides_of_it() -> None:
    bar = limit_bar((8.95, 9.05), 0.0, None, 9.0, 0.0)
    assert bar is not None
    assert bar.bracket is not None
    assert bar.bracket[0] < bar.edges[0] < bar.bracket[1]


@pytest.mark.parametrize("missing", [(1.0, None, None), (math.nan, 0.0, 1.0), (math.inf, 0.0, None)])
def test_nothing_to_draw(missing: tuple[float, float | None, float | None]) -> None:
    value, low, high = missing
    assert limit_bar(value, 0.1, low, high, 0.0) is None


grid = st.integers(-(10**7), 10**7).map(lambda steps: steps / 1000)


@given(
    value=grid,
    U=st.floats(0, 1e3),
    edges=st.lists(grid, min_size=2, max_size=2, unique=True),
    guard=st.floats(0, 1e3),
    sides=st.integers(1, 3),
)
def test_everything_stays_in_the_box(value: float, U: float, edges: list[float], guard: float, sides: int) -> None:
    low, high = sorted(edges)
    bar = limit_bar(value, U, low if sides & 1 else None, high if sides & 2 else None, guard)
    assert bar is not None
    spans = (bar.inside, *bar.guards, *bar.outside, (bar.left, bar.right))
    assert all(0 <= start <= stop <= WIDTH for start, stop in spans)


anything = st.floats()


@given(value=anything | st.tuples(anything, anything), U=st.floats(0), low=anything, high=anything, guard=st.floats(0))
def test_no_number_at_all_stops_a_report(
    value: float | tuple[float, float], U: float, low: float, high: float, guard: float
) -> None:
    limit_bar(value, U, low, high, guard)
