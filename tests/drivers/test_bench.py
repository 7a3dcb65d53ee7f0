"""The bench as a model: what it refuses, and what it says of its wiring and hardware."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from drivers.bench import Bench, Certificate, Hardware, Limits, Virtual
from drivers.wiring import CurrentPath

WIRING = {
    "node": {
        "supply": "s",
        "load": "l",
        "voltage": "v",
        "charger_voltage": "c",
        "current": {"shunt": "10 mΩ ± 0.1 %", "meter": "i"},
        "ballast": "100 mΩ",
    },
    "mains": {"switch": "m"},
}
INSTRUMENTS = {name: {"address": f"GPIB0::{n}::INSTR", "dialect": "x"} for n, name in enumerate("slvcim", 1)}
WHOLE: dict[str, Any] = {
    "name": "bay",
    "instruments": INSTRUMENTS,
    "wiring": WIRING,
    "limits": {"node": "26 V", "current": "12 A", "charge": "5 Ah"},
}


def test_wired_says_who_plays_which_role() -> None:
    bench = Bench.model_validate(WHOLE)
    assert [where for where, _ in bench.wired()] == [where for where, _, _ in bench.wiring.places()]
    assert [name for _, name in bench.wired()] == ["s", "l", "v", "c", "i", "m"]
    assert bench.wiring.node.current.shunt_ohm == 0.01
    assert bench.visa == "@py"
    assert bench.virtual is None


def test_hardware_that_is_not_declared_is_missing() -> None:
    assert Bench.model_validate(WHOLE).hardware.missing() == [
        "emergency stop",
        "node clamp",
        "fuse",
        "watchdog relay",
    ]
    assert Hardware(fuse="15 A", watchdog_relay="5 s").missing() == ["emergency stop", "node clamp"]


@pytest.mark.parametrize("shunt", ["10", "0 Ω ± 1 %", "[9 mΩ, 11 mΩ]", "10 mV ± 1 %", "-10 mΩ ± 1 %"])
def test_a_shunt_has_a_resistance_and_a_tolerance(shunt: str) -> None:
    with pytest.raises(ValidationError):
        CurrentPath.model_validate({"shunt": shunt, "meter": "i"})


@pytest.mark.parametrize("due", ["2027-02-29", "2027-13-01", "27-03-01", "tomorrow", "2027-3-1", "２０２７-03-01"])
def test_a_due_date_is_a_date(due: str) -> None:
    """ISO 8601 calendar dates; 2027 is no leap year."""
    with pytest.raises(ValidationError):
        Certificate.model_validate({"number": "C-1", "due": due})
    assert Certificate.model_validate({"number": "C-1", "due": "2028-02-29"}).due == "2028-02-29"


@pytest.mark.parametrize("key", ["node", "current", "charge"])
@pytest.mark.parametrize("value", ["0 V", "-1 A", "5", "0 Ah"])
def test_a_limit_is_above_zero_and_of_its_unit(key: str, value: str) -> None:
    with pytest.raises(ValidationError):
        Limits.model_validate({**WHOLE["limits"], key: value})


@pytest.mark.parametrize("value", ["nan", "-1", "101", "x", None, [1]])
def test_a_scale_of_errors_is_a_number_from_0_to_100(value: Any) -> None:
    with pytest.raises(ValidationError):
        Virtual.model_validate({"errors": value})


@pytest.mark.parametrize("part", [(), ("wiring",), ("wiring", "node"), ("limits",), ("instruments", "s")])
def test_unknown_keys_are_refused_everywhere(part: tuple[str, ...]) -> None:
    import copy

    document = copy.deepcopy(WHOLE)
    place = document
    for key in part:
        place = place[key]
    place["colour"] = "green"
    with pytest.raises(ValidationError, match="colour"):
        Bench.model_validate(document)
