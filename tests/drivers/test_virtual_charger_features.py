"""The parts of a charger file for ID, thermistor and taps: numbers as written, and every way to get them wrong."""

from __future__ import annotations

import pytest

from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.virtual.charger_file import ChargerFile, read_charger
from drivers.virtual.charger_plan import IdBand, Pin, Window

GOOD = """packmime: charger 1
name: cold frame fan charger
cells: 4
algorithm: cc-cv
stages: [{current: 2.0 A}]
voltage_per_cell: 4.20 V
cutoff: 200 mA
id: {pull_up: 22 kΩ, reference: 5 V, filter: 80 ms, sampled: {every: 10 ms, for: 1 ms}}
id_bands:
  - {id: [820 Ω, 1.22 kΩ], current: 1.0 A}
  - {id: [2.45 kΩ, 3.70 kΩ], current: 2.0 A}
temperature: {start: [25 kΩ, 5 kΩ], run: [28 kΩ, 4 kΩ], hysteresis: 5 %}
tap_monitor: {threshold: 4.24 V, filter: 0.4 s, latch: true, cells: [4, 1]}
fault_latch: mains
clear: 2 s
"""


def model(text: str) -> ChargerFile:
    faults = Faults()
    bound = read_charger(compose(text.encode(), "c.yaml"), faults)
    faults.raise_if_any()
    assert bound is not None
    return bound.model


def test_numbers_of_the_plan() -> None:
    plan = model(GOOD).plan()
    assert plan.id_pin == Pin(22e3, 5.0, 0.08, 0.01, 0.001)
    assert plan.id_bands == (IdBand(820.0, 1220.0, 1.0), IdBand(2450.0, 3700.0, 2.0))
    assert plan.temperature is not None
    assert (plan.temperature.start, plan.temperature.run) == (Window(25e3, 5e3), Window(28e3, 4e3))
    assert plan.temperature.release == Window(pytest.approx(26.6e3), pytest.approx(4.2e3))
    assert plan.tap_monitor is not None
    assert (plan.tap_monitor.cells, plan.tap_monitor.latch, plan.tap_monitor.hysteresis_V) == ((1, 4), True, 0.05)
    assert (plan.fault_latch, plan.clear_s) == ("mains", 2.0)


def test_hysteresis_in_ohms_and_all_cells() -> None:
    plan = model(GOOD.replace("5 %", "300 Ω").replace("[4, 1]", "all")).plan()
    assert plan.temperature is not None
    assert plan.temperature.release == Window(27_700.0, 4300.0)
    assert plan.tap_monitor is not None
    assert plan.tap_monitor.cells == (1, 2, 3, 4)


def test_what_is_left_out_is_not_looked_at() -> None:
    plan = model("\n".join(line for line in GOOD.splitlines()[:7])).plan()
    assert (plan.id_pin, plan.id_bands, plan.temperature, plan.tap_monitor) == (None, (), None, None)
    assert (plan.fault_latch, plan.clear_s) == ("none", None)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("[820 Ω, 1.22 kΩ]", "[1.22 kΩ, 820 Ω]", "id: 1220 Ω does not lie below 820 Ω; a band is written [low, high]"),
        ("[2.45 kΩ", "[1.22 kΩ", "the band up to 1220 Ω overlaps the one from 1220 Ω; an ID would select two currents"),
        ("[820 Ω, 1.22 kΩ]", "[820 Ω]", "id: two resistances were expected"),
        ("[820 Ω, 1.22 kΩ]", "1 kΩ", "id: two resistances were expected"),
        ("[25 kΩ, 5 kΩ]", "[5 kΩ, 25 kΩ]", "a thermistor has its higher resistance at the cold end"),
        ("[28 kΩ, 4 kΩ]", "[24 kΩ, 4 kΩ]", "the 'run' window must hold the 'start' window"),
        ("5 %", "90 %", "the hysteresis is wider than the 'run' window"),
        ("5 %", "5", '"5" has no unit'),
        ("5 %", "-5 %", "between 0 and 100 %"),
        ("[4, 1]", "[0]", 'expected "all", or a list of cells'),
        ("[4, 1]", "[5]", "the tap monitor looks at cell 5; the pack has 4"),
        ("for: 1 ms", "for: 10 ms", "'for' must be shorter than 'every'"),
        ("every: 10 ms, ", "", "'every' is missing"),
        ("fault_latch: mains", "fault_latch: always", "\"always\" is none of 'none', 'removal', 'mains' or 'for good'"),
        ("clear: 2 s", "clear: 2 V", '"2 V" is a voltage; expected a time'),
        ("latch: true, ", "latsh: true, ", "unknown key 'latsh'; did you mean 'latch'?"),
        ("threshold: 4.24 V, ", "", "'threshold' is missing"),
    ],
)
def test_faults_say_where_and_what(old: str, new: str, words: str) -> None:
    assert old in GOOD
    faults = Faults()
    assert read_charger(compose(GOOD.replace(old, new).encode(), "c.yaml"), faults) is None
    assert any(words in str(fault) for fault in faults.found), faults.found
    assert all(fault.place.line for fault in faults.found)


def test_id_without_bands() -> None:
    text = "\n".join(line for line in GOOD.splitlines() if "id_bands" not in line and "- {id" not in line)
    faults = Faults()
    assert read_charger(compose(text.encode(), "c.yaml"), faults) is None
    assert "'id_bands' are missing" in str(faults.found[0])
