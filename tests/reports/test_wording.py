"""Words and roundings of a report."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from reports import wording


def test_the_seven_words_of_design_7_and_no_other() -> None:
    assert set(wording.VERDICTS) == {
        "pass", "conditional pass", "conditional fail", "fail", "inconclusive", "not run", "not applicable",
    }  # fmt: skip
    with pytest.raises(ValueError, match="'passed' is no verdict; the seven are fail, "):
        wording.verdict_word("passed")


@given(st.text(st.characters(codec=None)))
def test_any_text_fits_into_a_page(text: str) -> None:
    told = wording.clean(text)
    told.encode("utf-8")
    assert len(told) == len(text)
    # XML 1.0, 2.2: what a document may hold.
    assert all(c in "\t\n\r" or " " <= c <= "\ud7ff" or "\ue000" <= c <= "\ufffd" or c >= "\U00010000" for c in told)


@pytest.mark.parametrize(
    ("value", "text"),
    [(None, "–"), ("", ""), ("null", "null"), ("None", "None"), (True, "yes"), (0, "0"), (False, "no")],
)
def test_null_and_what_looks_like_it(value: object, text: str) -> None:
    assert wording.clean(value) == text


def test_terminal_text_is_one_line_without_escapes() -> None:
    assert wording.sentence("a\r\n\x1b[31mb\x07") == "a \ufffd[31mb\ufffd"


@pytest.mark.parametrize(
    ("value", "U", "unit", "text"),
    [
        # JCGM 100, 7.2.6: at most two significant digits of the uncertainty, the value to the same place.
        (4.20314, 0.0019, "V", "4.2031 V ± 1.9 mV"),
        (0.15021, 0.0042, "A", "150.2 mA ± 4.2 mA"),
        (4.2, None, "V", "4.2 V"),
        ("cc-cv", 0.1, "", "cc-cv"),
        (True, None, "", "yes"),
        (None, None, "V", "–"),
    ],
)
def test_value_with_uncertainty(value: object, U: float | None, unit: str, text: str) -> None:
    assert wording.measured(value, U, unit) == text


@pytest.mark.parametrize(
    ("p", "text"), [(1.0, "> 99.9 %"), (0.9772, "97.7 %"), (0.5, "50.0 %"), (0.0, "< 0.1 %"), (None, "–")]
)
def test_no_probability_is_rounded_to_a_certainty(p: float | None, text: str) -> None:
    assert wording.probability(p) == text


@pytest.mark.parametrize(
    ("time_s", "text"),
    [(0, "0:00.0"), (65.25, "1:05.2"), (3599.94, "59:59.9"), (3599.96, "1:00:00"), (7325.4, "2:02:05")],
)
def test_clock_of_the_run(time_s: float, text: str) -> None:
    assert wording.since_start(time_s) == text


@pytest.mark.parametrize(
    ("stamp", "text"),
    [
        ("2026-12-01T08:00:00Z", "2026-12-01 08:00:00 UTC"),
        ("2026-12-01T08:00:00.250+00:00", "2026-12-01 08:00:00 UTC"),
        ("2026-12-01T08:00:00+02:00", "2026-12-01T08:00:00+02:00"),
        (None, "–"),
    ],
)
def test_dates(stamp: object, text: str) -> None:
    assert wording.utc(stamp) == text


def test_tally_is_worst_first() -> None:
    assert wording.tally(["pass", "not run", "fail", "pass"]) == "1 fail, 1 not run, 2 pass"
    assert wording.tally([]) == "nothing was judged"


@pytest.mark.parametrize(
    ("low", "high", "expected", "text"),
    [(4.175, 4.225, None, "4.175 V to 4.225 V"), (None, 0.01, None, "below 10 mV"), (None, None, "cc-cv", "cc-cv")],
)
def test_limits(low: float | None, high: float | None, expected: object, text: str) -> None:
    assert wording.limits(low, high, expected, "V") == text


@pytest.mark.parametrize(
    ("low", "high", "uncertainty", "unit", "words"),
    [
        (3980.0, 4020.0, 4.2, "Ω", "3.980 kΩ to 4.020 kΩ, U 4.2 Ω"),
        (4.2404, 4.2504, 0.0022, "V", "4.240 V to 4.250 V, U 2.2 mV"),  # 4.2504 - 4.2404 is a hair below 0.01
        (1.0, 1.0, None, "V", "1 V to 1 V"),
        (-1e308, 1e308, 1.0, "Ω", None),
    ],
)
def test_brackets(low: float, high: float, uncertainty: float | None, unit: str, words: str | None) -> None:
    told = wording.bracket(low, high, uncertainty, unit)
    assert words is None or told == words


def test_spans_of_temperature() -> None:
    assert wording.celsius(2.219, 2.688) == "2.22 °C to 2.69 °C"
    assert wording.celsius(-1.04, 3.96) == "-1.0 °C to 4.0 °C"
