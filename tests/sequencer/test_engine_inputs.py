"""Every fault of every file, named with file, line and column, before anything is touched.

Which faults there are: what a person of the trade gets wrong in such files (common practice, no source).
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from drivers.text.faults import BadInput, Fault
from sequencer.engine.inputs import FOLDERS, Asked, Inputs, changes_of, gather

NAMES = {"procedure": "charge-profile", "specification": "sprayer", "pack": "sprayer", "bench": "virtual-in-process"}


class Files:
    """Copies of what ships, with some texts replaced."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        for kind, name in NAMES.items():
            self.path(kind).write_bytes((FOLDERS[kind] / f"{name}.yaml").read_bytes())

    def path(self, kind: str) -> Path:
        return self.folder / f"{kind}.yaml"

    def change(self, kind: str, old: str, new: str) -> None:
        text = self.path(kind).read_text("utf-8")
        assert old in text, old
        self.path(kind).write_text(text.replace(old, new, 1), "utf-8")

    def gather(self, pack: bool = True, **changes: str) -> Inputs:
        procedure, spec, packed, bench = (str(self.path(kind)) for kind in NAMES)
        return gather(Asked(procedure, spec, packed if pack else None, bench, changes))

    def faults(self, **changes: str) -> tuple[Fault, ...]:
        with pytest.raises(BadInput) as bad:
            self.gather(**changes)
        return bad.value.faults

    def at(self, fault: Fault) -> tuple[str, str]:
        """Kind of the file, and the text that stands where the fault points."""
        path = Path(fault.place.file)
        line = path.read_text("utf-8").splitlines()[fault.place.line - 1]
        return path.stem, line[fault.place.column - 1 :]


@pytest.fixture
def files(tmp_path: Path) -> Files:
    return Files(tmp_path)


