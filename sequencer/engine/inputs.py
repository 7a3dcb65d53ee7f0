"""All files of one run, read and checked together: every fault of every file at once, nothing touched."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from drivers.bench_file import BenchFile, load_bench
from drivers.shipped import locate
from drivers.text.binding import Bound, M, bind
from drivers.text.document import Document, compose, read
from drivers.text.faults import BadInput, Faults, Place
from sequencer.engine import consistency, signal_consistency
from sequencer.model.curves import Curve, load_curve
from sequencer.model.order import Order
from sequencer.model.pack import Pack
from sequencer.model.procedure import Procedure, load_procedure
from sequencer.model.specification import Specification

SHIPPED = Path(__file__).resolve().parents[2] / "procedures"  # beside us, whatever the working folder holds
FOLDERS = {
    "procedure": SHIPPED,
    "specification": SHIPPED / "specifications",
    "pack": SHIPPED / "packs",
    "bench": SHIPPED / "benches",
    "order": SHIPPED / "orders",
}


@dataclass(frozen=True)
class Asked:
    """What the command line names: paths or bare names, and changes."""

    procedure: str
    specification: str = "sprayer"
    pack: str | None = None
    bench: str = "virtual"
    changes: Mapping[str, str] = field(default_factory=dict)
    seed: int | None = None
    order: str | None = None


@dataclass(frozen=True)
class Inputs:
    """The checked files of one run."""

    procedure: Bound[Procedure]
    specification: Bound[Specification]
    pack: Bound[Pack]
    bench: BenchFile
    changes: dict[str, str]
    curve: Bound[Curve] | None = None
    order: Bound[Order] | None = None

    @property
    def deviations(self) -> list[str]:
        return [f"parameter {name} was set to {value} on the command line" for name, value in self.changes.items()]

    def documents(self) -> dict[str, Document]:
        """Name inside the record -> the file as read."""
        named = {
            "procedure.yaml": self.procedure.document,
            "specification.yaml": self.specification.document,
            "pack.yaml": self.pack.document,
            "bench.yaml": self.bench.bound.document,
        }
        if self.curve is not None:
            named["curve.yaml"] = self.curve.document
        if self.order is not None:
            named["order.yaml"] = self.order.document
        for dialect in self.bench.dialects.values():
            named[f"dialects/{dialect.model.name}.yaml"] = dialect.document
        return named


def gather(asked: Asked) -> Inputs:
    """Read and check everything. Raises BadInput with all faults of all files."""
    faults = Faults()
    procedure = _procedure(asked, faults)
    specification = _read(Specification, asked.specification, "specification", Place("--spec"), faults)
    pack = _pack(asked, specification, faults)
    bench_path = locate(asked.bench, FOLDERS["bench"], "bench", Place("--bench"), faults)
    bench = None if bench_path is None else load_bench(bench_path, faults)
    curve = _curve(specification, faults)
    order = None if asked.order is None else _read(Order, asked.order, "order", Place("--order"), faults)
    consistency.check(procedure, specification, pack, bench, faults)
    signal_consistency.check(procedure, specification, pack, bench, curve, faults)
    faults.raise_if_any()
    if procedure is None or specification is None or pack is None or bench is None:
        raise AssertionError("a file without faults was not read")
    return Inputs(procedure, specification, pack, bench, dict(asked.changes), curve, order)


def _curve(specification: Bound[Specification] | None, faults: Faults) -> Bound[Curve] | None:
    if specification is None or specification.model.temperature is None:
        return None
    place = specification.place("temperature", "curve")
    beside = Path(specification.document.name).parent
    return load_curve(specification.model.temperature.curve, faults, place, beside)


def _procedure(asked: Asked, faults: Faults) -> Bound[Procedure] | None:
    path = locate(asked.procedure, FOLDERS["procedure"], "procedure", Place("PROCEDURE"), faults)
    document = None if path is None else _document(path, faults)
    return None if document is None else load_procedure(document, asked.changes, faults)


def _pack(asked: Asked, specification: Bound[Specification] | None, faults: Faults) -> Bound[Pack] | None:
    if asked.pack is not None:
        return _read(Pack, asked.pack, "pack", Place("--pack"), faults)
    if specification is None:
        return None
    beside = Path(specification.document.name).parent
    return _read(Pack, specification.model.pack, "pack", specification.place("pack"), faults, beside=beside)


def _read(
    model: type[M], text: str, kind: str, place: Place, faults: Faults, *, beside: Path | None = None
) -> Bound[M] | None:
    path = locate(text, FOLDERS[kind], kind, place, faults, beside=beside)
    document = None if path is None else _document(path, faults)
    return None if document is None else bind(model, document, kind, faults)


def _document(path: Path, faults: Faults) -> Document | None:
    try:
        return read(path)
    except BadInput as bad:
        faults.found.extend(bad.faults)
        return None


def rebind(model: type[M], content: bytes, name: str, kind: str) -> Bound[M]:
    """A model from bytes kept in a record. Raises BadInput."""
    faults = Faults()
    bound = bind(model, compose(content, name), kind, faults)
    faults.raise_if_any()
    assert bound is not None
    return bound


def changes_of(texts: Sequence[str]) -> dict[str, str]:
    """--set NAME=VALUE texts as a mapping. Raises BadInput."""
    faults, changes = Faults(), dict[str, str]()
    for text in texts:
        name, equals, value = text.partition("=")
        if not equals or not name.strip() or not value.strip():
            faults.add(Place("--set"), f"'{text}': NAME=VALUE was expected")
        elif name.strip() in changes:
            faults.add(Place("--set"), f"'{name.strip()}' is set twice")
        else:
            changes[name.strip()] = value.strip()
    faults.raise_if_any()
    return changes
