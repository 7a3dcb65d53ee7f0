"""Channels and places of a bench's wiring."""

from __future__ import annotations

import pytest
from pydantic import TypeAdapter, ValidationError

from drivers.needs import NEEDS
from drivers.wiring import Channel, ChannelRef, Wiring

NODE = {
    "supply": "s", "load": "l", "voltage": "m1", "charger_voltage": "m2",
    "current": {"shunt": "10 mΩ ± 0.1 %", "meter": "m3"}, "ballast": "100 mΩ",
}  # fmt: skip
CONTACTS = {"b_plus": "relays.1", "b_minus": "relays.2", "precharge": "relays.3", "precharge_resistor": "47 Ω"}
ID = {"resistor": "decade", "contact": "relays.4", "sense": "scanner.111"}
TAP = {"supply": "cells.1", "shunt": "1 Ω ± 0.1 %", "meter": "scanner.101", "contact": "relays.11"}
MAINS = {"switch": "mains"}


@pytest.mark.parametrize(
    ("text", "instrument", "channel"),
    [("relays.3", "relays", "3"), ("rack.2.relays.A1", "rack.2.relays", "A1")],
)
def test_an_instrument_and_its_channel(text: str, instrument: str, channel: str) -> None:
    found = TypeAdapter(ChannelRef).validate_python(text)
    assert found == Channel(instrument, channel)
    assert str(found) == text


@pytest.mark.parametrize("text", ["relays", "relays.", ".3", "relays.3 ", "relays.(3)", 3])
def test_what_is_no_channel(text: object) -> None:
    with pytest.raises(ValidationError, match=r"relays\.3"):
        TypeAdapter(ChannelRef).validate_python(text)


def test_every_place_has_a_role_that_is_known() -> None:
    wiring = Wiring.model_validate(
        {"node": {**NODE, "contacts": CONTACTS}, "mains": MAINS, "id": ID, "thermistor": ID, "taps": [TAP, TAP],
         "ambient": {"thermometer": "t"}}
    )  # fmt: skip
    places = list(wiring.places())
    assert {role for _, _, role in places} == set(NEEDS)
    names = [where for where, _, _ in places]
    assert len(set(names)) == len(names)
    assert "taps.1.contact" in names


def test_without_contacts_only_the_node_is_there() -> None:
    wiring = Wiring.model_validate({"node": NODE, "mains": MAINS})
    assert {role for _, _, role in wiring.places()} == {"supply", "load", "meter", "mains switch"}


@pytest.mark.parametrize("small", [{"id": ID}, {"thermistor": ID}, {"taps": [TAP]}])
def test_small_contacts_need_the_power_contacts(small: dict[str, object]) -> None:
    """Else they would never close, and the charger would refuse the pack for a reason that is not its own."""
    with pytest.raises(ValidationError, match=r"node\.contacts"):
        Wiring.model_validate({"node": NODE, "mains": MAINS, **small})


@pytest.mark.parametrize("shunt", ["1 Ω", {"above": "1 Ω"}, ["0.9 Ω", "1.1 Ω"], "-1 Ω ± 1 %"])
def test_a_shunt_needs_its_tolerance(shunt: object) -> None:
    with pytest.raises(ValidationError):
        Wiring.model_validate({"node": NODE, "mains": MAINS, "taps": [{**TAP, "shunt": shunt}]})
