"""`packmime judge`: the same record, the same verdicts; another rule is a deviation; nothing is overwritten."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from sequencer.engine.inputs import FOLDERS


@pytest.fixture
def record(packmime: Callable, tmp_path: Path) -> Path:
    """A charger that regulates so high that its voltage lies in the guard band of a limit written for it."""
    chargers = tmp_path / "charger.yaml"
    from drivers.virtual.charger_file import CHARGERS

    text = (CHARGERS / "sprayer.yaml").read_text("utf-8")
    chargers.write_text(text, "utf-8")
    spec = tmp_path / "spec.yaml"
    # U of the voltage is about 0.3 mV per cell (meter of 6 1/2 digits, 100 V range): 4.1999 V lies inside by less.
    limits = (FOLDERS["specification"] / "sprayer.yaml").read_text("utf-8")
    spec.write_text(limits.replace("4.20 V ± 25 mV", "[4.10 V, 4.2001 V]"), "utf-8")
    words = ("--spec", spec, "--pack", "sprayer", "--charger", chargers, "--bench", "virtual-in-process")
    assert packmime("run", "charge-profile", *words, "--out", tmp_path / "r").exit_code == 5
    return tmp_path / "r"


def read(record: Path, number: str, name: str = "verdicts") -> dict:
    return json.loads((record / "judged" / number / f"{name}.json").read_text("utf-8"))


def words(document: dict) -> dict[str, str]:
    return {verdict["limit"]: verdict["verdict"] for verdict in document["verdicts"]}


def test_judged_again(packmime: Callable, record: Path) -> None:
    first = (record / "judged/001/verdicts.json").read_bytes()
    assert words(read(record, "001"))["charge.voltage"] == "conditional pass"

    again = packmime("judge", record, "--json")
    assert again.exit_code == 5
    assert json.loads(again.stdout) == read(record, "002") == read(record, "001")
    assert read(record, "002", "judgement")["changed"] == []

    simple = packmime(
        "judge", record, "--rule", "simple", "--reason", "agreed with the customer", "--person", "A. Gardener"
    )
    assert simple.exit_code == 0, simple.output
    assert words(read(record, "003"))["charge.voltage"] == "pass"
    assert "Deviation: every limit was judged by the rule 'simple'" in simple.output
    assert "Changed: charge.voltage: verdict pass, was conditional pass" in simple.output
    told = read(record, "003", "judgement")
    assert told["person"] == "A. Gardener"
    assert any("rule 'simple'" in deviation for deviation in told["deviations"])
    assert any("charge.voltage" in change for change in told["changed"])
    assert "rule &#39;simple&#39;" in (record / "judged/003/report.html").read_text("utf-8")

    assert (record / "judged/001/verdicts.json").read_bytes() == first
    assert (record / "verdicts.json").read_bytes() == (record / "judged/003/verdicts.json").read_bytes()


def test_another_specification_is_a_deviation(packmime: Callable, record: Path) -> None:
    result = packmime("judge", record, "--spec", "sprayer")
    assert result.exit_code == 0
    assert "another specification" in read(record, "002", "judgement")["deviations"][0]


def test_a_changed_record_is_not_judged(packmime: Callable, record: Path) -> None:
    samples = record / "data/samples.parquet"
    samples.chmod(0o644)
    content = bytearray(samples.read_bytes())
    content[len(content) // 2] ^= 1
    samples.write_bytes(content)
    result = packmime("judge", record)
    assert result.exit_code == 2
    assert "samples.parquet: was changed since sealing" in result.stderr


def test_what_is_no_record(packmime: Callable, tmp_path: Path) -> None:
    assert packmime("judge", tmp_path).exit_code == 2
    assert packmime("judge", tmp_path / "nowhere").exit_code == 2
    result = packmime("judge", tmp_path, "--rule", "lenient")
    assert result.exit_code == 2
    assert "'simple' or 'guarded'" in result.stderr