SPEC, PACK, BENCH, PROCEDURE = "specification", "pack", "bench", "procedure"
ONE_FAULT = [
    # wrong units, no units, commas
    (SPEC, "3.0 A ± 5 %", "3.0 V ± 5 %", SPEC, "current", '"3.0 V" is a voltage; expected a current'),
    (SPEC, "3.0 A ± 5 %", "3.0 ± 5 %", SPEC, "current", "has no unit"),
    (SPEC, "3.0 A ± 5 %", '"3,0 A ± 5 %"', SPEC, "current", "3,0"),
    (SPEC, "response: 1 s", "response: 0 s", SPEC, "response", "must be above 0 s"),
    (PACK, "180 mΩ", "180 mA", PACK, "resistance", "is a current; expected a resistance"),
    (PACK, "2.5 Ah", "2.5 A", PACK, "capacity", "expected a charge"),
    (PACK, "4.0 A", "-4.0 A", PACK, "rated_current", "must be above 0 A"),
    (PROCEDURE, "3.70 V", "3.70 A", PROCEDURE, "cell_voltage", "is a current; expected a voltage"),
    (BENCH, "10 mΩ ± 0.1 %", "10 mΩ", BENCH, "shunt", "has no tolerance"),
    # unknown keys and words, with the nearest valid one
    (SPEC, "cutoff:", "cut_off:", SPEC, "cut_off", "did you mean 'cutoff'?"),
    (SPEC, "rule: guarded", "rule: garded", SPEC, "rule", "'simple' or 'guarded'"),
    (SPEC, "algorithm: cc-cv", "algorithm: ccv", SPEC, "algorithm", "'cc-cv'"),
    (SPEC, "ends: true", "ends: yes", SPEC, "ends", "expected true or false"),
    (PROCEDURE, "- remove: {}", "- removes: {}", PROCEDURE, "removes", "did you mean 'remove'?"),
    (PROCEDURE, "- charge.ends", "- charge.end", PROCEDURE, "charge.end", "did you mean 'charge.ends'?"),
    (BENCH, "dialect: scpi-load", "dialect: scpi-lod", BENCH, "", "did you mean 'scpi-load'?"),
    # impossible limits and tables
    (SPEC, "4.20 V ± 25 mV", "[4.3 V, 4.1 V]", SPEC, "voltage_per_cell", "nothing can meet it"),
    (SPEC, "{below: 4.25 V}", "{below: 4.1 V, above: 4.2 V}", SPEC, "end_voltage_per_cell", "nothing can meet it"),
    (SPEC, "4.20 V ± 25 mV", "4.50 V ± 25 mV", SPEC, "voltage_per_cell", "above the pack's guard bound 4.35 V"),
    (SPEC, "rating_current: 4.5 A", "rating_current: 2 A", SPEC, "rating_current", "below the largest declared"),
    (PACK, "[5 %, 3.30 V]", "[5 %, 2.30 V]", PACK, "ocv", "must rise"),
    (PACK, "[0 %, 3.00 V]", "[1 %, 3.00 V]", PACK, "ocv", "from 0 % to 100 %"),
    (PACK, "cells: 5", "cells: 5.5", PACK, "cells", "not a whole number"),
    (PROCEDURE, "3.70 V", "4.70 V", PROCEDURE, "cell_voltage", "outside the pack's table"),
    (PROCEDURE, "3.70 V", "4.07 V", PROCEDURE, "cell_voltage", "the first stage would be over at once"),
    (PROCEDURE, '"20"', '"0.5"', PROCEDURE, "compression", "between 1 and 100"),
    # what the bench lacks or may not
    (BENCH, "load: node_load", "load: node_lod", BENCH, "load", "did you mean 'node_load'?"),
    (BENCH, "    load: node_load\n", "", BENCH, "node", "'load' is missing"),
    (BENCH, "node: 26 V", "node: 20 V", BENCH, "node", "the full pack reaches 21 V"),
    (BENCH, "charge: 5 Ah", "charge: 2 Ah", BENCH, "charge", "less than the pack's capacity"),
    (BENCH, "current: 12 A", "current: 4 A", BENCH, "current", "below the 4.5 A that the charger can deliver"),
    (BENCH, "ballast: 100 mΩ", "ballast: 500 mΩ", BENCH, "ballast", "exceed the pack's resistance"),
    (
        BENCH,
        "{address: virtual, dialect: scpi-supply}",
        "{address: COM3, dialect: scpi-supply}",
        BENCH,
        "address",
        "virtual",
    ),
    (SPEC, "rating_current: 4.5 A", "rating_current: 11.9 A", BENCH, "supply", "must carry 14.88 A"),
    # a procedure that proves nothing, or does what cannot be done
    (PROCEDURE, "    expect: charges\n", "", PROCEDURE, "packmime", "a dead charger looks like a safe one"),
    (PROCEDURE, "  - charge:", "  - remove: {}\n  - charge:", PROCEDURE, "packmime", "step 3 (charge) needs a pack"),
    (PROCEDURE, "  - remove: {}", "  - insert: {cell_voltage: 3.7 V}", PROCEDURE, "packmime", "while one is in"),
    # versions, kinds, YAML itself
    (SPEC, "specification 1", "specification 2", SPEC, "specification 2", "version 2"),
    (PACK, "pack 1", "bench 1", PACK, "bench 1", "a pack file was expected"),
    (PROCEDURE, "name: charge-profile", "name: a\nname: b", PROCEDURE, "name: b", "stands twice"),
    (PROCEDURE, "steps:", "steps: [", PROCEDURE, "- insert", "not YAML"),
]


@pytest.mark.parametrize(("kind", "old", "new", "where", "points_at", "said"), ONE_FAULT)
def test_one_fault(files: Files, kind: str, old: str, new: str, where: str, points_at: str, said: str) -> None:
    files.change(kind, old, new)
    told = [(*files.at(fault), fault.message) for fault in files.faults()]
    assert any(
        at == where and text.lstrip("{[ ").startswith(points_at) and said in message for at, text, message in told
    ), told


def test_what_ships_has_no_fault(files: Files) -> None:
    assert files.gather().deviations == []


