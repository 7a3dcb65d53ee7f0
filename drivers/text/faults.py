"""Faults in what people wrote: where, what was read, what was expected."""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True, order=True)
class Place:
    """A spot in a file (line and column count from 1; 0 where a file as a whole is meant)."""

    file: str
    line: int = 0
    column: int = 0

    def __str__(self) -> str:
        return f"{self.file}:{self.line}:{self.column}" if self.line else self.file


@dataclass(frozen=True, order=True)
class Fault:
    """One fault of one file; `message` says what was read and what was expected."""

    place: Place
    message: str

    def __str__(self) -> str:
        return f"{self.place}: {self.message}"


class BadInput(Exception):
    """What a person gave cannot be used; carries every fault found. Nothing has been touched."""

    def __init__(self, faults: list[Fault] | tuple[Fault, ...]) -> None:
        self.faults = tuple(sorted(set(faults)))
        super().__init__("\n".join(str(fault) for fault in self.faults))

    def __reduce__(self) -> tuple[type[BadInput], tuple[tuple[Fault, ...]]]:
        return type(self), (self.faults,)


@dataclass
class Faults:
    """A list of faults that grows over several files, so that all can be shown at once."""

    found: list[Fault] = field(default_factory=list)

    def add(self, place: Place, message: str) -> None:
        self.found.append(Fault(place, message))

    def raise_if_any(self) -> None:
        """Raise BadInput with all that was found; do nothing when there is none."""
        if self.found:
            raise BadInput(self.found)
