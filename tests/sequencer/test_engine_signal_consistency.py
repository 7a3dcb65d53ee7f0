"""What bench, pack, curve and procedure cannot do together is said before a run, with its place and a remedy."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from drivers.text.faults import BadInput
from sequencer.engine.inputs import FOLDERS, Asked, gather

CONTACTS = "    contacts: {b_plus: relays.1, b_minus: relays.2, precharge: relays.3, precharge_resistor: 47 Ω}\n"
CURVE = "packmime: curve 1\nname: {name}\n{law}\n"


@pytest.fixture
def refused(tmp_path: Path) -> Any:
    """refused(kind={"old": "new"}, ...): the faults of acceptance with texts of shipped files replaced."""

    def refusing(shipped: str = "acceptance", product: str = "sprayer", **kinds: dict[str, str]) -> str:
        paths = {"procedure": shipped, "specification": product, "pack": product, "bench": "virtual-in-process"}
        for kind, replaced in kinds.items():
            text = (FOLDERS[kind] / f"{paths[kind]}.yaml").read_text("utf-8")
            for old, new in replaced.items():
                assert old in text, old
                text = text.replace(old, new)
            path = tmp_path / f"{kind}.yaml"
            path.write_text(text, "utf-8")
            paths[kind] = str(path)
        asked = Asked(paths["procedure"], paths["specification"], paths["pack"], paths["bench"], {}, 1)
        with pytest.raises(BadInput) as bad:
            gather(asked)
        return str(bad.value)

    return refusing


@pytest.mark.parametrize(
    ("kinds", "where", "words"),
    [
        ({"specification": {"[2.70 kΩ, 3.30 kΩ]": "[1.05 kΩ, 3.30 kΩ]"}}, "specification.yaml", "overlaps"),
        ({"bench": {"    - {supply: cells.4, shunt: 1 Ω ± 0.1 %, meter: scanner.104, contact: relays.14}\n": ""}},
         "bench.yaml", "3 taps are wired; a pack of 5 cells has 4 junctions"),
        ({"specification": {"[2.70 kΩ, 3.30 kΩ]": "[2.70 kΩ, 900 kΩ]"}}, "in-process.yaml", "it can be set to 1 MΩ"),
        ({"pack": {"id: 3.0 kΩ": "id: 2.0 kΩ"}}, "pack.yaml", "lies in no band of the specification"),
        ({"bench": {"  id: {resistor: decade_id, contact: relays.4, sense: scanner.111}\n": ""}}, "procedure",
         "the bench has no 'id' resistor"),
        ({"bench": {CONTACTS: ""}},
         "bench.yaml", "'node.contacts' is missing"),
        ({"procedure": {"to: 4.40 V": "to: 4.70 V"}}, "procedure.yaml", "above the bench's limit for a tap"),
        ({"procedure": {"to: 4.40 V": "to: 6.50 V", "by: 10 mV": "by: 50 mV"}, "bench": {"5 Ah": "5 Ah, tap: 7 V"}},
         "procedure.yaml", "which reach 6 V"),
        ({"procedure": {"beyond: 3 K": "beyond: 90 K"}}, "procedure.yaml", "take a smaller 'beyond'"),
        ({"procedure": {"sweep_id: {cell_voltage: $start": "sweep_id: {cell_voltage: 2.0 V"}}, "procedure.yaml",
         "2 V lies outside the pack's table, 3 V to 4.2 V"),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)  # fmt: skip
def test_bad_input_is_refused_with_place_and_words(refused: Any, kinds: dict[str, Any], where: str, words: str) -> None:
    told = refused(**kinds)
    assert words in told
    line = next(line for line in told.splitlines() if words in line)
    assert where in line
    assert any(part.isdigit() for part in line.split(":")), line  # line and column


def test_a_start_that_the_load_cannot_sink(refused: Any) -> None:
    """1.5 V is what the load's dialect says; a single deeply discharged cell stands at 1.2 V."""
    told = refused(
        "charge-profile",
        product="lantern",
        pack={"cells: 3": "cells: 1", "[0 %, 3.00 V]": "[0 %, 1.00 V]"},
        procedure={"$start": "1.20 V"},
    )
    assert "less than the load 'node_load' can sink its current at, 1.5 V: a higher voltage, or another load" in told


def test_a_pack_of_one_cell_has_none_to_be_lowered(refused: Any) -> None:
    told = refused("tap-offset", pack={"cells: 5": "cells: 1"})
    assert "a pack of one cell has no other cell" in told


def test_a_curve_that_turns_round(refused: Any, tmp_path: Path) -> None:
    (tmp_path / "bent.yaml").write_text(
        CURVE.format(name="bent", law="table: [[0 °C, 30 kΩ], [20 °C, 12 kΩ], [30 °C, 13 kΩ], [50 °C, 4 kΩ]]"), "utf-8"
    )
    told = refused(specification={"curve: ntc-10k-3435": f"curve: {tmp_path / 'bent.yaml'}"})
    assert "bent.yaml" in told
    assert "temperatures must rise and resistances fall from point to point" in told


def test_a_curve_that_is_too_short(refused: Any, tmp_path: Path) -> None:
    """The declared limits lie on it, what must be shown beyond them does not."""
    table = "table: [[-2 °C, 31.5 kΩ], [25 °C, 10 kΩ], [52 °C, 3.84 kΩ]]"
    (tmp_path / "short.yaml").write_text(CURVE.format(name="short", law=table), "utf-8")
    told = refused(specification={"curve: ntc-10k-3435": f"curve: {tmp_path / 'short.yaml'}"})
    assert "-5 °C must be shown; the curve 'short' holds from -2 to 52 °C" in told


def test_every_fault_at_once(refused: Any) -> None:
    told = refused(
        pack={"id: 3.0 kΩ": "id: 2.0 kΩ"},
        procedure={"to: 4.40 V": "to: 4.70 V", "beyond: 3 K": "beyond: 90 K"},
    )
    assert len(told.splitlines()) >= 3


@pytest.mark.parametrize(
    ("kinds", "words"),
    [
        ({"procedure": {"3.88 V": "4.10 V"}}, "reach 4.213 V; at 4.175 V the first stage is declared to end"),
        ({"procedure": {"offset: 50 mV": "offset: 100 mV", "3.88 V": "4.00 V"}}, "at 4.2 V it may stop the charge"),
        ({"bench": {"5 Ah": "5 Ah, tap: 4.0 V"}}, "above the bench's limit for a tap, 4 V"),
        ({"procedure": {"period: 1 min": "period: 4 min"}}, "flow in 132 min; the bench allows for 5 Ah in one run"),
        ({"bench": {"charge: 5 Ah": "charge: 1 Ah"}}, "is less than the pack's capacity"),
        ({"procedure": {"offset: 50 mV": "offset: 0.2 V"}}, "a cell is offset by 100 mV at most"),
        ({"procedure": {"period: 1 min": "period: 1 s"}}, "expected 2 s to 1 h"),
        ({"pack": {"cells: 5": "cells: 1"}}, "a pack of one cell has no other cell to be balanced with"),
    ],
)
def test_taps_that_cannot_be_watched(refused: Any, kinds: dict[str, Any], words: str) -> None:
    assert words in refused("balancing-screening", **kinds)
