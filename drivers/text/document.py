"""YAML as text with its place: every scalar stays what was written, with line and column.

Values are typed later, by the model that reads them, so `010`, dates and `no` are not changed on the way.
Reading goes over ruamel.yaml's composed nodes (YAML 1.2).
"""

from __future__ import annotations

from collections.abc import Container, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import lru_cache
from pathlib import Path
from typing import Any

from drivers.text.faults import BadInput, Fault, Place

MAX_BYTES = 2_000_000  # a file that people write is a screen or ten; more is a mistake


@dataclass(frozen=True)
class Scalar:
    place: Place
    text: str | None  # None: nothing was written


@dataclass(frozen=True)
class Listing:
    place: Place
    items: tuple[Node, ...]


@dataclass(frozen=True)
class Mapped:
    place: Place
    entries: dict[str, Node]
    keys: dict[str, Place]


Node = Scalar | Listing | Mapped


@dataclass(frozen=True)
class Document:
    """One file as read: its bytes, and its nodes with places."""

    name: str
    content: bytes
    root: Node


def read(path: Path, *, name: str | None = None) -> Document:
    """Read and compose one YAML file. Raises BadInput (missing, unreadable, not UTF-8, syntax)."""
    shown = name or str(path)
    try:
        content = path.read_bytes()
    except OSError as reason:
        text = "is a folder; a file was expected" if path.is_dir() else f"cannot be read: {reason.strerror or reason}"
        raise BadInput([Fault(Place(shown), text)]) from reason
    return compose(content, shown)


@lru_cache(maxsize=64)  # a dialect is read once for each instrument that speaks it; documents do not change
def compose(content: bytes, name: str) -> Document:
    """Compose YAML text. Raises BadInput for what is not UTF-8, not YAML, or uses anchors."""
    if len(content) > MAX_BYTES:
        raise BadInput([Fault(Place(name), f"has {len(content)} bytes; at most {MAX_BYTES} were expected")])
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as reason:
        line = content[: reason.start].count(b"\n") + 1
        raise BadInput([Fault(Place(name, line, 1), "is not UTF-8 text")]) from reason
    root = _compose_node(text, name)
    if root is None:
        raise BadInput([Fault(Place(name, 1, 1), "is empty; a YAML mapping was expected")])
    return Document(name, content, root)


def _compose_node(text: str, name: str) -> Node | None:
    from ruamel.yaml import YAML
    from ruamel.yaml.error import MarkedYAMLError, YAMLError

    try:
        node = YAML(pure=True).compose(text)
    except MarkedYAMLError as reason:
        mark = reason.problem_mark or reason.context_mark
        place = Place(name, mark.line + 1, mark.column + 1) if mark else Place(name)
        raise BadInput([Fault(place, f"is not YAML: {reason.problem or reason.context}")]) from reason
    except YAMLError as reason:
        raise BadInput([Fault(Place(name), f"is not YAML: {str(reason).splitlines()[0]}")]) from reason
    return None if node is None else _convert(node, name)


def _convert(node: Any, name: str) -> Node:
    place = Place(name, node.start_mark.line + 1, node.start_mark.column + 1)
    if node.anchor is not None:
        # An alias can make a small file grow without bound; the formats have no use for it.
        raise BadInput([Fault(place, f"anchor '&{node.anchor}' is not part of this format; write the value out")])
    if node.id == "scalar":
        empty = node.style is None and node.value in ("", "~", "null")
        return Scalar(place, None if empty else str(node.value))
    if node.id == "sequence":
        return Listing(place, tuple(_convert(item, name) for item in node.value))
    return _mapped(node, place, name)


def _mapped(node: Any, place: Place, name: str) -> Mapped:
    entries: dict[str, Node] = {}
    keys: dict[str, Place] = {}
    for key_node, value_node in node.value:
        key_place = Place(name, key_node.start_mark.line + 1, key_node.start_mark.column + 1)
        if key_node.id != "scalar":
            raise BadInput([Fault(key_place, "a key must be a word, not a list or a mapping")])
        key = str(key_node.value)
        if key in entries:
            raise BadInput([Fault(key_place, f"key '{key}' stands twice (first in line {keys[key].line})")])
        entries[key] = _convert(value_node, name)
        keys[key] = key_place
    return Mapped(place, entries, keys)


def plain(node: Node) -> Any:
    """The node as str, None, list and dict, for a model to type."""
    if isinstance(node, Scalar):
        return node.text
    if isinstance(node, Listing):
        return [plain(item) for item in node.items]
    return {key: plain(value) for key, value in node.entries.items()}


def find(node: Node, path: tuple[str | int, ...]) -> tuple[Node, Place]:
    """The node as far along `path` as the file goes, and the place of the last key or value met."""
    place = node.place
    for part in path:
        if isinstance(node, Mapped) and part in node.entries:
            place, node = node.keys[str(part)], node.entries[str(part)]
        elif isinstance(node, Listing) and isinstance(part, int) and part < len(node.items):
            node = node.items[part]
            place = node.place
    return node, place


def scalars(node: Node) -> Iterator[Scalar]:
    """Every scalar below a node, in the order of the file."""
    if isinstance(node, Scalar):
        yield node
    elif isinstance(node, Listing):
        for item in node.items:
            yield from scalars(item)
    else:
        for value in node.entries.values():
            yield from scalars(value)


def substitute(node: Node, values: Mapping[str, Node], given: Container[str] = ()) -> Node:
    """Put `values[name]` in the place of every scalar "$name"; names without a value stay as they are.

    given : names whose values were given elsewhere, such as on the command line: a fault of theirs is told there.
    """
    if isinstance(node, Scalar):
        name = (node.text or "").removeprefix("$")
        known = node.text is not None and node.text.startswith("$") and name in values
        if not known:
            return node
        return values[name] if name in given else replace(values[name], place=node.place)
    if isinstance(node, Listing):
        return replace(node, items=tuple(substitute(item, values, given) for item in node.items))
    return replace(node, entries={key: substitute(value, values, given) for key, value in node.entries.items()})
