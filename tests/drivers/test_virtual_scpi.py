"""The command tree against SCPI-1999 (volume 1, chapters 6 and 7) and IEEE 488.2 (clause 7)."""

from __future__ import annotations

import re
from collections.abc import Iterator

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.virtual.instrument import Instrument
from drivers.virtual.load import Load
from drivers.virtual.mains import MainsSwitch
from drivers.virtual.meter import Meter
from drivers.virtual.parameters import Boolean, Channels, Choice, Number, forms
from drivers.virtual.scpi import KEPT_MESSAGES, Command, Tree
from drivers.virtual.status import ScpiError
from drivers.virtual.supply import Supply

FAMILIES = (Supply, Load, Meter, MainsSwitch)


class Notebook:
    """Writes down what a tree lets be done to it."""

    def __init__(self) -> None:
        self.done: list[tuple[object, ...]] = []

    def note(self, *what: object) -> None:
        self.done.append(what)


TREE = Tree(
    [
        Command(
            "[SOURce:]VOLTage[:LEVel][:IMMediate]",
            "level",
            do=lambda book, value: book.note("volt", value),
            takes=(Number(0, 60, "V", default=5.0),),
            ask=lambda book: "V",
        ),
        Command(
            "[SOURce:]VOLTage:PROTection[:LEVel]",
            "protection",
            do=lambda book, value: book.note("prot", value),
            takes=(Number(0, 66, "V"),),
            ask=lambda book: "P",
        ),
        Command(
            "[SOURce:]CURRent", "current", do=lambda book, value: book.note("curr", value), takes=(Number(0, 15, "A"),)
        ),
        Command("OUTPut[:STATe]", "output", do=lambda book, on: book.note("outp", on), takes=(Boolean(),)),
        Command(
            "FUNCtion", "function", do=lambda book, f: book.note("func", f), takes=(Choice(("CURRent", "VOLTage")),)
        ),
        Command("ROUTe:CLOSe", "close", do=lambda book, c: book.note("clos", c), takes=(Channels((1, 2, 3, 4, 5)),)),
        Command("MEASure:VOLTage", "volts", ask=lambda book: "1"),
        Command("MEASure:CURRent", "amperes", ask=lambda book: "2"),
        Command("*IDN", "identity", ask=lambda book: "me"),
    ]
)


def run(message: str) -> tuple[list[tuple[object, ...]], list[int]]:
    """What a message did, and the errors that it made."""
    book, errors = Notebook(), []
    for step in TREE.compile(message):
        try:
            answer = step.call(book, *step.values)
        except ScpiError as error:
            errors.append(error.number)
        else:
            if step.is_query:
                book.note(answer)
    return book.done, errors


# -- mnemonics -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("mnemonic", "short"),
    [
        ("IMMediate", "IMM"),
        ("DELay", "DEL"),
        ("POLynomial", "POL"),
        ("FORMat", "FORM"),
        ("OUTPut", "OUTP"),
        ("DEFine", "DEF"),
        ("VOLTage", "VOLT"),
        ("RESistance", "RES"),
    ],
)
def test_published_short_forms(mnemonic: str, short: str) -> None:
    """Examples printed in instrument manuals."""
    assert forms(mnemonic) == (short, mnemonic.upper())
    assert published_short_form(mnemonic) == short


def published_short_form(long: str) -> str:
    """SCPI-1999 volume 1, 6.2.1: up to four letters stay; else the first four, or three if the fourth is a vowel.

    That y counts as a vowel is in some manuals only (POLynomial).
    """
    word = long.upper()
    if len(word) <= 4:
        return word
    return word[:3] if word[3] in "AEIOUY" else word[:4]


def mnemonics(family: type[Instrument]) -> Iterator[str]:
    for row in family.tree.table:
        yield from re.findall(r"[A-Za-z]+", row.pattern.removeprefix("*") if row.pattern[0] != "*" else "")


@pytest.mark.parametrize("family", FAMILIES)
def test_every_short_form_in_the_tables_follows_the_rule(family: type[Instrument]) -> None:
    words = list(mnemonics(family))
    assert len(words) > 20
    for word in words:
        assert forms(word)[0] == published_short_form(word), word