def test_all_faults_of_all_files_at_once(files: Files) -> None:
    for kind, old, new in [
        (PROCEDURE, "- charge.ends", "- charge.end"),
        (SPEC, "cutoff:", "cut_off:"),
        (SPEC, "rule: guarded", "rule: garded"),
        (PACK, "2.5 Ah", "2.5 A"),
        (BENCH, "errors: 1", "errors: many"),
        (BENCH, "load: node_load", "load: meter_node"),
    ]:
        files.change(kind, old, new)
    faults = files.faults(stat="3.6 V")
    named = [Path(fault.place.file).stem if fault.place.line else fault.place.file for fault in faults]
    assert {"procedure", "specification", "pack", "bench"} <= set(named)
    assert named.count("specification") == 2
    assert any(
        str(fault).startswith("--set stat=3.6 V: unknown parameter 'stat'; did you mean 'start'?") for fault in faults
    )


@pytest.mark.parametrize(
    ("asked", "place"),
    [
        (Asked("no-such.yaml", bench="virtual-mains-in-process"), "PROCEDURE"),
        (Asked("acceptence", bench="virtual-mains-in-process"), "PROCEDURE"),
        (Asked("charge-profile", "no-such", bench="virtual-mains-in-process"), "--spec"),
        (Asked("charge-profile", pack="no-such", bench="virtual-mains-in-process"), "--pack"),
        (Asked("charge-profile", bench="no-such"), "--bench"),
    ],
)
def test_a_file_that_is_missing(asked: Asked, place: str) -> None:
    with pytest.raises(BadInput) as bad:
        gather(asked)
    assert [fault.place.file for fault in bad.value.faults] == [place]


def test_a_pack_that_the_specification_names_and_nobody_has(files: Files) -> None:
    files.change(SPEC, "pack: sprayer", "pack: spryer")
    with pytest.raises(BadInput) as bad:
        files.gather(pack=False)
    (fault,) = bad.value.faults
    assert files.at(fault) == ("specification", "pack: spryer") or files.at(fault) == ("specification", "spryer")
    assert "sprayer" in fault.message


def test_a_pack_beside_the_specification(files: Files) -> None:
    files.change(SPEC, "pack: sprayer", "pack: pack.yaml")
    assert files.gather(pack=False).pack.model.name == "sprayer pack"


def test_changes_are_deviations_and_are_kept(files: Files) -> None:
    inputs = files.gather(start="3.60 V")
    assert inputs.deviations == ["parameter start was set to 3.60 V on the command line"]
    insert = inputs.procedure.model.steps[0].insert
    assert insert is not None
    assert insert.cell_voltage == 3.6


@pytest.mark.parametrize(
    ("texts", "said"), [(["a"], "NAME=VALUE"), (["a="], "NAME=VALUE"), (["a=1", "a=2"], "set twice")]
)
def test_changes_that_cannot_be_read(texts: list[str], said: str) -> None:
    with pytest.raises(BadInput, match=said):
        changes_of(texts)


def test_every_file_that_was_read_goes_into_the_record_byte_for_byte(files: Files) -> None:
    documents = files.gather().documents()
    assert {name.partition("/")[0] for name in documents} == {f"{kind}.yaml" for kind in NAMES} | {
        "dialects",
        "curve.yaml",
    }
    for kind in NAMES:
        assert documents[f"{kind}.yaml"].content == files.path(kind).read_bytes()


@pytest.mark.parametrize("break_it", [lambda text: text[: len(text) // 2], lambda text: "", lambda text: "- 1\n- 2\n"])
@pytest.mark.parametrize("kind", list(NAMES))
def test_half_a_file_none_and_a_list_are_faults_and_no_crash(
    files: Files, kind: str, break_it: Callable[[str], str]
) -> None:
    path = files.path(kind)
    path.write_text(break_it(path.read_text("utf-8")), "utf-8")
    assert any(Path(fault.place.file).stem == kind for fault in files.faults())
