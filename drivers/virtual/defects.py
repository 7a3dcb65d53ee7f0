"""Defects: ways in which a virtual charger is wrong, on purpose, with a size. Data, and three operators on a charger.

A change names a value in a charger file by its path ("id_bands.0.id.1"; in a list also "last") and says what becomes
of it:

    "+size", "-40 mV"     add: a quantity of the value's own kind, or a share of the value ("+6 %")
    "*size", "*150 %"     scale: by a share
    anything else         set: the value, list or mapping that stands there (nothing: the key is taken out)

Several operators in one text act in their order: "+40 mV +size". The result is checked as a charger file again.
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any

from pydantic import Field, GetCoreSchemaHandler, GetJsonSchemaHandler, model_validator
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema

from drivers.shipped import locate
from drivers.text.binding import Bound, Written, bind
from drivers.text.document import Listing, Mapped, Node, Scalar, find, plain, read
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.measures import refuse
from drivers.text.quantity import UNIT_IN_CODE, UNITS, QuantityFault, parse
from drivers.text.si import si
from drivers.virtual.charger_features import Part
from drivers.virtual.charger_file import Algorithm, ChargerFile
from drivers.virtual.imperfection import generator

DEFECTS = Path(__file__).parent / "defects"
NEWEST = 1
SIZE = "size"
LAST = "last"
_TERM = re.compile(r"\s*([+\-*])\s*([^+\-*]+?)\s*(?=[+\-*]|$)")


def quantity_of(text: str) -> tuple[float, str]:
    """Any quantity of the table of units, in the unit used in code, and its dimension. Raises QuantityFault."""
    unit = text.strip().rpartition(" ")[2]
    dimension = next((name for name, units in UNITS.items() if unit in units), "voltage")
    return parse(text, dimension), dimension


@dataclass(frozen=True)
class Size:
    """One size, drawn or declared: in the unit used in code."""

    value: float
    dimension: str

    def __str__(self) -> str:
        if self.dimension == "ratio":
            return f"{self.value * 100.0:.4g} %"
        return si(self.value, UNIT_IN_CODE[self.dimension])


@dataclass(frozen=True)
class Term:
    """One operator and its operand; None: the size that was drawn."""

    sign: str
    operand: Size | None

    def on(self, value: float, dimension: str, drawn: Size | None) -> float:
        """The value after this operator. Raises ValueError for kinds that cannot meet."""
        operand = self.operand or drawn
        if operand is None:
            raise ValueError("the change needs a size; none was drawn")
        share = operand.dimension == "ratio"
        if self.sign == "*":
            return value * operand.value
        if not share and operand.dimension != dimension:
            raise ValueError(f"{operand} is a {operand.dimension}; it cannot be added to a {dimension}")
        step = operand.value * value if share else operand.value
        return value + step if self.sign == "+" else value - step


@dataclass(frozen=True)
class Change:
    """What becomes of one value: operators, or (None) the value that stands in the file is set."""

    terms: tuple[Term, ...] | None

    @property
    def sized(self) -> bool:
        return any(term.operand is None for term in self.terms or ())

    def applied(self, text: str, drawn: Size | None) -> str:
        """A quantity as written, after all operators. Raises ValueError (QuantityFault where it is no quantity)."""
        value, dimension = quantity_of(text)
        for term in self.terms or ():
            value = term.on(value, dimension, drawn)
        if not math.isfinite(value):
            raise ValueError(f'"{text}" does not stay finite')
        if dimension == "ratio":
            return f"{value * 100.0:.9g} %"
        return f"{value:.9g} {UNIT_IN_CODE[dimension]}"


def change_of(text: str) -> Change:
    """Read one change. Raises ValueError for an operator without operand, or with one that is no quantity."""
    if text.strip() == SIZE:
        raise ValueError('"size" alone says nothing; expected "+size", "-size" or "*size"')
    if not text.lstrip().startswith(("+", "-", "*")):
        return Change(None)
    terms, end = [], 0
    while match := _TERM.match(text, end):
        terms.append(Term(match[1], None if match[2] == SIZE else _operand(match[1], match[2])))
        end = match.end()
    if end != len(text):
        raise ValueError(f'"{text}": expected operators +, -, * with a quantity or "size", such as "+40 mV +size"')
    return Change(tuple(terms))


def _operand(sign: str, text: str) -> Size:
    found = Size(*quantity_of(text))
    if sign == "*" and found.dimension != "ratio":
        raise ValueError(f'"{text}" is a {found.dimension}; a scale is a share such as "150 %"')
    return found


class _Changing:
    """Reads what stands behind a path of `change`."""

    @staticmethod
    def read(value: Any) -> Change:
        if isinstance(value, Change):
            return value
        try:
            return change_of(value) if isinstance(value, str) else Change(None)
        except ValueError as fault:
            raise refuse(str(fault)) from fault

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"description": 'set this, or operators with a quantity or "size"', "examples": ["+size", "-40 mV"]}


class _Sized:
    """Reads one quantity of any kind."""

    @staticmethod
    def read(value: Any) -> Size:
        if isinstance(value, Size):
            return value
        try:
            return Size(*quantity_of(str(value)))
        except QuantityFault as fault:
            raise refuse(str(fault)) from fault

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"type": "string", "description": "any quantity", "examples": ["30 mV"]}


class SizeRange(Part):
    """From which size to which one it is drawn."""

    least: Annotated[Size, _Sized()] = Field(alias="from")
    most: Annotated[Size, _Sized()] = Field(alias="to")

    @model_validator(mode="after")
    def _rises(self) -> SizeRange:
        if self.least.dimension != self.most.dimension:
            raise refuse(f"from a {self.least.dimension} to a {self.most.dimension}; both ends are of one kind")
        if not 0.0 < self.least.value <= self.most.value:
            raise refuse(f"from {self.least} to {self.most}: a size is above 0, and 'to' not below 'from'")
        return self


class Fits(Part):
    """What a sound charger must be and have for the defect; all of it."""

    algorithms: tuple[Algorithm, ...] = ()
    has: tuple[str, ...] = Field((), description="paths in the charger file, such as tap_monitor or id_bands.1")
    lacks: tuple[str, ...] = Field((), description="paths that the charger file must not hold")
    cells: Annotated[str, Field(pattern=r"^\d+$")] | None = None


class Defect(Written):
    """One way to be wrong."""

    name: Annotated[str, Field(pattern=r"^[a-z][a-z0-9-]*$")]
    kind: str | None = Field(None, description="the word that a procedure claims; default: the name")
    harm: Annotated[str, Field(min_length=10)]
    fits: Fits = Field(default_factory=Fits, alias="for")
    limits: Annotated[tuple[str, ...], Field(min_length=1)] = Field(description="each must be met by a failing limit")
    size: SizeRange | None = None
    change: Annotated[dict[str, Annotated[Change, _Changing()]], Field(min_length=1)]

    @model_validator(mode="after")
    def _uses_its_size(self) -> Defect:
        used = any(change.sized for change in self.change.values())
        if used and self.size is None:
            raise refuse("the change uses a size; 'size: {from: ..., to: ...}' is missing")
        if self.size is not None and not used:
            raise refuse("a 'size' is given, and no change uses it")
        return self

    @property
    def claimed_as(self) -> str:
        return self.kind or self.name

    def drawn(self, seed: int) -> Size | None:
        """A size out of the range, to three digits; the same for the same seed. None where it has no size."""
        if self.size is None:
            return None
        low, high = self.size.least.value, self.size.most.value
        drawn = float(generator(seed, self.name, SIZE).uniform(low, high))
        return Size(min(max(float(f"{drawn:.3g}"), low), high), self.size.least.dimension)

    def fits_on(self, charger: Bound[ChargerFile]) -> bool:
        """Whether the charger is what the defect is for."""
        model, wanted = charger.model, self.fits
        if wanted.algorithms and model.algorithm not in wanted.algorithms:
            return False
        if wanted.cells is not None and int(wanted.cells) != model.cells:
            return False
        root = charger.document.root
        lacks = all(_node_at(root, path) is None for path in wanted.lacks)
        return lacks and all(_node_at(root, path) is not None for path in wanted.has)


def load_defect(name_or_path: str, faults: Faults, *, place: Place | None = None) -> Bound[Defect] | None:
    """A defect by the bare name of a shipped one, or by path. Faults are added."""
    path = locate(name_or_path, DEFECTS, "defect", place or Place(name_or_path), faults)
    if path is None:
        return None
    try:
        return bind(Defect, read(path), "defect", faults)
    except BadInput as bad:
        faults.found.extend(bad.faults)
        return None


def shipped_defects() -> list[str]:
    """The names of all defects that ship, in order."""
    return sorted(path.stem for path in DEFECTS.glob("*.yaml"))


def spoiled(
    defect: Bound[Defect], size: Size | None, charger: Bound[ChargerFile], faults: Faults
) -> Bound[ChargerFile] | None:
    """The sound charger with the defect in that size. None, and faults added, where no charger comes of it.

    What was changed has its place in the defect's file. The bytes are those of the changed charger: a record that kept
    the sound one's would name a charger that was not rehearsed.
    """
    before, root = len(faults.found), charger.document.root
    for path, change in defect.model.change.items():
        place = defect.place("change", path)
        value = find(defect.document.root, ("change", path))[0]
        try:
            root = _changed(root, tuple(path.split(".")), _Step(change, value, place, size))
        except ValueError as fault:
            faults.add(place, f"{path}: {fault} (on {charger.document.name})")
    if len(faults.found) > before:
        return None
    changed = replace(charger.document, content=_written(root, defect.model.name, size), root=root)
    return bind(ChargerFile, changed, "charger", faults)


def _written(root: Node, defect: str, size: Size | None) -> bytes:
    """A charger as a file that reads the same: JSON is YAML too, and quotes every text as it stands."""
    told = f"# with the defect {defect}{f' of {size}' if size else ''}\n"
    return (told + json.dumps(plain(root), indent=2, ensure_ascii=False) + "\n").encode()


@dataclass(frozen=True)
class _Step:
    """One change with what it sets and where it stands."""

    change: Change
    value: Node
    place: Place
    size: Size | None

    def on(self, node: Node | None) -> Node:
        if self.change.terms is None:
            return self.value
        if not isinstance(node, Scalar) or node.text is None:
            raise ValueError("there is no quantity to change")
        return Scalar(self.place, self.change.applied(node.text, self.size))


def _node_at(node: Node | None, path: str) -> Node | None:
    for part in path.split("."):
        node = _child(node, part)
    return node


def _child(node: Node | None, part: str) -> Node | None:
    if isinstance(node, Mapped):
        return node.entries.get(part)
    if isinstance(node, Listing) and (number := _number_in(node, part)) is not None:
        return node.items[number]
    return None


def _number_in(node: Listing, part: str) -> int | None:
    """Which item of a list a path means: its number, from 0, or its last one. None where there is no such item."""
    if part == LAST:
        return len(node.items) - 1 if node.items else None
    return int(part) if part.isdecimal() and int(part) < len(node.items) else None


def _changed(node: Node | None, path: tuple[str, ...], step: _Step) -> Node:
    """The tree with one value changed; a key may be new in a mapping, and nowhere else. Raises ValueError."""
    if not path:
        return step.on(node)
    part, rest = path[0], path[1:]
    child = _child(node, part)
    if isinstance(node, Mapped):
        made = _changed(child, rest, step)
        return replace(node, entries=_with(node.entries, part, made), keys=_with(node.keys, part, step.place))
    if isinstance(node, Listing) and child is not None:
        items, number = list(node.items), _number_in(node, part)
        assert number is not None
        items[number] = _changed(child, rest, step)
        return replace(node, items=tuple(items))
    raise ValueError(f"there is no '{part}'")


def _with(mapping: Mapping[str, Any], key: str, value: Any) -> dict[str, Any]:
    return {**mapping, key: value}
