"""A virtual bench in plain numbers, so that the process that plays it needs neither YAML nor models to start."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from drivers.virtual.charger_plan import ChargerPlan
from drivers.virtual.troubles import Trouble

if TYPE_CHECKING:
    from drivers.bench import Bench
    from drivers.virtual.charger_file import ChargerFile
    from drivers.wiring import Channel, Shunt

MOST_CHANNEL = 999_999  # six digits: parameters.py
PLAIN = "plain-"  # dialects whose name begins so are spoken to the second virtual family


@dataclass(frozen=True)
class TapShunt:
    """The shunt of a cell tap; `tolerance` is a half width, relative."""

    ohm: float
    tolerance: float


@dataclass(frozen=True)
class Plan:
    """places: (place in the wiring, instrument's name). Units in the names; `errors` scales all imperfections.

    channels: (place, channel there), for instruments with several; plain: instruments of the second family.
    """

    places: tuple[tuple[str, str], ...]
    charger: ChargerPlan
    line_Hz: float
    shunt_ohm: float
    shunt_tolerance: float  # half width, relative
    shunt_factor: float
    ballast_ohm: float
    leads_ohm: float
    delay_s: float
    settling_s: float
    meter_delay_s: float
    supply_most_A: float | None
    errors: float
    node_offset_V: float
    channels: tuple[tuple[str, int], ...] = ()
    plain: tuple[str, ...] = ()
    precharge_ohm: float | None = None  # None: no power contacts
    taps: tuple[TapShunt, ...] = ()
    tap_ohm: float = 0.5
    contact_walk_ohm: float = 0.02
    glitch_s: float = 0.02
    welded: tuple[str, int] | None = None  # instrument and channel
    ambient_C: float = 23.0
    troubles: tuple[Trouble, ...] = ()

    def to_json(self) -> dict[str, Any]:
        return asdict(self)

    @classmethod
    def from_json(cls, content: dict[str, Any]) -> Plan:
        plan = dict(content)
        for key in ("places", "channels"):
            plan[key] = tuple((where, what) for where, what in plan[key])
        plan["taps"] = tuple(TapShunt(**tap) for tap in plan["taps"])
        plan["plain"] = tuple(plan["plain"])
        plan["troubles"] = tuple(Trouble(**trouble) for trouble in plan.get("troubles", ()))
        plan["welded"] = tuple(plan["welded"]) if plan["welded"] else None
        plan["charger"] = ChargerPlan.from_json(plan["charger"])
        return cls(**plan)


def plan_of(bench: Bench, charger: ChargerFile) -> Plan:
    """The numbers of a bench and a charger.

    Raises ValueError for a bench without a 'virtual' section, and BadInput for a channel that is no number.
    """
    virtual, node = bench.virtual, bench.wiring.node
    if virtual is None:
        raise ValueError(f"bench '{bench.name}' has no 'virtual' section; only a virtual bench can be played")
    return Plan(
        places=tuple(bench.wired()),
        charger=charger.plan(),
        line_Hz=float(bench.line_frequency.removesuffix(" Hz")),
        shunt_ohm=node.current.shunt_ohm,
        shunt_tolerance=_tolerance(node.current.shunt),
        shunt_factor=virtual.shunt_factor,
        ballast_ohm=node.ballast,
        leads_ohm=virtual.leads,
        delay_s=virtual.node.delay,
        settling_s=virtual.node.settling,
        meter_delay_s=virtual.meter_delay,
        supply_most_A=virtual.supply_limit,
        errors=virtual.errors,
        node_offset_V=virtual.node_offset,
        channels=tuple(_channels(bench)),
        plain=tuple(name for name, part in bench.instruments.items() if Path(part.dialect).stem.startswith(PLAIN)),
        precharge_ohm=node.contacts.precharge_resistor if node.contacts else None,
        taps=tuple(TapShunt(tap.shunt_ohm, _tolerance(tap.shunt)) for tap in bench.wiring.taps),
        tap_ohm=virtual.tap_resistance,
        contact_walk_ohm=virtual.contact_walk,
        glitch_s=virtual.resistor_glitch,
        welded=(virtual.welded.instrument, _number(bench.name, virtual.welded)) if virtual.welded else None,
        ambient_C=virtual.ambient,
        troubles=tuple(Trouble(one.at, one.does, one.instrument, one.lasts) for one in virtual.troubles),
    )


def _tolerance(shunt: Shunt) -> float:
    assert shunt.high is not None
    assert shunt.nominal is not None
    return shunt.high / shunt.nominal - 1.0


def _channels(bench: Bench) -> Iterator[tuple[str, int]]:
    for where, what, _ in bench.wiring.places():
        if not isinstance(what, str):
            yield where, _number(bench.name, what)


def _number(bench: str, channel: Channel) -> int:
    from drivers.text.faults import BadInput, Fault, Place

    if not channel.channel.isdecimal() or not 0 < int(channel.channel) <= MOST_CHANNEL:
        told = f"'{channel}': the channels of a virtual instrument are numbers from 1 to {MOST_CHANNEL}"
        raise BadInput([Fault(Place(f"bench '{bench}'"), told)])
    return int(channel.channel)


def dumps(content: dict[str, Any]) -> str:
    """One line of JSON; floats keep every digit."""
    return json.dumps(content, separators=(",", ":"))