@pytest.mark.parametrize("header", ["VOL", "VOLTAG", "OUTPU", "FUNCT"])
def test_abbreviations_between_the_two_forms_are_refused(header: str) -> None:
    """VOL and VOLTAG are printed as invalid ones in an instrument manual."""
    assert run(f"{header} 1") == ([], [-113])


def spellings(pattern: str) -> st.SearchStrategy[str]:
    """Every way to write a header of the table: forms, cases, optional nodes, suffix 1, leading colon."""
    parts: list[st.SearchStrategy[str]] = []
    for optional, word in re.findall(r"(\[)?:?([A-Za-z]+):?\]?", pattern):
        form = st.sampled_from(forms(word)).flatmap(lambda w: st.sampled_from([w, w.lower(), w.title(), w + "1"]))
        parts.append(st.one_of(st.just(""), form) if optional else form)
    return st.tuples(st.sampled_from(["", ":"]), st.tuples(*parts)).map(
        lambda drawn: drawn[0] + ":".join(part for part in drawn[1] if part)
    )


@given(spellings("[SOURce:]VOLTage[:LEVel][:IMMediate]"))
def test_all_spellings_of_a_header_are_one(header: str) -> None:
    assert run(f"{header} 7.5") == ([("volt", 7.5)], [])
    assert run(f"{header}?") == ([("V",)], [])


def test_numeric_suffix_other_than_one_is_out_of_range() -> None:
    assert run("OUTP2 ON") == ([], [-114])
    assert run("OUTP1 ON") == ([("outp", True)], [])


# -- compound messages ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("message", "done", "errors"),
    [
        # SCPI-1999 volume 1, 6.2.4: the path stays after ';', a leading ':' goes to the root, common commands keep it
        ("SOUR:VOLT 1;CURR 2", [("volt", 1.0), ("curr", 2.0)], []),
        ("SOUR:VOLT:PROT 9;LEV 3", [("prot", 9.0), ("volt", 3.0)], []),
        ("VOLT:PROT 9;:VOLT 3", [("prot", 9.0), ("volt", 3.0)], []),
        ("VOLT 1;PROT 9", [("volt", 1.0)], [-113]),
        ("MEAS:VOLT?;CURR?", [("1",), ("2",)], []),
        ("MEAS:VOLT?;*IDN?;CURR?", [("1",), ("me",), ("2",)], []),
        ("SOUR:VOLT 1;OUTP ON", [("volt", 1.0)], [-113]),
        ("SOUR:VOLT 1;:OUTP ON", [("volt", 1.0), ("outp", True)], []),
        (" VOLT   1 ; :OUTP   OFF ", [("volt", 1.0), ("outp", False)], []),
        ("VOLT 99;:OUTP ON", [("outp", True)], [-222]),
        ("NONSENSE 1;:OUTP ON", [("outp", True)], [-113]),
        ("VOLT 1;;OUTP ON", [("volt", 1.0), ("outp", True)], [-102]),
        ("", [], []),
        (";", [], [-102]),
    ],
)
def test_compound_messages(message: str, done: list[tuple[object, ...]], errors: list[int]) -> None:
    assert run(message) == (done, errors)


# -- errors -----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("message", "number"),
    [
        ("VOLT& 5", -101),  # SCPI-1999 volume 2, 21.8.9 gives SETUP& as its example
        ("VÖLT 5", -101),
        ("VOLT:: 5", -102),
        (":", -102),
        ("5", -102),
        ("VOLT,5", -103),
        ("VOLT 5:CURR 2", -103),  # its example: the semicolon omitted after a program message unit
        ("VOLT 5 CURR 2", -131),
        ("VOLT 'five'", -104),
        ("VOLT (@1)", -104),
        ("VOLT #15hello", -104),
        ("VOLT five", -104),
        ("VOLT 1,2", -108),
        ("MEAS:VOLT? 7", -108),
        ("VOLT", -109),
        ("VOLT 1,", -108),
        ("ABCDEFGHIJKLM 1", -112),
        ("MEAS:POW?", -113),
        ("MEAS:VOLT", -113),
        ("*XYZ", -113),
        ("VOLT #HXY", -121),
        ("VOLT 1e99999", -123),
        ("VOLT " + "1" * 300, -124),
        ("VOLT 5 A", -131),
        ("VOLT 5 XV", -131),
        ("OUTP 'ON", -151),
        ("ROUT:CLOS (1)", -171),
        ("ROUT:CLOS (@)", -171),
        (
            "VOLT 61",
            -222,
        ),  # the error for setting a DC supply outside its rating (a supply's manual)
        ("VOLT -1", -222),
        ("VOLT INF", -222),
        ("ROUT:CLOS (@6)", -222),
        ("OUTP MAYBE", -224),
        ("FUNC RES", -224),
    ],
)
def test_wrong_messages_make_their_error(message: str, number: int) -> None:
    assert run(message) == ([], [number])


