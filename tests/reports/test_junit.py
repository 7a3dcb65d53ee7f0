"""The JUnit file of a judgement, held against the rules of the JUnit schema (windyroad JUnit.xsd)."""

import re
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest

from reports.junit import restamp, stamp

# timestamp: ISO8601_DATETIME_PATTERN of JUnit.xsd.
TIMESTAMP = r"[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}"


@pytest.fixture(scope="module")
def suite(reported: Path) -> ET.Element:
    root = ET.parse(reported / "junit.xml").getroot()
    assert root.tag == "testsuites"
    (found,) = root
    return found


def test_counts(suite: ET.Element) -> None:
    # JUnit.xsd: failure = assertion not met, error = unexpected; here 2 of fail and conditional fail, 1 inconclusive.
    counts = {name: suite.get(name) for name in ("tests", "failures", "errors", "skipped")}
    assert counts == {"tests": "9", "failures": "2", "errors": "1", "skipped": "2"}
    for name, tag in (("failures", "failure"), ("errors", "error"), ("skipped", "skipped"), ("tests", "testcase")):
        assert len(list(suite.iter(tag))) == int(counts[name] or -1)


def test_required_attributes_of_the_schema(suite: ET.Element) -> None:
    assert suite.tag == "testsuite"
    assert re.fullmatch(TIMESTAMP, suite.get("timestamp", ""))
    assert suite.get("hostname")
    assert suite.get("name")
    assert float(suite.get("time", "nan")) == pytest.approx(2680.0)
    for case in suite.iter("testcase"):
        assert case.get("name")
        assert case.get("classname")
        assert float(case.get("time", "nan")) >= 0
    for tag in ("failure", "error"):
        assert all(one.get("type") and one.get("message") for one in suite.iter(tag))


def test_times_are_those_of_the_judgement_and_its_evidence(suite: ET.Element) -> None:
    assert suite.get("timestamp") == "2026-12-01T08:44:41"
    cases = {case.get("name"): case for case in suite.iter("testcase")}
    assert cases["charge.voltage"].get("time") == "990.000"  # computed: 2590 s - 1600 s of evidence
    assert cases["charge.current_after_end"].get("time") == "0.000"


def test_each_case_carries_the_whole_verdict_as_text(suite: ET.Element) -> None:
    case = next(case for case in suite.iter("testcase") if case.get("name") == "charge.voltage")
    told = {one.get("name"): one.get("value") for one in case.iter("property")}
    assert told["verdict"] == "conditional pass"
    assert (told["value"], told["guard_band"], told["evidence"]) == ("4.2211", "0.006", "1600.0 2590.0")
    assert "expected" not in told, "what is null is left out"


def test_words_and_reasons(suite: ET.Element) -> None:
    case = next(case for case in suite.iter("testcase") if case.get("name") == "charge.current_after_end")
    skipped = case.find("skipped")
    assert skipped is not None
    assert (skipped.get("type"), skipped.get("message")) == ("not run", "The run was stopped before the charge ended.")


def test_nothing_of_the_machine_is_left(reported: Path) -> None:
    text = (reported / "junit.xml").read_text(encoding="utf-8")
    assert str(reported) not in text
    assert "site-packages" not in text


@pytest.mark.parametrize(
    ("utc", "text"),
    [("2026-12-01T08:44:41.5+00:00", "2026-12-01T08:44:41"), (None, "1970-01-01T00:00:00")],
)
def test_stamp(utc: object, text: str) -> None:
    assert re.fullmatch(TIMESTAMP, stamp(utc))
    assert stamp(utc) == text


def test_a_limit_judged_twice_has_two_names(tmp_path: Path) -> None:
    path = tmp_path / "junit.xml"
    path.write_text("<testsuites><testsuite><testcase/><testcase/></testsuite></testsuites>", encoding="utf-8")
    restamp(path, [{"limit": "a", "verdict": "pass"}] * 2, {}, {})
    assert [case.get("name") for case in ET.parse(path).iter("testcase")] == ["a", "a (2)"]


def test_a_case_too_few_is_a_fault(tmp_path: Path) -> None:
    path = tmp_path / "junit.xml"
    path.write_text("<testsuites><testsuite><testcase/></testsuite></testsuites>", encoding="utf-8")
    with pytest.raises(ValueError, match="1 test cases for 2 verdicts"):
        restamp(path, [{}, {}], {}, {})
