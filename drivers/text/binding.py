"""From a file to a checked model: every fault of the file at once, each with its place."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any, Generic, Protocol, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError
from pydantic.fields import FieldInfo

from drivers.text.document import Document, Mapped, Node, Scalar, find, plain
from drivers.text.faults import Faults, Place
from drivers.text.nearest import unknown

KINDS = {  # and the newest version of each that is read
    "procedure": 1,
    "specification": 1,
    "pack": 1,
    "order": 1,
    "bench": 1,
    "dialect": 1,
    "charger": 1,
    "findings": 1,
    "curve": 1,
    "defect": 1,
}


class Written(BaseModel):
    """Base of all models of files that people write: unknown keys are refused, values do not change."""

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True)


M = TypeVar("M", bound=Written)


@dataclass(frozen=True)
class Bound(Generic[M]):
    """A checked model beside the document it came from, so that later checks can name a place."""

    model: M
    document: Document

    def place(self, *path: str | int) -> Place:
        return find(self.document.root, path)[1]


class _ErrorDetails(Protocol):
    def __getitem__(self, key: str) -> Any: ...


def bind(model: type[M], document: Document, kind: str, faults: Faults, *, root: Node | None = None) -> Bound[M] | None:
    """Read `document` as a file of `kind`; add its faults to `faults` and return None where there are any."""
    node = root or document.root
    if not _kind_is_right(node, kind, faults):
        return None
    content = plain(node)
    content.pop("packmime")
    try:
        return Bound(model.model_validate(content), document)
    except ValidationError as error:
        for detail in error.errors(include_url=False):
            _report(model, node, detail, faults)
        return None


def _kind_is_right(node: Node, kind: str, faults: Faults) -> bool:
    if not isinstance(node, Mapped):
        faults.add(node.place, f"a mapping was expected that opens with 'packmime: {kind} {KINDS[kind]}'")
        return False
    head = node.entries.get("packmime")
    text = head.text if isinstance(head, Scalar) else None
    match = re.fullmatch(r"(\w+) (\d+)", text or "")
    place = head.place if head is not None else node.place
    if match is None:
        faults.add(place, f"must open with 'packmime: {kind} {KINDS[kind]}'")
    elif match[1] != kind:
        faults.add(place, f"is a {match[1]} file; a {kind} file was expected here")
    elif int(match[2]) > KINDS[kind]:
        faults.add(place, f"is {kind} version {match[2]}; this packmime reads up to {KINDS[kind]}: update packmime")
    elif match[2] == "0":
        faults.add(place, f"{kind} version 0 never existed; write 'packmime: {kind} {KINDS[kind]}'")
    else:
        return True
    return False


def _report(model: type[Written], root: Node, detail: Any, faults: Faults) -> None:
    path = tuple(part for part in detail["loc"] if isinstance(part, (str, int)))
    split = _split_by_comma(root, path) if detail["type"] == "extra_forbidden" else None
    node, place = find(root, path)
    given = isinstance(node, Scalar) and str(node.place).startswith("--")  # on the command line, and not in the file
    faults.add(node.place if given else place, split or _words(model, path, detail))


def _split_by_comma(root: Node, path: tuple[str | int, ...]) -> str | None:
    """What was meant by a key that begins with a digit after a value that ends with one: `{current: 3,0 A}`."""
    parent, name = find(root, path[:-1])[0], str(path[-1])
    if not isinstance(parent, Mapped) or name not in parent.entries or not name[:1].isdigit():
        return None
    keys = list(parent.entries)
    before = keys[keys.index(name) - 1] if keys.index(name) else None
    value, rest = parent.entries.get(before or ""), parent.entries[name]
    if not isinstance(value, Scalar) or not isinstance(rest, Scalar) or rest.text is not None:
        return None
    if not (value.text or "")[-1:].isdigit():
        return None
    cut = f'{before}: a comma parts the entries of a mapping, so "{value.text},{name}" was cut in two'
    return f"{cut}; write {value.text}.{name}"


def _words(model: type[Written], path: tuple[str | int, ...], detail: Any) -> str:
    name = str(path[-1]) if path else ""
    match detail["type"]:
        case "fault":
            return str(detail["ctx"]["words"]) if not path else f"{name}: {detail['ctx']['words']}"
        case "missing":
            inside = f" in '{path[-2]}'" if len(path) > 1 and isinstance(path[-2], str) else ""
            return f"'{name}' is missing{inside}"
        case "extra_forbidden":
            return unknown(name, _valid_keys(model, path[:-1]))
        case "value_error":
            return str(detail["ctx"]["error"])
        case "literal_error":
            return f'{name}: "{detail["input"]}" is none of {detail["ctx"]["expected"]}'
        case "model_type" | "dict_type":
            return f"{name}: a mapping was expected"
        case "list_type" | "tuple_type":
            return f"{name}: a list was expected"
        case "string_type":
            return f"{name}: a text was expected"
        case "int_parsing" | "int_type" | "int_from_float":
            return f'{name}: "{detail["input"]}" is not a whole number'
    return f'{name}: {detail["msg"]} (read: "{detail["input"]}")'


def _valid_keys(model: type[BaseModel], path: tuple[str | int, ...]) -> list[str]:
    """The keys of the model that stands at `path`."""
    current: type[BaseModel] | None = model
    for part in path:
        if current is None:
            return []
        if isinstance(part, str) and (field := _field(current, part)) is not None:
            current = _inner_model(field.annotation)
    return [field.alias or name for name, field in current.model_fields.items()] if current else []


def _field(model: type[BaseModel], key: str) -> FieldInfo | None:
    return next((f for name, f in model.model_fields.items() if key in (name, f.alias)), None)


def _inner_model(annotation: Any) -> type[BaseModel] | None:
    """The model inside Optional[X], list[X], dict[str, X]."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    inner = (_inner_model(part) for part in getattr(annotation, "__args__", ()))
    return next((model for model in inner if model is not None), None)
