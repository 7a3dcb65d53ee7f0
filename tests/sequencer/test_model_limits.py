"""Which limits a specification sets, one a band, a side, a cell; thermistor limits in ohms."""

from __future__ import annotations

import pytest

from sequencer.engine.inputs import Asked, gather
from sequencer.model.limits import Declared, LimitRow
from sequencer.model.signals import Balancing


@pytest.fixture(scope="module")
def rows() -> dict[str, LimitRow]:
    inputs = gather(Asked("acceptance", "sprayer", bench="virtual-in-process"))
    assert inputs.curve is not None
    declared = Declared(inputs.specification.model, inputs.pack.model.cells, inputs.curve.model)
    return {row.name: row for row in declared.rows(inputs.procedure.model.judge)}


def test_one_limit_a_band_side_and_cell(rows: dict[str, LimitRow]) -> None:
    assert {f"id.band{band}.{what}" for band in (1, 2) for what in ("current", "lower_edge", "upper_edge")} <= set(rows)
    assert {
        f"tap_trip.cell{cell}.{what}" for cell in range(1, 6) for what in ("voltage", "stop_time", "release")
    } <= set(rows)
    assert "id.band3.current" not in rows
    assert "tap_trip.cell6.voltage" not in rows


def test_an_edge_that_is_not_declared_must_lie_outside_its_band(rows: dict[str, LimitRow]) -> None:
    lower, upper = rows["id.band1.lower_edge"].band, rows["id.band1.upper_edge"].band
    assert lower is not None
    assert upper is not None
    assert (lower.low, lower.high) == (None, pytest.approx(900.0))
    assert (upper.low, upper.high) == (pytest.approx(1100.0), None)


def test_with_bands_declared_nothing_else_may_charge(rows: dict[str, LimitRow]) -> None:
    assert {rows[f"id.{name}"].expected for name in ("outside", "open", "short")} == {"no charge"}
    assert {rows[f"temperature.{name}"].expected for name in ("open", "short")} == {"no charge"}


def test_thermistor_limits_are_in_ohms_and_change_sides(rows: dict[str, LimitRow]) -> None:
    """0 °C ± 2 °C by B(25/85) = 3435 K, 10 kΩ: 31.50 kΩ at -2 °C, 26.20 kΩ at 2 °C (computed from the Beta law)."""
    row = rows["temperature.run_low"]
    assert row.unit == "Ω"
    assert row.band is not None
    assert (row.band.low, row.band.high) == (pytest.approx(26_197, rel=1e-3), pytest.approx(31_494, rel=1e-3))
    assert row.words == "0 °C ± 2 °C"


def test_rules_from_near_to_far() -> None:
    """A limit's own rule, its family's, the specification's; and one for all overrides them."""
    inputs = gather(Asked("acceptance", "sprayer", bench="virtual-in-process"))
    spec = inputs.specification.model
    assert spec.tap_trip is not None
    changed = spec.model_copy(update={"tap_trip": spec.tap_trip.model_copy(update={"rule": "simple"})})
    curve = None if inputs.curve is None else inputs.curve.model
    found = {row.name: row.rule for row in Declared(changed, 5, curve).rows(("tap_trip.voltage", "id.band.lower_edge"))}
    assert found["tap_trip.cell1.voltage"] == "simple"
    assert found["id.band1.lower_edge"] == "guarded"
    assert {row.rule for row in Declared(changed, 5, curve).rows(("id.band.lower_edge",), "simple")} == {"simple"}


def test_what_is_declared_and_not_judged_is_known() -> None:
    inputs = gather(Asked("id-bands", "sprayer", bench="virtual-in-process"))
    assert inputs.curve is not None
    elsewhere = Declared(inputs.specification.model, 5, inputs.curve.model).elsewhere(inputs.procedure.model.judge)
    assert "tap_trip.cell5.voltage" in elsewhere
    assert "charge.algorithm" in elsewhere
    assert not any(name.startswith("id.") for name in elsewhere)


def balancing_rows(**said: str) -> dict[str, LimitRow]:
    spec = gather(Asked("balancing-screening", "lantern", bench="virtual-in-process")).specification.model
    names = ("balancing.screening", "balancing.current", "balancing.none_above")
    changed = spec.model_copy(update={"balancing": Balancing.model_validate(said) if said else None})
    return {row.name: row for row in Declared(changed, 3).rows(names)}


def test_what_is_declared_about_balancing() -> None:
    """None above a current: one limit, and the absence; a current: one a cell, and that it is found at all."""
    none = balancing_rows(none_above="1 mA")
    assert [name for name, row in none.items() if row.declared] == ["balancing.screening", "balancing.none_above"]
    screening = none["balancing.screening"]
    assert screening.band is not None
    assert (screening.band.high, screening.expected, screening.least) == (0.001, None, None)
    there = balancing_rows(current="4 mA ± 20 %", rule="simple")
    cells = [f"balancing.cell{cell}.current" for cell in (1, 2, 3)]
    assert [name for name, row in there.items() if row.declared] == ["balancing.screening", *cells]
    assert (there["balancing.screening"].expected, there["balancing.screening"].least) == ("found", 0.0032)
    assert {there[name].rule for name in cells} == {"simple"}
    assert not any(row.declared for row in balancing_rows().values())
