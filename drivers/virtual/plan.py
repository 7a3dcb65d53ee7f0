"""A virtual bench in plain numbers, so that the process that plays it needs neither YAML nor models to start."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any

from drivers.virtual.charger import ChargerPlan, Stage

if TYPE_CHECKING:
    from drivers.bench import Bench
    from drivers.virtual.charger_file import ChargerFile


@dataclass(frozen=True)
class Plan:
    """places: (place in the wiring, instrument's name). Units in the names; `errors` scales all imperfections."""

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

    def to_json(self) -> dict[str, Any]:
        return asdict(self)

    @classmethod
    def from_json(cls, content: dict[str, Any]) -> Plan:
        charger = dict(content["charger"])
        charger["stages"] = tuple(Stage(**stage) for stage in charger["stages"])
        places = tuple((where, name) for where, name in content["places"])
        return cls(**{**content, "places": places, "charger": ChargerPlan(**charger)})


def plan_of(bench: Bench, charger: ChargerFile) -> Plan:
    """The numbers of a bench and a charger. Raises ValueError for a bench without a 'virtual' section."""
    virtual, node = bench.virtual, bench.wiring.node
    if virtual is None:
        raise ValueError(f"bench '{bench.name}' has no 'virtual' section; only a virtual bench can be played")
    shunt = node.current.shunt
    assert shunt.high is not None
    return Plan(
        places=tuple(bench.wired()),
        charger=charger.plan(),
        line_Hz=float(bench.line_frequency.removesuffix(" Hz")),
        shunt_ohm=node.current.shunt_ohm,
        shunt_tolerance=shunt.high / node.current.shunt_ohm - 1.0,
        shunt_factor=virtual.shunt_factor,
        ballast_ohm=node.ballast,
        leads_ohm=virtual.leads,
        delay_s=virtual.node.delay,
        settling_s=virtual.node.settling,
        meter_delay_s=virtual.meter_delay,
        supply_most_A=virtual.supply_limit,
        errors=virtual.errors,
        node_offset_V=virtual.node_offset,
    )


def dumps(content: dict[str, Any]) -> str:
    """One line of JSON; floats keep every digit."""
    return json.dumps(content, separators=(",", ":"))
