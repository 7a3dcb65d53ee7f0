"""SCPI command trees from a table, and messages compiled against them. Sans-IO.

Headers: SCPI-1999, volume 1, chapter 6 (short and long forms, optional nodes, numeric suffixes, path of compound
messages); message syntax: IEEE 488.2, clause 7. An error does not end a message: the units after it are still done.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any

from drivers.virtual.parameters import Parameter, forms
from drivers.virtual.status import ScpiError

KEPT_MESSAGES = 256  # compiled messages kept per tree; settings differ each time, so it must be bounded
LONGEST_MNEMONIC = 12  # IEEE 488.2, 7.6.1.4.1

_UNITS = re.compile(r"""(?:[^;"']|"[^"]*"|'[^']*')*""")
_PARTS = re.compile(r"""(?:[^,"'(]|"[^"]*"|'[^']*'|\([^)]*\)?)*""")
_HEADER = re.compile(r"(:?[A-Za-z]\w*(?::[A-Za-z]\w*)*|\*[A-Za-z]+)(\?)?(?:\s+(.*))?", re.ASCII | re.DOTALL)
_PATTERN = re.compile(r"(\[)?:?([*A-Za-z]+):?(\])?")


@dataclass(frozen=True)
class Command:
    """One row of a command table.

    pattern : "[SOURce:]VOLTage[:LEVel]"; capitals are the short form, [] may be left out.
    do      : called with the instrument and the parameters' values; None where there is only a query.
    ask     : called with the instrument and the query's parameters, returns the answer; None where there is none.
    """

    pattern: str
    help: str
    do: Callable[..., None] | None = None
    takes: tuple[Parameter, ...] = ()
    ask: Callable[..., str] | None = None
    asks: tuple[Parameter, ...] = ()


@dataclass
class _Node:
    children: dict[str, _Node] = field(default_factory=dict)
    command: Command | None = None


@dataclass(frozen=True)
class Step:
    """One message unit, ready to run: `call(instrument, *values)`; `is_query` where it answers."""

    call: Callable[..., Any]
    values: tuple[object, ...]
    is_query: bool


def _fail(instrument: object, number: int) -> None:
    raise ScpiError(number)


class Tree:
    """The commands of one family of instruments."""

    def __init__(self, table: Iterable[Command]) -> None:
        self.table = tuple(table)
        self._root = _Node()
        for command in self.table:
            self._add(command)
        self.compile: Callable[[str], tuple[Step, ...]] = lru_cache(KEPT_MESSAGES)(self._compile)

    def _add(self, command: Command) -> None:
        nodes = [self._root]
        for opened, mnemonic, _ in _PATTERN.findall(command.pattern):
            deeper = [_child(node, mnemonic) for node in nodes]
            nodes = nodes + deeper if opened else deeper
        for node in nodes:
            if node is not self._root and node.command is None:
                node.command = command

    def _compile(self, message: str) -> tuple[Step, ...]:
        """The steps of one message (without its terminator); a wrong unit becomes a step that fails."""
        steps: list[Step] = []
        path = self._root
        for text in _split_units(message):
            try:
                step, path = self._unit(text, path)
            except ScpiError as error:
                step = Step(_fail, (error.number,), False)
            steps.append(step)
        return tuple(steps)

    def _unit(self, text: str, path: _Node) -> tuple[Step, _Node]:
        match = _HEADER.fullmatch(text)
        if match is None:
            raise ScpiError(_header_fault(text))
        header, question, rest = match.groups()
        if header[0] == "*":
            command, parent = _known(self._root.children.get(header.upper())), path  # keeps the path
        else:
            command, parent = self._find(header, self._root if header[0] == ":" else path)
        call, places = (command.ask, command.asks) if question else (command.do, command.takes)
        if call is None:
            raise ScpiError(-113)
        return Step(call, _read_all(rest or "", places), bool(question)), parent

    def _find(self, header: str, start: _Node) -> tuple[Command, _Node]:
        node = parent = start
        for mnemonic in header.removeprefix(":").split(":"):
            parent, node = node, _descend(node, mnemonic.upper())
        return _known(node), parent

    def help(self) -> Iterator[str]:
        """The table as lines: header, parameters, what it does."""
        for row in self.table:
            if row.do is not None:
                yield f"{row.pattern} {', '.join(place.words() for place in row.takes)}".rstrip() + f"  -- {row.help}"
            if row.ask is not None:
                asked = ", ".join(f"[{place.words()}]" if place.optional else place.words() for place in row.asks)
                yield f"{row.pattern}? {asked}".rstrip() + f"  -- {row.help}"


def _child(node: _Node, mnemonic: str) -> _Node:
    short, long = forms(mnemonic)
    child = node.children.setdefault(short, _Node())
    node.children[long] = child
    return child


def _known(node: _Node | None) -> Command:
    if node is None or node.command is None:
        raise ScpiError(-113)
    return node.command


def _descend(node: _Node, mnemonic: str) -> _Node:
    """One step down; a numeric suffix 1 is the same as none (SCPI-1999, volume 1, 6.2.5.2)."""
    found = node.children.get(mnemonic)
    if found is not None:
        return found
    if len(mnemonic) > LONGEST_MNEMONIC:
        raise ScpiError(-112)
    bare = mnemonic.rstrip("0123456789")
    found = node.children.get(bare)
    if found is None:
        raise ScpiError(-113)
    if int(mnemonic[len(bare) :]) != 1:
        raise ScpiError(-114)
    return found


def _split_units(message: str) -> list[str]:
    """The message's units, stripped; empty ones only where a unit is missing between two separators."""
    if '"' not in message and "'" not in message:
        units = [unit.strip() for unit in message.split(";")]
    else:
        units = [unit.strip() for unit in _pieces(_UNITS, message, ";")]
    if not units[-1]:  # an empty message, or one that ends with its separator
        units.pop()
    return units


def _pieces(piece: re.Pattern[str], text: str, separator: str) -> Iterator[str]:
    """`text` cut at the separators that stand outside of quotes; what is never closed stays one piece."""
    start = 0
    while True:
        match = piece.match(text, start)
        end = match.end() if match else start
        if end < len(text) and text[end] != separator:  # a quote that is never closed
            end = len(text)
        yield text[start:end]
        if end >= len(text):
            return
        start = end + 1


def _read_all(text: str, places: tuple[Parameter, ...]) -> tuple[object, ...]:
    texts = [part.strip() for part in _pieces(_PARTS, text, ",")] if text.strip() else []
    if len(texts) > len(places):
        raise ScpiError(-108)
    if len(texts) < sum(not place.optional for place in places):
        raise ScpiError(-109)
    if not all(texts):
        raise ScpiError(-103 if len(texts) > 1 else -109)
    for part in texts:
        if part[0] in "\"'" and (len(part) < 2 or part[-1] != part[0]):
            raise ScpiError(-151)
    return tuple(place.read(part) for place, part in zip(places, texts, strict=False))


def _header_fault(text: str) -> int:
    """Which error a unit makes whose header cannot be read."""
    if not text.isascii() or any(letter < " " and not letter.isspace() for letter in text):
        return -101
    match = re.match(r":?[A-Za-z*][\w:*]*\??", text, re.ASCII)
    if match is None:
        return -102 if not text or text[0] in ":*,?" or text[0].isdigit() else -101
    following = text[match.end() : match.end() + 1]
    if following == ",":
        return -103
    return -102 if not following or following in "?:*\"'" or following.isspace() else -101
