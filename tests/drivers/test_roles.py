"""What an instrument does in the bench's words: numbers, settings that prove themselves, states."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.bench_file import DIALECTS
from drivers.dialect import Dialect
from drivers.exchange import Job, Reply
from drivers.roles import Deed, Hands, Load, LoadMode, MainsSwitch, Meter, Speaker, Supply, SupplyMode, number
from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.trouble import InstrumentFault, LinkFault, ReplyFault


def dialect(name: str, change: Callable[[str], str] = str) -> Dialect:
    faults = Faults()
    text = change((DIALECTS / f"{name}.yaml").read_text("utf-8"))
    bound = bind(Dialect, compose(text.encode(), name), "dialect", faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


SUPPLY = Supply("supply", dialect("scpi-supply"))
LOAD = Load("load", dialect("scpi-load"))
METER = Meter("meter", dialect("scpi-meter"))
MAINS = MainsSwitch("mains", dialect("scpi-mains-switch"))
NO_ERROR = '0,"No error"'  # SCPI-1999, volume 2, SYSTem:ERRor


def reply(*fields: str) -> Reply:
    return Reply("it", fields, 0.0)


class Scripted:
    """An exchange that answers what it was given, and remembers what it was asked."""

    def __init__(self, *replies: Reply) -> None:
        self.replies = list(replies)
        self.asked: list[Job] = []
        self.count = 0

    def __call__(self, jobs: Sequence[Job], wait_s: float) -> list[Reply]:
        self.asked += jobs
        return [self.replies.pop(0) for _ in jobs]

    def close(self) -> None: ...


# -- numbers ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("273", 273.0),  # NR1, IEEE 488.2, 8.7.2
        ("+146", 146.0),
        ("-12345", -12345.0),
        ("0.273", 0.273),  # NR2, 8.7.3
        ("+1.2345", 1.2345),
        ("-0.123", -0.123),
        ("2.73E+2", 273.0),  # NR3, 8.7.4
        ("+1.850000000E+01", 18.5),
        (" 12.3 ", 12.3),
        (".5", 0.5),
        ("5.", 5.0),
    ],
)
def test_numbers_as_instruments_answer_them(text: str, value: float) -> None:
    assert number("meter", text) == value


@pytest.mark.parametrize("text", ["9.91E37", "9.9E37", "-9.9E37", "+9.90000000E+37", "1E400", "NAN", "inf", "-INF"])
def test_no_number_is_never_a_value(text: str) -> None:
    """SCPI-1999, volume 1, 7.2.1.4 and 7.2.1.5: infinity is 9.9E37, not a number is 9.91E37."""
    assert math.isnan(number("meter", text))


@pytest.mark.parametrize(
    "text", ["", " ", "1_000", "4,2", "4.2 V", "0x10", "1e", "--1", "1;2", "\u0661", "ON", "+", ".", "1.2.3", "E5"]
)
def test_anything_else_is_a_fault_that_shows_it(text: str) -> None:
    with pytest.raises(ReplyFault, match="number was expected") as caught:
        number("meter_node", text)
    assert caught.value.instrument == "meter_node"
    assert f"'{text}'" in str(caught.value)


@given(st.floats(-8.9e37, 8.9e37), st.sampled_from(["{:+.9E}", "{:.17g}", "{!r}"]))
def test_every_number_comes_back(value: float, form: str) -> None:
    assert number("meter", form.format(value)) == pytest.approx(value, rel=1e-8)


@given(st.text(max_size=12))
def test_any_text_is_a_number_or_a_reply_fault(text: str) -> None:
    with suppress(ReplyFault):
        assert isinstance(number("meter", text), float)


# -- settings ---------------------------------------------------------------------------------------------------


def test_a_setting_is_one_message_with_its_proof() -> None:
    assert SUPPLY.setting("voltage", 18.5).messages == ("VOLT 18.5000;:SYST:ERR?",)
    job = SUPPLY.setting("overvoltage", 22.05)
    assert job.messages == ("VOLT:PROT 22.050;:VOLT:PROT?;:SYST:ERR?",)
    assert job.fields == 2


def test_an_instrument_that_takes_one_command_at_a_time_gets_them_so() -> None:
    slow = Supply("supply", dialect("scpi-supply", lambda text: text.replace("compound: true", "compound: false")))
    job = slow.setting("current_limit", 1.0)
    assert job.messages == ("CURR 1.0000", "CURR?", "SYST:ERR?")
    assert job.fields == 2


def test_an_instrument_without_an_error_queue_is_not_asked_for_it() -> None:
    mute = Supply("supply", dialect("scpi-supply", lambda text: text.replace('confirm: "SYST:ERR?"', "confirm: null")))
    assert mute.setting("voltage", 1.0) == Job("supply", ("VOLT 1.0000",), 0)
    mute.verify(reply(), "voltage", 1.0)
    with pytest.raises(InstrumentFault):
        mute.verify(reply("7"), "current_limit", 1.0)


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, None])
def test_no_value_that_is_none_reaches_an_instrument(value: float | None) -> None:
    with pytest.raises(ValueError, match="supply: 'voltage' takes a finite value"):
        SUPPLY.setting("voltage", value)
    with pytest.raises(ValueError, match="takes no value"):
        SUPPLY.setting("on", 1.0)


def test_a_setting_that_stands_is_accepted() -> None:
    SUPPLY.verify(reply(NO_ERROR), "voltage", 18.5)
    SUPPLY.verify(reply("+4.125000000E+00", '+0,"No error"'), "current_limit", 4.125)
    SUPPLY.verify(reply("1", "0"), "on")
    LOAD.verify(reply('"CURR"', NO_ERROR), "constant_current")
    LOAD.verify(reply("curr", NO_ERROR), "constant_current")


def test_a_refusal_names_instrument_setting_value_and_what_was_said() -> None:
    """SCPI-1999, volume 2, 21.8: -222 is data out of range; the value was not applied."""
    with pytest.raises(InstrumentFault, match=r'supply: refused \'voltage 99\' and said -222,"Data out of range"'):
        SUPPLY.verify(reply('-222,"Data out of range"'), "voltage", 99.0)


@pytest.mark.parametrize("back", ["4.0", "0", "9.91E37", "+1.000000000E+00"])
def test_a_readback_that_differs_is_a_fault(back: str) -> None:
    with pytest.raises(InstrumentFault, match="'current_limit' was set to 4\\.125, reads back"):
        SUPPLY.verify(reply(back, NO_ERROR), "current_limit", 4.125)


@pytest.mark.parametrize("back", ["1", "ON", "", "9.91E37", "2"])
def test_an_output_that_is_not_proven_off_is_a_fault(back: str) -> None:
    with pytest.raises(InstrumentFault, match="'off' was set to 0, reads back"):
        SUPPLY.verify(reply(back, NO_ERROR), "off")


def test_a_readback_that_is_no_number_is_a_reply_fault() -> None:
    with pytest.raises(ReplyFault):
        SUPPLY.verify(reply("four", NO_ERROR), "current_limit", 4.0)


@given(st.floats(0.0, 60.0))
def test_what_an_instrument_of_1_mV_resolution_reads_back_is_accepted(value: float) -> None:
    """Programming resolution 1 mV: common practice, no source."""
    SUPPLY.verify(reply(f"{round(value, 3):.6E}", NO_ERROR), "overvoltage", value)


@given(st.floats(0.01, 60.0), st.sampled_from([0.9, 0.99, 1.01, 1.1]))
def test_one_per_cent_off_is_not(value: float, factor: float) -> None:
    if abs(value * (factor - 1)) > 1e-3:
        with pytest.raises(InstrumentFault):
            SUPPLY.verify(reply(repr(value * factor), NO_ERROR), "overvoltage", value)


def test_a_fault_on_the_way_is_raised_as_it_is() -> None:
    lost = Reply("supply", (), 0.0, LinkFault("supply", "gone"))
    for read in (lambda: SUPPLY.verify(lost, "on"), lambda: SUPPLY.read(lost), lambda: METER.read(lost)):
        with pytest.raises(LinkFault, match="supply: gone"):
            read()


# -- states -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("output", "status", "mode"),
    [
        ("0", "0", SupplyMode.OFF),
        ("0", "256", SupplyMode.OFF),
        ("OFF", "0", SupplyMode.OFF),
        ("1", "256", SupplyMode.CONSTANT_VOLTAGE),
        ("ON", "256", SupplyMode.CONSTANT_VOLTAGE),
        ("1", "1024", SupplyMode.CONSTANT_CURRENT),
        ("1", "1280", SupplyMode.CONSTANT_VOLTAGE),
        ("1", "0", SupplyMode.UNREGULATED),
        ("1", "+2.560000E+02", SupplyMode.CONSTANT_VOLTAGE),
        ("1", "255", SupplyMode.UNREGULATED),
        ("9.91E37", "0", SupplyMode.UNREGULATED),  # what cannot be read is never called off
        ("1", "9.91E37", SupplyMode.UNREGULATED),
    ],
)
def test_supply_modes(output: str, status: str, mode: SupplyMode) -> None:
    """The masks are the dialect's: SCPI-1999 leaves the operation register's bits 8 to 12 to the designer."""
    seen = SUPPLY.read(reply("18.5", "1.25", output, status))
    assert seen.mode == mode
    assert (seen.voltage_V, seen.current_A) == (18.5, 1.25)


@pytest.mark.parametrize(
    ("on", "status", "mode"),
    [
        ("0", "0", LoadMode.OFF),
        ("1", "0", LoadMode.ON),
        ("9.91E37", "0", LoadMode.ON),  # what cannot be read is never called off
        ("1", "4", LoadMode.ON),  # TIME, not a trip
        *[("1", str(bit), LoadMode.TRIPPED) for bit in (1, 2, 8, 16)],
        ("0", "27", LoadMode.TRIPPED),
    ],
)
def test_load_modes(on: str, status: str, mode: LoadMode) -> None:
    """SCPI-1999, QUEStionable register: VOLTage 1, CURRent 2, TIME 4, POWer 8, TEMPerature 16."""
    assert LOAD.read(reply("18.5", "3.75", on, status)).mode == mode


@given(st.integers(0, 32767))
def test_exactly_the_masks_bits_count(status: int) -> None:
    tripped = bool(status & 0b11011)
    assert (LOAD.read(reply("0", "0", "1", str(status))).mode == LoadMode.TRIPPED) is tripped


@pytest.mark.parametrize(("text", "on"), [("1", True), ("0", False), ("OFF", False), ("9.91E37", True)])
def test_mains_are_on_unless_read_to_be_off(text: str, on: bool) -> None:
    assert MAINS.read(reply(text)) is on


def test_a_switch_that_answers_garbage_is_a_fault() -> None:
    with pytest.raises(ReplyFault):
        MAINS.read(reply("MAYBE"))
    with pytest.raises(ReplyFault):
        METER.read(reply("ON"))  # only outputs are on or off


# -- hands ------------------------------------------------------------------------------------------------------


def test_hands_do_all_and_then_raise_the_first_fault() -> None:
    exchange = Scripted(reply('-113,"Undefined header"'), Reply("load", (), 0.0, LinkFault("load", "gone")))
    with pytest.raises(InstrumentFault, match="supply"):
        Hands(exchange, 1.0).do([Deed(SUPPLY, "voltage", 1.0), Deed(LOAD, "current", 0.5)])
    assert [job.instrument for job in exchange.asked] == ["supply", "load"]


def test_hands_ask() -> None:
    speaker = Speaker("meter", METER.dialect)
    assert METER.read(Hands(Scripted(reply("+1.850000000E+01")), 1.0).ask(speaker.reading("volts"))) == 18.5
