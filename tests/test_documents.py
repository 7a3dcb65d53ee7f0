"""Every example in the documentation is a file that this program reads."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import procedures
from drivers.bench import Bench
from drivers.dialect import Dialect
from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from drivers.virtual.charger_file import ChargerFile
from drivers.virtual.defects import Defect
from sequencer.model.curves import Curve
from sequencer.model.order import Order
from sequencer.model.pack import Pack
from sequencer.model.procedure import load_procedure
from sequencer.model.specification import Specification

ROOT = Path(procedures.__file__).resolve().parents[1]
PAGES = [ROOT / "procedures" / "README.md", ROOT / "drivers" / "README.md"]
MODELS = {
    "specification": Specification,
    "pack": Pack,
    "curve": Curve,
    "bench": Bench,
    "dialect": Dialect,
    "charger": ChargerFile,
    "order": Order,
    "defect": Defect,
}


def examples() -> list[tuple[str, str, str]]:
    found = []
    for page in PAGES:
        text = page.read_text("utf-8") if page.is_file() else ""
        for block in re.findall(r"```yaml\n(.*?)```", text, re.DOTALL):
            match = re.match(r"packmime: (\w+) 1", block)
            if match:
                found.append((page.parent.name, match[1], block))
    return found


@pytest.mark.parametrize(("page", "kind", "text"), examples(), ids=lambda value: value if len(value) < 20 else "")
def test_every_example_is_sound(page: str, kind: str, text: str) -> None:
    faults = Faults()
    document = compose(text.encode(), f"{page}/README.md")
    if kind == "procedure":
        load_procedure(document, {}, faults)
    else:
        bind(MODELS[kind], document, kind, faults)
    assert [str(fault) for fault in faults.found] == []


def test_each_kind_of_file_has_an_example() -> None:
    kinds = {kind for _, kind, _ in examples()}
    assert {"procedure", "specification", "pack", "curve"} <= kinds
