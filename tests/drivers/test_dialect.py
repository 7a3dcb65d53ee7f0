"""Dialects: the shipped ones, and what no dialect may lack."""

from __future__ import annotations

import re
from typing import Any, get_args

import pytest
from pydantic import ValidationError

from drivers.bench_file import DIALECTS
from drivers.dialect import Dialect
from drivers.needs import NEEDS, Role
from drivers.text.binding import bind
from drivers.text.document import compose, read
from drivers.text.faults import Faults

SHIPPED = sorted(DIALECTS.glob("*.yaml"))


def shipped(name: str) -> Dialect:
    faults = Faults()
    bound = bind(Dialect, read(DIALECTS / f"{name}.yaml"), "dialect", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def raw(**changes: Any) -> dict[str, Any]:
    """A whole dialect of a supply, some keys changed; None takes one away."""
    whole: dict[str, Any] = {
        "name": "made up",
        "role": "supply",
        "settings": {
            "clear": "*CLS",
            "voltage": "VOLT {value:.3f}",
            "current_limit": {"send": "CURR {value:.3f}", "back": "CURR?"},
            "overvoltage": "VOLT:PROT {value:.3f}",
            "on": {"send": "OUTP ON", "back": "OUTP?", "expect": ["1"]},
            "off": {"send": "OUTP OFF", "back": "OUTP?", "expect": ["0"]},
        },
        "readings": {"state": {"ask": "A?;:B?;:C?;:D?", "fields": ["voltage", "current", "output", "status"]}},
        "status": {"constant_voltage": "256", "constant_current": "1024"},
    }
    for key, value in changes.items():
        whole = {**whole, key: value} if value is not None else {k: v for k, v in whole.items() if k != key}
    return whole


def settings(**changes: Any) -> dict[str, Any]:
    return {name: value for name, value in {**raw()["settings"], **changes}.items() if value is not None}


def refused(document: dict[str, Any]) -> str:
    with pytest.raises(ValidationError) as caught:
        Dialect.model_validate(document)
    return str(caught.value)


def test_the_made_up_one_is_whole() -> None:
    assert Dialect.model_validate(raw()).timeout == 3.0


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
def test_shipped_dialects_are_whole(path: Any) -> None:
    dialect = shipped(path.stem)
    assert dialect.name == path.stem
    assert set(dialect.settings) >= NEEDS[dialect.role].settings
    assert dialect.timeout <= 3.0, "at most three of the slowest scan periods, 1 s"


def test_each_role_has_a_shipped_dialect() -> None:
    assert {shipped(path.stem).role for path in SHIPPED} == set(get_args(Role)) == set(NEEDS)


@pytest.mark.parametrize(
    "path", [path for path in SHIPPED if path.stem.startswith("scpi-")], ids=lambda path: path.stem
)
def test_shipped_commands_are_of_the_standards(path: Any) -> None:
    """SCPI-1999, volume 2: these subsystems; IEEE 488.2, 10.3 and 10.14: *CLS, *IDN?. At most 12 letters a mnemonic."""
    dialect = shipped(path.stem)
    texts = [dialect.identity, dialect.confirm or "", *(text for one in dialect.readings.values() for text in one.ask)]
    texts += [text for one in dialect.settings.values() for text in (*one.send, one.back or "")]
    for command in filter(None, (part.strip(": ") for text in texts for part in text.split(";"))):
        header = command.split()[0].rstrip("?")
        assert header in ("*IDN", "*CLS") or re.fullmatch(
            r"(VOLT|CURR|RES|OUTP|INP|FUNC|MEAS|READ|CONF|STAT|SYST|ROUT)(:[A-Z]{1,12})*", header
        ), command


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
def test_shipped_outputs_prove_that_they_switched(path: Any) -> None:
    dialect = shipped(path.stem)
    for name in {"on", "off"} & set(dialect.settings):
        assert dialect.settings[name].back
        assert dialect.settings[name].expect


@pytest.mark.parametrize("name", sorted(NEEDS["supply"].settings))
def test_a_missing_setting_is_named(name: str) -> None:
    assert f"settings.{name}" in refused(raw(settings=settings(**{name: None})))


@pytest.mark.parametrize("name", ["voltage", "current", "output", "status"])
def test_a_missing_field_is_named(name: str) -> None:
    fields = [field for field in ("voltage", "current", "output", "status") if field != name]
    assert f"readings.state.{name}" in refused(raw(readings={"state": {"ask": "A?;:B?;:C?", "fields": fields}}))


@pytest.mark.parametrize("name", sorted(NEEDS["supply"].states))
def test_a_missing_status_is_named(name: str) -> None:
    others = {key: value for key, value in raw()["status"].items() if key != name}
    assert f"status.{name}" in refused(raw(status=others))


def test_all_that_is_missing_is_named_at_once() -> None:
    told = refused(raw(settings={"clear": "*CLS"}, readings={}, status={}))
    for name in ("settings.voltage", "settings.off", "readings.state.output", "status.constant_current"):
        assert name in told


@pytest.mark.parametrize("mask", ["0", "-1", "yes", "1.5"])
def test_a_status_mask_that_can_never_be_seen_is_refused(mask: str) -> None:
    refused(raw(status={"constant_voltage": mask, "constant_current": "1024"}))


@pytest.mark.parametrize("send", ["VOLT {}", "VOLT {0}", "VOLT {volts}", "VOLT {value", "VOLT {value.real}"])
def test_only_the_value_may_stand_in_a_command(send: str) -> None:
    assert "voltage" in refused(raw(settings=settings(voltage=send)))


@pytest.mark.parametrize("send", ["VOLT {value:.3q}", "VOLT {value:{width}}", "VOLT {value:d}"])
def test_a_format_that_no_number_fits_is_refused_before_it_is_needed(send: str) -> None:
    assert "voltage" in refused(raw(settings=settings(voltage=send)))


@pytest.mark.parametrize("name", sorted(NEEDS["supply"].valued))
def test_a_setting_that_drops_its_value_is_refused(name: str) -> None:
    assert f"settings.{name}" in refused(raw(settings=settings(**{name: "VOLT 5"})))


def test_a_switch_that_waits_for_a_value_is_refused() -> None:
    assert "settings.off" in refused(raw(settings=settings(off="OUTP {value:g}")))


def test_a_readback_that_proves_nothing_is_refused() -> None:
    assert "expect" in refused(raw(settings=settings(off={"send": "OUTP OFF", "back": "OUTP?"})))
    assert "back" in refused(raw(settings=settings(off={"send": "OUTP OFF", "expect": ["0"]})))


@pytest.mark.parametrize(
    "changes",
    [
        {"identity": "*IDN"},
        {"confirm": "SYST:ERR"},
        {"readings": {"state": {"ask": "MEAS", "fields": ["voltage", "current", "output", "status"]}}},
        {"settings": settings(off={"send": "OUTP OFF", "back": "OUTP", "expect": ["0"]})},
    ],
)
def test_a_query_that_asks_nothing_is_refused(changes: dict[str, Any]) -> None:
    """IEEE 488.2, 7.3.3: a query message unit ends in a question mark; without one nothing answers."""
    assert "asks nothing" in refused(raw(**changes))


def test_a_field_stands_once() -> None:
    fields = ["voltage", "voltage", "current", "output", "status"]
    assert "twice" in refused(raw(readings={"state": {"ask": "A?", "fields": fields}}))


@pytest.mark.parametrize("timeout", ["0 s", "-1 s", "3", "3 V"])
def test_a_timeout_is_a_time_above_zero(timeout: str) -> None:
    refused(raw(timeout=timeout))


def test_unknown_keys_are_refused_with_the_nearest() -> None:
    faults = Faults()
    text = (DIALECTS / "scpi-meter.yaml").read_text("utf-8").replace("readings:", "reading:")
    bind(Dialect, compose(text.encode(), "d.yaml"), "dialect", faults)
    assert any("reading" in str(fault) and "readings" in str(fault) for fault in faults.found)


@pytest.mark.parametrize(("name", "end"), [("LF", "\n"), ("CR", "\r"), ("CRLF", "\r\n")])
def test_terminators(name: str, end: str) -> None:
    assert Dialect.model_validate(raw(terminator=name)).end == end


def test_what_can_be_set_most_is_a_voltage_or_a_current() -> None:
    dialect = Dialect.model_validate(raw(settable={"voltage": "60 V", "current": "500 mA"}))
    assert dialect.settable == {"voltage": 60.0, "current": 0.5}
    refused(raw(settable={"voltage": "0 V"}))
    refused(raw(settable={"voltage": "60 W"}))


def test_only_a_tap_supply_says_what_it_absorbs() -> None:
    assert shipped("scpi-tap-supply").sinks == shipped("plain-tap-supply").sinks == 0.05
    assert shipped("scpi-supply").sinks is None
    assert "'sinks' belongs to a tap supply" in refused(raw(sinks="50 mA"))
