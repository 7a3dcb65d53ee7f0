"""The bench file: which instruments there are, how they are wired, what the bench may reach."""

from __future__ import annotations

import re
from datetime import date
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field

from drivers.text.binding import Written
from drivers.text.measures import (
    AmpereHours,
    Amperes,
    Measure,
    Ohms,
    PositiveAmperes,
    PositiveOhms,
    PositiveVolts,
    Seconds,
    Volts,
    refuse,
)
from drivers.wiring import ChannelRef, Wiring


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


def _iso_date(value: str) -> str:
    try:
        real = re.fullmatch(r"\d{4}-\d{2}-\d{2}", value, re.ASCII) and date.fromisoformat(value)
    except ValueError:
        real = None
    if not real:
        raise refuse(f'"{value}" is not a date; expected such as "2027-03-01"')
    return value


class CertifiedVolts(_Part):
    """One line of a calibration certificate: expanded uncertainty U (k = 2) in a range."""

    range: PositiveVolts
    U: PositiveVolts


class CertifiedAmperes(_Part):
    range: PositiveAmperes
    U: PositiveAmperes


class CertifiedOhms(_Part):
    """Of a programmable resistor as set, or of a scanner as it measures resistance."""

    range: PositiveOhms
    U: PositiveOhms


class Certificate(_Part):
    """The calibration certificate of one instrument; overrides the accuracy of its family."""

    number: str
    due: Annotated[str, AfterValidator(_iso_date)]
    voltage: CertifiedVolts | None = None
    current: CertifiedAmperes | None = None
    resistance: CertifiedOhms | None = None


class Instrument(_Part):
    address: str = Field(description="VISA resource name, or 'virtual' on a virtual bench")
    dialect: str = Field(description="name of a shipped dialect, or path of a dialect file")
    serial: str | None = Field(None, description="must stand in the identity that the instrument answers")
    certificate: Certificate | None = None


class Limits(_Part):
    """What the bench may reach; no procedure and no command line option moves these."""

    node: PositiveVolts
    current: PositiveAmperes
    charge: AmpereHours
    tap: PositiveVolts = Field(4.6, description="highest voltage of a cell tap")
    time: Seconds = 12 * 3600.0
    equal_readings: int = Field(
        50, ge=0, description="so many readings equal to the last digit are a dead meter; 0: off"
    )


class Hardware(_Part):
    """What acts without the program. "none" is listed on each report."""

    emergency_stop: str = "none"
    node_clamp: str = "none"
    fuse: str = "none"
    watchdog_relay: str = "none"

    def missing(self) -> list[str]:
        return [name.replace("_", " ") for name, value in self if value == "none"]


class VirtualNode(_Part):
    """How slow the virtual supply is: command delay, then a first-order settling."""

    delay: Seconds = 0.005
    settling: Seconds = 0.01


def _scale(value: Any) -> float:
    try:
        number = float(value)
    except (TypeError, ValueError) as reason:
        raise refuse(f'"{value}" is not a number; expected such as 1') from reason
    if not 0 <= number <= 100:
        raise refuse(f'"{value}" must lie between 0 and 100')
    return number


class Trouble(_Part):
    """What shall go wrong on a virtual bench, and when."""

    at: Seconds = Field(description="moment of the bench's time at which it happens")
    does: Literal["load-trips", "supply-limits", "mains-lost", "mains-open", "charger-starts", "mute", "overload"] = (
        Field(description="what happens; see drivers/README.md")
    )
    instrument: str | None = Field(None, description="of 'mute' and 'overload': whose")
    lasts: Seconds | None = Field(None, description="after so long it is gone again; left out: for good")


class Virtual(_Part):
    """The physical truth of a virtual bench. A bench with this section drives no hardware."""

    transport: Literal["sockets", "in-process"] = "sockets"
    charger: str | None = Field(None, description="name of a shipped virtual charger, or path of a charger file")
    leads: Ohms = Field(0.008, description="wiring and contacts between charger and node, beyond ballast and shunt")
    node: VirtualNode = VirtualNode()
    meter_delay: Seconds = 0.0
    supply_limit: Amperes | None = Field(None, description="a supply that goes into current limit early (trouble)")
    shunt_factor: Annotated[float, BeforeValidator(_scale)] = Field(
        1.0, description="true over declared shunt (trouble)"
    )
    errors: Annotated[float, BeforeValidator(_scale)] = Field(1.0, description="scale of gain, offset, drift, noise")
    node_offset: Volts = 0.0
    tap_resistance: Ohms = Field(0.5, description="source resistance of each cell tap, beyond its shunt")
    contact_walk: Ohms = Field(0.02, description="how far a signal contact's resistance wanders between closings")
    resistor_glitch: Seconds = Field(0.02, description="a programmable resistor is open for so long while it switches")
    welded: ChannelRef | None = Field(None, description="a contact that never opens (trouble)")
    ambient: Annotated[float, Measure("temperature")] = 23.0
    troubles: tuple[Trouble, ...] = Field((), description="what goes wrong by order, at a moment of the bench's time")


class Bench(Written):
    """One set of wired instruments."""

    name: str
    visa: str = Field("@py", description="VISA library: '@py', '@ivi' or the path of one")
    line_frequency: Literal["50 Hz", "60 Hz"] = "50 Hz"
    instruments: dict[str, Instrument]
    wiring: Wiring
    limits: Limits
    hardware: Hardware = Hardware()
    virtual: Virtual | None = None

    def wired(self) -> list[tuple[str, str]]:
        """(place in the wiring, name of the instrument there), in a fixed order; several places may share one."""
        return [(where, what if isinstance(what, str) else what.instrument) for where, what, _ in self.wiring.places()]

    def used(self) -> list[str]:
        """Names of the instruments that the wiring uses, each once, in the order of the wiring."""
        return list(dict.fromkeys(name for _, name in self.wired()))
