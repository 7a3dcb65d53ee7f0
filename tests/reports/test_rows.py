"""Rows of the tables: what is chosen, and how it is rounded."""

import pytest

from reports import rows
from reports.inputs import Measurand
from sequencer.model.curves import Curve

PER_CELL = {"charge.voltage": Measurand("what", "when", "mean", per_cell=True)}


def test_a_quantity_states_value_uncertainty_limits_and_basis(content: dict) -> None:
    verdict = next(one for one in content["verdicts"]["verdicts"] if one["limit"] == "charge.voltage")
    row = rows.verdict_row(3, verdict, PER_CELL)
    assert (row.node, row.limit, row.verdict.text) == ("v003", "charge.voltage", "conditional pass")
    assert (row.result, row.per, row.coverage) == ("4.2211 V ± 6.0 mV", "per cell", "k = 2.00")
    assert row.demanded == "4.175 V to 4.225 V"
    assert row.basis == ("guarded", "w = 6 mV", "n = 120", "p = 90.3 %")
    assert row.evidence == "26:40.0 to 43:10.0"
    assert row.bar is not None


def test_what_was_not_judged_has_no_value_no_bar_and_no_basis(content: dict) -> None:
    row = rows.verdict_row(8, content["verdicts"]["verdicts"][7], {})
    assert (row.verdict.text, row.result, row.bar, row.basis, row.evidence) == ("not run", "–", None, (), "")


def test_an_unknown_verdict_is_refused(content: dict) -> None:
    with pytest.raises(ValueError, match="'maybe' is no verdict"):
        rows.verdict_row(1, content["verdicts"]["verdicts"][0] | {"verdict": "maybe"}, {})


def test_stages_are_numbered_named_and_carry_standard_uncertainties(content: dict) -> None:
    stages = rows.stage_rows(content["findings"]["classification"])
    assert [stage.words for stage in stages] == ["precharge", "constant current", "constant voltage", "rest"]
    assert (stages[1].number, stages[1].current, stages[1].charge) == (2, "2.0004 A, u = 2.1 mA", "862.8 mAh")
    assert stages[1].duration == "25 min 53 s"


def test_a_stage_says_where_its_voltage_is_that_of_its_end(content: dict) -> None:
    voltages = [stage.voltage for stage in rows.stage_rows(content["findings"]["classification"])]
    assert [voltage.endswith(" at its end") for voltage in voltages] == [True, True, False, True]
    assert voltages[2] == "20.9996 V, u = 1.6 mV"
    assert rows.stage_rows({"stages": [{"kind": "cc"}]})[0].voltage == "–"


def test_the_probability_of_a_class_says_where_it_comes_from(content: dict) -> None:
    row = next(
        rows.verdict_row(1, one, {}) for one in content["verdicts"]["verdicts"] if one["limit"] == "charge.algorithm"
    )
    assert row.basis[-2:] == ("set by rule", "not calibrated")


def test_the_budget_of_an_interval_does_not_hide_the_interval() -> None:
    """819.1 Ω ± 1.1 Ω would claim an edge known to 1.1 Ω, where all that is known is a bracket of 5.7 Ω."""
    budget = {"unit": "Ω", "value": 819.1, "U": 1.1, "contributions": []}
    assert rows.budget_table("id.band1.lower_edge", budget, [816.3, 822.0]).result == "816.3 Ω to 822.0 Ω, U 1.1 Ω"


def test_budget_shares_are_shares_of_variance(content: dict) -> None:
    budget = rows.budget_table("charge.voltage", content["budgets"]["charge.voltage"])
    assert budget.result == "4.2211 V ± 6.0 mV"
    # Computed: (2.78 mV / 3 mV)^2 = 0.859; degrees of freedom None are those of an exactly known input.
    assert budget.contributions[0].share == "2.78 mV (86 %)"
    assert (budget.contributions[0].dof, budget.contributions[2].dof) == ("∞", "119")


def test_a_finding_is_defined_once(content: dict) -> None:
    verdicts = content["verdicts"]["verdicts"]
    assert [row.name for row in rows.measurand_rows(verdicts * 2, PER_CELL)] == ["charge.voltage"]


def interval(**changed: object) -> dict:
    return {
        "limit": "id.band2.lower_edge", "kind": "interval", "finding": "id.band.lower_edge", "verdict": "pass",
        "why": "", "value": 4000.0, "unit": "Ω", "u": 2.1, "k": 2.0, "n": 6, "low": None, "high": 4100.0,
        "expected": None, "rule": "guarded", "interval": [3980.0, 4020.0], "declared": None, "guard_band": 4.2,
        "p_conform": 0.999, "evidence": [1.0, 2.0],
    } | changed  # fmt: skip


def test_an_interval_states_both_ends_and_their_uncertainty() -> None:
    row = rows.verdict_row(1, interval(), {})
    assert row.result == "3.980 kΩ to 4.020 kΩ, U 4.2 Ω"
    assert row.words == "lower end of band 2"
    assert row.bar is not None
    assert row.bar.bracket is not None


def test_a_limit_of_the_thermistor_is_told_in_degrees_beside_ohms(sensor: Curve) -> None:
    one = interval(limit="temperature.start_low", finding="temperature.start_low", declared="3 °C ± 2 °C", low=22896.65,
                   high=27416.76, interval=[25394.25, 25938.31])  # fmt: skip
    row = rows.verdict_row(1, one, {}, sensor)
    assert row.result.startswith("25.39 kΩ to 25.94 kΩ")
    assert row.also == "that is 2.22 °C to 2.69 °C"
    assert row.demanded == "3 °C ± 2 °C, that is 22.9 kΩ to 27.42 kΩ"
    assert rows.verdict_row(1, one, {}).also == ""


def test_an_interval_that_was_not_found_is_no_value() -> None:
    row = rows.verdict_row(1, interval(interval=None, value=None, u=None, k=None, verdict="inconclusive"), {})
    assert (row.result, row.bar) == ("–", None)