@given(st.text(max_size=40))
def test_no_text_does_more_than_make_an_error(text: str) -> None:
    run(text)


@given(st.text(alphabet="VOLTSCUR:;?,*@()#\"'1 .-eE+m", max_size=30))
def test_no_scrambled_command_does_more_than_make_an_error(text: str) -> None:
    run(text)


# -- parameters ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "value"),
    [
        # IEEE 488.2, 7.7.2: NR1, NR2, NR3 as manuals print them, and non-decimal numbers
        ("12", 12.0),
        ("+12", 12.0),
        ("12.3", 12.3),
        ("+1.2345", 1.2345),
        (".5", 0.5),
        ("5.", 5.0),
        ("1.2E+1", 12.0),
        ("1.2e1", 12.0),
        ("1.2 E 1", 12.0),
        ("#B11", 3.0),
        ("#HF", 15.0),
        ("#Q17", 15.0),
        ("12V", 12.0),
        ("12 v", 12.0),
        ("1200 mV", 1.2),
        ("1200MV", 1.2),  # IEEE 488.2, 7.7.3: M is milli; mega is MA
        ("500 UV", 0.0005),
        ("MIN", 0.0),
        ("MAXimum", 60.0),
        ("DEF", 5.0),
    ],
)
def test_numbers(text: str, value: float) -> None:
    done, errors = run(f"VOLT {text}")
    assert errors == []
    assert done == [("volt", pytest.approx(value, rel=1e-12))]


def test_default_only_where_declared() -> None:
    assert run("CURR DEF") == ([], [-104])


@pytest.mark.parametrize(
    ("text", "on"), [("ON", True), ("off", False), ("1", True), ("0", False), ("0.4", False), ("-3", True)]
)
def test_booleans(text: str, on: bool) -> None:
    """SCPI-1999 volume 1, 7.3: a number is rounded, and 0 is OFF."""
    assert run(f"OUTP {text}") == ([("outp", on)], [])


@pytest.mark.parametrize(
    ("text", "channels"),
    [("(@1)", (1,)), ("(@1,3:5)", (1, 3, 4, 5)), ("(@5:3)", (5, 4, 3)), ("( @ 1 , 2 )", (1, 2)), ("(@1:1)", (1,))],
)
def test_channel_lists(text: str, channels: tuple[int, ...]) -> None:
    assert run(f"ROUT:CLOS {text}") == ([("clos", channels)], [])


@given(st.floats(0, 60))
def test_a_number_is_read_as_it_was_written(value: float) -> None:
    assert run(f"VOLT {value!r}")[0] == [("volt", value)]


# -- the tree as a whole --------------------------------------------------------------------------------------


def test_compiled_messages_are_bounded() -> None:
    for index in range(3 * KEPT_MESSAGES):
        TREE.compile(f"VOLT {index / 100}")
    assert TREE.compile.cache_info().currsize == KEPT_MESSAGES  # type: ignore[attr-defined]


def test_help_names_every_command() -> None:
    lines = list(TREE.help())
    assert "[SOURce:]VOLTage[:LEVel][:IMMediate] 0 to 60 V (DEF 5)  -- level" in lines
    assert "MEASure:VOLTage?  -- volts" in lines
    assert len(lines) == sum((row.do is not None) + (row.ask is not None) for row in TREE.table)
