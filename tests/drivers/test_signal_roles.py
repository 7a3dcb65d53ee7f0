"""Resistors, relays, cell taps and scanners in the bench's words, through both ways of speaking to several channels."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import pytest

import drivers
from drivers.dialect import Dialect
from drivers.exchange import Reply
from drivers.shipped import locate
from drivers.signal_roles import Contact, Lists, PowerContacts, Resistor, SignalLine, Signals, TapLine
from drivers.text.binding import bind
from drivers.text.document import read
from drivers.text.faults import Faults, Place
from drivers.trouble import LinkFault, ReplyFault

DIALECTS = Path(drivers.__file__).parent / "dialects"


def dialect(name: str) -> Dialect:
    faults = Faults()
    path = locate(name, DIALECTS, "dialect", Place(name), faults)
    assert path is not None
    bound = bind(Dialect, read(path), "dialect", faults)
    assert bound is not None
    return bound.model


SCANNER = Lists("scanner", dialect("scpi-scanner"))
CELLS = Lists("cells", dialect("scpi-tap-supply"))
PLAIN = Lists("cells", dialect("plain-tap-supply"))
RELAYS = Lists("relays", dialect("scpi-contacts"))


def reply(*fields: str) -> Reply:
    return Reply("scanner", fields, 0.0)


def test_one_question_for_a_list_of_channels() -> None:
    """SCPI-1999 vol. 1, 8.3.2: a channel list is written (@1,2,3)."""
    job = SCANNER.ask("volts", ["101", "102", "111"])
    assert job.messages == ("MEAS:VOLT:DC? (@101,102,111)",)
    assert job.fields == 1
    assert SCANNER.answers(reply("1.0E-1,-2E-6,+3.3"), "volts", ["101", "102", "111"]) == [0.1, -2e-6, 3.3]


def test_one_question_a_channel_where_a_family_knows_no_lists() -> None:
    job = PLAIN.ask("volts", ["1", "2"])
    assert sum("?" in message for message in job.messages) == job.fields == 2
    assert PLAIN.answers(reply("3.7", "3.8"), "volts", ["1", "2"]) == [3.7, 3.8]


def test_an_overload_is_no_number() -> None:
    """SCPI-1999 vol. 1, 7.2.1.4: 9.9E37 is infinity."""
    volts = SCANNER.answers(reply("9.9E37,1.5"), "volts", ["101", "102"])
    assert math.isnan(volts[0])
    assert volts[1] == 1.5


@pytest.mark.parametrize("text", ["1.0", "1.0,2.0,3.0", "1.0,", "1.0;2.0", "one,two"])
def test_an_answer_of_another_length_is_refused(text: str) -> None:
    with pytest.raises(ReplyFault):
        SCANNER.answers(reply(text), "volts", ["101", "102"])


def test_what_a_reply_carries_is_raised() -> None:
    lost = Reply("scanner", (), 0.0, LinkFault("scanner", "no answer in time"))
    with pytest.raises(LinkFault):
        SCANNER.answers(lost, "volts", ["101"])


@pytest.mark.parametrize(
    ("wanted", "what", "value"), [(4.7e3, "resistance", 4.7e3), ("open", "open", None), ("short", "short", None)]
)
def test_a_resistor_is_a_resistance_open_or_a_short(wanted: Any, what: str, value: float | None) -> None:
    deed = Resistor("decade", dialect("scpi-resistor")).to(wanted)
    assert (deed.what, deed.value) == (what, value)
    assert "?" in deed.job.messages[-1]  # it proves itself


def test_a_tap_speaks_of_its_own_channel() -> None:
    tap = TapLine(CELLS, "3", SCANNER, "103", 1.0, Contact(RELAYS, "13"))
    assert "(@3)" in tap.volts(3.7).job.messages[0]
    assert "(@3)" in tap.on.job.messages[0]
    assert "(@13)" in tap.contact.close.job.messages[0]


def test_a_removal_opens_power_first_and_b_minus_last() -> None:
    line = SignalLine(Resistor("decade", dialect("scpi-resistor")), Contact(RELAYS, "4"), SCANNER, "111")
    tap = TapLine(CELLS, "1", SCANNER, "101", 1.0, Contact(RELAYS, "11"))
    power = PowerContacts(Contact(RELAYS, "1"), Contact(RELAYS, "2"), Contact(RELAYS, "3"))
    signals = Signals(power, line, None, (tap,))
    assert [contact.channel for contact in signals.contacts] == ["1", "3", "4", "11", "2"]
    assert [speaker.name for speaker in signals.speakers] == ["relays", "decade", "scanner", "cells"]
    assert Signals().contacts == []
