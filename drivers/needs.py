"""What each role must be able to do: the settings, readings and states that a dialect of the role must have."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

Role = Literal[
    "supply", "load", "meter", "mains switch", "resistor", "contacts", "scanner", "tap supply", "thermometer"
]


@dataclass(frozen=True)
class Need:
    """settings and readings by name (a reading with the fields it must give), states that `status` must name.

    may: readings that a dialect can do without; where they are, these are their fields.
    valued: settings that carry a {value}. channelled: settings and readings of one {channel} out of several.
    """

    settings: frozenset[str]
    readings: dict[str, frozenset[str]] = field(default_factory=dict)
    states: frozenset[str] = frozenset()
    valued: frozenset[str] = frozenset()
    channelled: frozenset[str] = frozenset()
    may: dict[str, frozenset[str]] = field(default_factory=dict)


NEEDS: dict[str, Need] = {
    "supply": Need(
        settings=frozenset({"clear", "voltage", "current_limit", "overvoltage", "on", "off"}),
        readings={"state": frozenset({"voltage", "current", "output", "status"})},
        states=frozenset({"constant_voltage", "constant_current"}),
        valued=frozenset({"voltage", "current_limit", "overvoltage"}),
    ),
    "load": Need(
        settings=frozenset({"clear", "constant_current", "current", "overcurrent", "on", "off"}),
        readings={"state": frozenset({"voltage", "current", "input", "status"})},
        states=frozenset({"tripped"}),
        valued=frozenset({"current", "overcurrent"}),
    ),
    "meter": Need(
        settings=frozenset({"clear", "range", "integration"}),
        readings={"volts": frozenset({"volts"})},
        valued=frozenset({"range", "integration"}),
    ),
    "mains switch": Need(
        settings=frozenset({"clear", "on", "off"}),
        readings={"state": frozenset({"output"})},
    ),
    "resistor": Need(
        settings=frozenset({"clear", "resistance", "open", "short"}),
        valued=frozenset({"resistance"}),
    ),
    "contacts": Need(
        settings=frozenset({"clear", "close", "open"}),
        channelled=frozenset({"close", "open"}),
    ),
    "scanner": Need(
        settings=frozenset({"clear"}),
        readings={"volts": frozenset({"volts"})},
        channelled=frozenset({"volts", "ohms"}),
        may={"ohms": frozenset({"ohms"})},
    ),
    "tap supply": Need(
        settings=frozenset({"clear", "voltage", "current_limit", "on", "off"}),
        readings={"volts": frozenset({"volts"})},
        valued=frozenset({"voltage", "current_limit"}),
        channelled=frozenset({"voltage", "current_limit", "on", "off", "volts"}),
    ),
    "thermometer": Need(
        settings=frozenset({"clear"}),
        readings={"celsius": frozenset({"celsius"})},
    ),
}
